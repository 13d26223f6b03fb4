#!/usr/bin/env python3
"""Routing of a flood through the (invented) Ellenmere reservoir: the highest water level.

A line on standard input: peak inflow (m3/s), time to peak (h), level before the flood (m), blocked share of the
spillway. A line on standard output: the highest level (m). Nothing is needed but Python itself.

The level h follows  A(h) dh/dt = inflow(t) - outflow(h),  with the area A of the water surface, a hydrograph
inflow(t) = base + (peak - base) (t/tp exp(1 - t/tp))^4, and a spillway whose rating curve is C W (1 - blocked) (h - crest)^1.5.
Classical Runge-Kutta steps of fixed length.
"""
import math
import sys

BASE = 8.0  # m3/s before the flood
CREST = 24.0  # m, of the spillway
WIDTH = 30.0  # m
RATING = 1.9  # m^0.5/s
AREA = 6.0e5  # m2 of water surface at 20 m
SPREAD = 0.12  # 1/m: how the area grows with the level
STEPS = 240  # steps ...
LENGTH = 4.0  # ... over so many times to peak


def rate(seconds, level, peak, peak_time, width):
    """dh/dt, in m/s."""
    s = seconds / peak_time
    wave = s * math.exp(1.0 - s)
    square = wave * wave
    inflow = BASE + (peak - BASE) * (square * square)
    head = level - CREST
    outflow = RATING * width * head * math.sqrt(head) if head > 0.0 else 0.0
    return (inflow - outflow) / (AREA * (1.0 + SPREAD * (level - 20.0)))


def highest_level(peak, hours, start, blocked):
    peak_time = hours * 3600.0
    width = WIDTH * (1.0 - blocked)
    step = LENGTH * peak_time / STEPS
    level = highest = start
    for i in range(STEPS):
        t = i * step
        k1 = rate(t, level, peak, peak_time, width)
        k2 = rate(t + 0.5 * step, level + 0.5 * step * k1, peak, peak_time, width)
        k3 = rate(t + 0.5 * step, level + 0.5 * step * k2, peak, peak_time, width)
        k4 = rate(t + step, level + step * k3, peak, peak_time, width)
        level += step / 6.0 * (k1 + 2.0 * k2 + 2.0 * k3 + k4)
        highest = max(highest, level)
    return highest


if __name__ == "__main__":
    for line in sys.stdin:
        values = line.split()
        if values:  # an empty line ends a batch
            print(highest_level(*map(float, values)), flush=True)
