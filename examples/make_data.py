"""Makes the data of the examples: python3 examples/make_data.py

All of it is invented. The Ellenmere reservoir does not exist, nobody has measured anything there, and the numbers below
are random ones around formulas, with seeds, so that this script writes the same files again.
"""

from pathlib import Path

import numpy as np

HERE = Path(__file__).parent


def tracer():
    """Dye concentration past a gauge, read to some 10 %; the boat left soon after the densest part of the cloud."""
    rng = np.random.default_rng(850)
    mass, reach = 5200.0, 850.0
    section, velocity, dispersion, error = 1.9, 0.44, 7.0, 0.1
    time = np.arange(1320, 2281, 60)
    cloud = mass / (section * np.sqrt(4 * np.pi * dispersion * time))
    mean = cloud * np.exp(-((reach - velocity * time) ** 2) / (4 * dispersion * time))
    concentration = mean * np.exp(error * rng.standard_normal(len(time)))
    rows = "".join(f"{t},{c:.3g}\n" for t, c in zip(time, concentration))
    (HERE / "tracer.csv").write_text("time,concentration\n" + rows)


def rating():
    """Gaugings of a spillway: stage and flow; now and then one went badly wrong (Student-t scatter, 2 degrees)."""
    rng = np.random.default_rng(1887)
    stage = np.sort(rng.uniform(0.55, 2.4, 26)).round(2)
    flow = 11.5 * (stage - 0.31) ** 1.62 * np.exp(0.05 * rng.standard_t(2.0, len(stage)))
    rows = "".join(f"{h:.2f},{q:.3g}\n" for h, q in zip(stage, flow))
    (HERE / "rating.csv").write_text("stage,flow\n" + rows)


def leak():
    """Rise of pressure head at five gauges along the foot of the dam, one of them a little off the line."""
    rng = np.random.default_rng(33)
    east = np.array([-60.0, -25.0, 0.0, 30.0, 70.0])
    north = np.array([0.0, 0.0, 1.5, 0.0, 0.0])
    distance = np.hypot(12.0 - east, 17.0 - north)
    rise = 0.85 * np.log(1 + 120.0 / distance) + 0.04 * rng.standard_normal(len(east))
    rows = "".join(f"{e:g},{n:g},{r:.3f}\n" for e, n, r in zip(east, north, rise))
    (HERE / "leak.csv").write_text("gauge_east,gauge_north,rise\n" + rows)


if __name__ == "__main__":
    tracer()
    rating()
    leak()
