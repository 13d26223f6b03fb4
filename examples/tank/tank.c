/* Routing of a flood through the (invented) Ellenmere reservoir: tank.py in C, as a program and as a library.
 *
 *   cc -O2 -o tank tank.c -lm                          the program: lines on standard input, lines on standard output
 *   cc -O2 -shared -fPIC -o libtank.so tank.c -lm      the library: tank_peak
 */
#include <math.h>
#include <stdint.h>
#include <stdio.h>

static const double BASE = 8.0, CREST = 24.0, WIDTH = 30.0, RATING = 1.9, AREA = 6.0e5, SPREAD = 0.12, LENGTH = 4.0;
enum { STEPS = 240 };

/* dh/dt in m/s */
static double rate(double seconds, double level, double peak, double peak_time, double width) {
    double s = seconds / peak_time;
    double wave = s * exp(1.0 - s);
    double square = wave * wave;
    double inflow = BASE + (peak - BASE) * (square * square);
    double head = level - CREST;
    double outflow = head > 0.0 ? RATING * width * head * sqrt(head) : 0.0;
    return (inflow - outflow) / (AREA * (1.0 + SPREAD * (level - 20.0)));
}

static double highest_level(double peak, double hours, double start, double blocked) {
    double peak_time = hours * 3600.0, width = WIDTH * (1.0 - blocked), step = LENGTH * peak_time / STEPS;
    double level = start, highest = start;
    for (int i = 0; i < STEPS; i++) {
        double t = i * step;
        double k1 = rate(t, level, peak, peak_time, width);
        double k2 = rate(t + 0.5 * step, level + 0.5 * step * k1, peak, peak_time, width);
        double k3 = rate(t + 0.5 * step, level + 0.5 * step * k2, peak, peak_time, width);
        double k4 = rate(t + step, level + step * k3, peak, peak_time, width);
        level += step / 6.0 * (k1 + 2.0 * k2 + 2.0 * k3 + k4);
        if (level > highest) highest = level;
    }
    return highest;
}

/* The C interface of evenpoise, version 1. */
int32_t evenpoise_model_version(void) { return 1; }

/* n points of d = 4 values, point by point; one answer each. It keeps no state, so any thread may call it. */
int32_t tank_peak(const double *x, size_t n, size_t d, double *out, size_t r) {
    if (d != 4 || r != 1) return 1;
    for (size_t i = 0; i < n; i++, x += 4) out[i] = highest_level(x[0], x[1], x[2], x[3]);
    return 0;
}

int main(void) {
    char line[512];
    double a, b, c, d;
    while (fgets(line, sizeof line, stdin)) {
        if (sscanf(line, "%lf %lf %lf %lf", &a, &b, &c, &d) == 4)
            printf("%.17g\n", highest_level(a, b, c, d));
        else
            fflush(stdout); /* an empty line ends a batch */
    }
    return 0;
}
