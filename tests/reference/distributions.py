"""Reference values for tests/distributions.rs: writes tests/reference/distributions.csv.

Written with mpmath 1.3.0 (SciPy 1.17.1 only chooses the points). Run from the repository:
    python3 tests/reference/distributions.py
Every number comes from the definition of the distribution in mpmath at 60 digits and more: closed forms, `gammainc`,
and, for beta, Student's t and the binomial, the hypergeometric series of positive terms (DLMF 8.17.8). A far tail is
never one minus the other.

Columns: case, x, log density (or log mass), log P(X <= x), log P(X > x).
The points of a continuous case have these probabilities below: 1e-300, 1e-100, 1e-20, 1e-6, 0.02, 0.3 and the same
above; for those too near an end for a double to be there 0.1, 0.45, 0.003, 0.2 stand in.
"""

import csv
import pathlib

import mpmath as mp

mp.mp.dps = 60
half = mp.mpf(1) / 2


def log_small_beta(a, b, x, y):
    """log I_x(a, b) for x below the mean: x^a y^b/(a B) 2F1(a + b, 1; a + 1; x), every term positive."""
    term = total = mp.mpf(1)
    n = 0
    while term > total * mp.mpf(10) ** (-55):
        term *= (a + b + n) * x / (a + 1 + n)
        total += term
        n += 1
    front = a * mp.log(x) + b * mp.log(y) - mp.log(a)
    return front - (mp.loggamma(a) + mp.loggamma(b) - mp.loggamma(a + b)) + mp.log(total)


def log_beta_tails(a, b, x, y):
    if x * (a + b) < a:
        low = log_small_beta(a, b, x, y)
        return low, mp.log1p(-mp.exp(low))
    high = log_small_beta(b, a, y, x)
    return mp.log1p(-mp.exp(high)), high


def log_gamma_tails(a, x):
    """Series DLMF 8.7.1 below the mean; above it the integral, at enough digits that nothing cancels."""
    if x < a:
        term = total = 1 / a
        n = a
        while term > total * mp.mpf(10) ** (-55):
            n += 1
            term *= x / n
            total += term
        low = a * mp.log(x) - x - mp.loggamma(a) + mp.log(total)
        return low, mp.log1p(-mp.exp(low))
    high = mp.log(mp.gammainc(a, x, mp.inf, regularized=True))
    return mp.log1p(-mp.exp(high)), high


def normal_tails(z):
    if z < 0:
        low = mp.log(mp.erfc(-z / mp.sqrt(2)) / 2)
        return low, mp.log1p(-mp.exp(low))
    high = mp.log(mp.erfc(z / mp.sqrt(2)) / 2)
    return mp.log1p(-mp.exp(high)), high


def exponential_tails(e):
    """Of the unit exponential variable at e."""
    return mp.log(-mp.expm1(-e)) if e < 1 else mp.log1p(-mp.exp(-e)), -e


def swap(tails):
    return tails[1], tails[0]


def log_normal_density(z):
    return -z * z / 2 - mp.log(2 * mp.pi) / 2


def student(df, t):
    x = df / (df + t * t)
    y = t * t / (df + t * t)
    low, high = log_beta_tails(df / 2, half, x, y)
    above = mp.log(half) + low
    tails = mp.log1p(-mp.exp(above)), above
    density = mp.loggamma((df + 1) / 2) - mp.loggamma(df / 2) - mp.log(df * mp.pi) / 2
    return (density - (df + 1) / 2 * mp.log1p(t * t / df),) + (swap(tails) if t < 0 else tails)


def student_million(t):
    """Many degrees of freedom: the same series by `hyp2f1`, which sums slow ones otherwise; 100 digits."""
    with mp.workdps(100):
        df = mp.mpf(10) ** 6
        a, x, y = df / 2, df / (df + t * t), t * t / (df + t * t)
        front = x**a * mp.sqrt(y) / mp.beta(a, half)
        if abs(t) > 1:
            above = front / a * mp.hyp2f1(a + half, 1, a + 1, x) / 2
        else:
            above = half - front * mp.hyp2f1(a + half, 1, 3 * half, y)
        tails = mp.log1p(-above), mp.log(above)
        density = mp.loggamma((df + 1) / 2) - mp.loggamma(df / 2) - mp.log(df * mp.pi) / 2
        return (density - (df + 1) / 2 * mp.log1p(t * t / df),) + (swap(tails) if t < 0 else tails)


def binomial(n, p, k):
    mass = mp.log(mp.binomial(n, k)) + k * mp.log(p) + (n - k) * mp.log1p(-p)
    below = sum(mp.binomial(n, j) * p**j * (1 - p) ** (n - j) for j in range(int(k) + 1))
    above = sum(mp.binomial(n, j) * p**j * (1 - p) ** (n - j) for j in range(int(k) + 1, int(n) + 1))
    if above == 0:
        return mass, mp.mpf(0), -mp.inf
    return (mass, mp.log(below), mp.log1p(-below)) if below < half else (mass, mp.log1p(-above), mp.log(above))


def poisson(mean, k):
    mass = -mean + k * mp.log(mean) - mp.loggamma(k + 1)
    below = mp.exp(-mean) * sum(mean**j / mp.factorial(j) for j in range(int(k) + 1))
    term = mp.exp(mass)
    above, j = mp.mpf(0), k
    while True:
        j += 1
        term *= mean / j
        above += term
        if j > mean and term < above * mp.mpf(10) ** (-55):
            return (mass, mp.log(below), mp.log1p(-below)) if below < half else (mass, mp.log1p(-above), mp.log(above))


def gev(shape, t):
    s = mp.log1p(shape * t) / shape if shape else t
    return (-(1 + shape) * s - mp.exp(-s),) + swap(exponential_tails(mp.exp(-s)))


def cauchy(t):
    above = mp.log(mp.atan(1 / abs(t)) / mp.pi)
    tails = mp.log1p(-mp.exp(above)), above
    return (-mp.log(mp.pi) - mp.log1p(t * t),) + (swap(tails) if t < 0 else tails)


def half_cauchy(t):
    above = 2 * mp.atan(1 / t) / mp.pi
    tails = mp.log(2 * mp.atan(t) / mp.pi) if t < 1 else mp.log1p(-above), mp.log(above) if t > 1 else mp.log1p(-2 * mp.atan(t) / mp.pi)
    return (mp.log(2 / mp.pi) - mp.log1p(t * t),) + tails


def half_normal(x):
    inside, outside = mp.erf(x / mp.sqrt(2)), mp.erfc(x / mp.sqrt(2))
    tails = (mp.log(inside), mp.log1p(-inside)) if x < 1 else (mp.log1p(-outside), mp.log(outside))
    return (mp.log(2) + log_normal_density(x),) + tails


def triangular(low, mode, high, x):
    width = high - low
    if x <= mode:
        below = (x - low) ** 2 / (width * (mode - low))
        return mp.log(2 * (x - low) / (width * (mode - low))), mp.log(below), mp.log1p(-below)
    above = (high - x) ** 2 / (width * (high - mode))
    return mp.log(2 * (high - x) / (width * (high - mode))), mp.log1p(-above), mp.log(above)


def scaled(answer, scale):
    density, low, high = answer
    return density - mp.log(scale), low, high


def gamma(shape, x):
    return ((shape - 1) * mp.log(x) - x - mp.loggamma(shape),) + log_gamma_tails(shape, x)


def beta(a, b, x, y):
    front = mp.loggamma(a) + mp.loggamma(b) - mp.loggamma(a + b)
    return ((a - 1) * mp.log(x) + (b - 1) * mp.log(y) - front,) + log_beta_tails(a, b, x, y)


def lognormal(m, s, x):
    z = (mp.log(x) - m) / s
    return (log_normal_density(z) - mp.log(s * x),) + normal_tails(z)


def inverse_gamma(shape, scale, x):
    density, low, high = gamma(shape, scale / x)
    return density + mp.log(scale) - 2 * mp.log(x), high, low


def weibull(k, t):
    return (mp.log(k) + (k - 1) * mp.log(t) - t**k,) + exponential_tails(t**k)


def logistic(t):
    return -t - 2 * mp.log1p(mp.exp(-t)), -mp.log1p(mp.exp(-t)), -mp.log1p(mp.exp(t))


f = mp.mpf
# Name of the case in the Rust test: (values at x, lower end of the search, upper end, in logs of the distance from an end?)
CASES = {
    "normal": (lambda x: scaled((log_normal_density((x - 3) / 2),) + normal_tails((x - 3) / 2), f(2)), -80, 90, None),
    "lognormal": (lambda x: lognormal(f("0.4"), f("0.75"), x), 1e-15, 1e15, "low"),
    "uniform": (lambda x: (-mp.log(5), mp.log((x + 2) / 5), mp.log((3 - x) / 5)), -2, 3, "both"),
    "exponential": (lambda x: (mp.log(f("0.5")) - x / 2,) + exponential_tails(x / 2), 1e-305, 1500, "low"),
    "gamma": (lambda x: scaled(gamma(f("2.5"), x * 3), f(1) / 3), 1e-130, 300, "low"),
    "gamma-small": (lambda x: scaled(gamma(f("0.25"), x), f(1)), mp.mpf(10) ** -1300, 800, "low"),
    "gamma-large": (lambda x: scaled(gamma(f(5000), x * 100), f(1) / 100), 10, 100, None),
    "inverse-gamma": (lambda x: inverse_gamma(f(3), f(2), x), 1e-4, 1e101, "low"),
    "chi-squared": (lambda x: scaled(gamma(f("3.5"), x / 2), f(2)), 1e-88, 1600, "low"),
    "beta": (lambda x: beta(f("2.5"), f("1.5"), x, 1 - x), 0, 1, "both"),
    "beta-wide": (lambda x: scaled(beta(f(4), f(6), (x - 2) / 8, (10 - x) / 8), f(8)), 2, 10, "both"),
    "weibull": (lambda x: scaled(weibull(f("1.75"), x / 4), f(4)), 1e-173, 200, "low"),
    "gumbel": (lambda x: scaled(gev(f(0), (x - 1) / 2), f(2)), -20, 1400, None),
    "gumbel-min": (lambda x: (lambda g: (g[0], g[2], g[1]))(scaled(gev(f(0), -(x - 1) / 2), f(2))), -1400, 20, None),
    "gev-heavy": (lambda x: scaled(gev(f("0.25"), (x - 1) / 2), f(2)), f("-6.99"), 1e78, "low"),
    "gev-bounded": (lambda x: scaled(gev(f("-0.5"), (x - 1) / 2), f(2)), -160, 5, "high"),
    "pareto": (lambda x: (mp.log(f("1.5")) - mp.log(2) - f("2.5") * mp.log(x / 2),) + exponential_tails(f("1.5") * mp.log(x / 2)), 2, 1e202, "low"),
    "student-t": (lambda x: scaled(student(f("4.5"), (x - 1) / 2), f(2)), -1e70, 1e70, "whole"),
    "student-t-million": (student_million, -37.0625, 37.0625, "points"),
    "cauchy": (lambda x: scaled(cauchy((x - 1) / 2), f(2)), -1e301, 1e301, "whole"),
    "half-normal": (lambda x: scaled(half_normal(x / 3), f(3)), 1e-302, 120, "low"),
    "half-cauchy": (lambda x: scaled(half_cauchy(x / 3), f(3)), 1e-302, 1e302, "low"),
    "logistic": (lambda x: scaled(logistic((x - 1) / 2), f(2)), -1400, 1400, None),
    "triangular": (lambda x: triangular(f(1), f(2), f(5), x), 1, 5, "both"),
}
DISCRETE = {
    "bernoulli": (lambda k: binomial(f(1), f("0.3"), k), [0]),
    "binomial": (lambda k: binomial(f(60), f("0.3"), k), [0, 1, 2, 5, 10, 14, 18, 19, 25, 35, 45, 55, 59]),
    "binomial-rare": (lambda k: binomial(f(2000), f("0.001953125"), k), [0, 1, 2, 3, 5, 8, 13, 30, 60, 100, 150, 180]),
    "poisson": (lambda k: poisson(f("7.5"), k), [0, 1, 2, 4, 7, 8, 11, 15, 30, 60, 100, 180]),
    "poisson-large": (lambda k: poisson(f(900), k), [0, 200, 400, 600, 800, 890, 899, 910, 950, 1100, 1500, 2300]),
    "geometric": (lambda k: (mp.log(f("0.25")) + (k - 1) * mp.log(f("0.75")),) + exponential_tails(-k * mp.log(f("0.75"))), [1, 2, 3, 4, 6, 8, 12, 20, 60, 160, 800, 2400]),
    "integers": (lambda k: (-mp.log(20), mp.log(f(int(k) + 8) / 20), mp.log(f(12 - int(k)) / 20)), [-7, -6, -5, -3, -1, 0, 1, 3, 5, 8, 10, 11]),
}


def point(values, low, high, way, target, upper):
    """A double whose tail is about `target`: bisection in the coordinate that `way` names."""
    low, high = f(low), f(high)

    def at(s):
        if way == "low":
            return origin + mp.exp(s)
        if way == "high":
            return high - mp.exp(s)
        if way == "whole":
            return mp.sinh(s)
        if way == "both":
            return high - mp.exp(s) if upper else low + mp.exp(s)
        return s

    origin = {"pareto": f(2), "gev-heavy": f(-7)}.get(current, f(0))
    if way == "low":
        left, right = mp.log(mp.mpf(10) ** -1300), mp.log(high)
    elif way == "high":
        left, right = mp.log(mp.mpf(10) ** -300), mp.log(high - low)
    elif way == "both":
        left, right = mp.log(mp.mpf(10) ** -310), mp.log(high - low)
    elif way == "whole":
        left, right = mp.asinh(low), mp.asinh(high)
    else:
        left, right = low, high
    grows = (way in ("high",) and upper) or (way == "both") or (way not in ("high",) and not upper)
    for _ in range(45):
        middle = (left + right) / 2
        try:
            tail = values(at(middle))[2 if upper else 1]
        except (ValueError, ZeroDivisionError):
            tail = -mp.inf
        if (tail < mp.log(target)) == grows:
            left = middle
        else:
            right = middle
    return float(at((left + right) / 2))


# The last four stand in for those too near an end for a double.
TARGETS = [f(10) ** -300, f(10) ** -100, f(10) ** -20, f(10) ** -6, f("0.02"), f("0.3"), f("0.1"), f("0.45"), f("0.003"), f("0.2")]

rows = []
for current, (values, low, high, way) in CASES.items():
    for upper in (False, True):
        points = []
        for target in TARGETS:
            if way == "points":
                z = -mp.sqrt(2) * mp.erfinv(2 * target - 1) if target > f(10) ** -50 else mp.sqrt(-2 * mp.log(target))
                x = (1 if upper else -1) * float(z)
            else:
                x = point(values, low, high, way, target, upper)
            if x not in (low, high, 2.0) and abs(x) > 1e-307 and x not in points and len(points) < 6:
                points.append(x)
        rows += [[current, repr(x)] + [repr(float(v)) for v in values(f(x))] for x in points]
    print(current, flush=True)
for current, (values, points) in DISCRETE.items():
    for k in points:
        rows.append([current, repr(float(k))] + [repr(float(v)) for v in values(f(k))])
    print(current, flush=True)

path = pathlib.Path(__file__).with_name("distributions.csv")
with path.open("w", newline="") as file:
    writer = csv.writer(file, lineterminator="\n")
    writer.writerow(["case", "x", "log_density", "log_lower_tail", "log_upper_tail"])
    writer.writerows(rows)
