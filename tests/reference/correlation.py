"""Reference values for the test in src/distribution/correlation.rs, from double integrals over independent scores.

Written with SciPy 1.17.1 and NumPy 2.4.6: python3 tests/reference/correlation.py
Continuous pairs: E[x(U) y(r U + sqrt(1 - r^2) V)] by the 200-point Gauss-Hermite rule in both (their functions are
smooth). A discrete y: given U its expectation is a sum of normal tails; two discrete ones: a sum over bivariate normal
orthants by a single integral with the jumps as panel ends.
"""

import numpy as np
from scipy import integrate, stats

nodes, weights = np.polynomial.hermite_e.hermegauss(200)
weights = weights / np.sqrt(2 * np.pi)


def exponential(u):
    return -stats.norm.logsf(u)


def gumbel(u):
    return -np.log(-stats.norm.logcdf(np.minimum(u, 37.0)))  # beyond, the weights vanish


def continuous(x, y, mx, my, sx, sy, r):
    u, v = nodes[:, None], nodes[None, :]
    w = r * u + np.sqrt(1 - r * r) * v
    return (np.sum(weights[:, None] * weights[None, :] * x(u) * y(w)) - mx * my) / (sx * sy)


def given_score(law, r):
    jumps = stats.norm.isf(law.sf(np.arange(0, 60)))
    jumps = jumps[np.isfinite(jumps) & (np.abs(jumps) < 35)]
    return jumps, lambda u: stats.norm.sf((jumps - r * u) / np.sqrt(1 - r * r)).sum()


def mixed(x, law, mx, sx, r):
    _, mean = given_score(law, r)
    total = integrate.quad(lambda u: x(u) * mean(u) * stats.norm.pdf(u), -12, 12, epsabs=1e-13, epsrel=1e-12, limit=2000)[0]
    return (total - mx * law.mean()) / (sx * law.std())


def discrete(first, law, r):
    jumps, _ = given_score(first, 0.5)
    _, mean = given_score(law, r)
    total = 0.0
    ends = list(np.sort(jumps)) + [14.0]
    for k, (a, b) in enumerate(zip(ends, ends[1:]), start=1):
        total += k * integrate.quad(lambda u: mean(u) * stats.norm.pdf(u), a, b, epsabs=1e-14, epsrel=1e-12, limit=2000)[0]
    return (total - first.mean() * law.mean()) / (first.std() * law.std())


e, g = (1.0, 1.0), (np.euler_gamma, np.pi / np.sqrt(6))
poisson, coin = stats.poisson(2.5), stats.binom(1, 0.3)
for r in (-0.7, 0.5, 0.9):
    print("exponential, exponential", r, repr(float(continuous(exponential, exponential, e[0], e[0], e[1], e[1], r))))
    print("exponential, gumbel", r, repr(float(continuous(exponential, gumbel, e[0], g[0], e[1], g[1], r))))
    print("exponential, poisson", r, repr(float(mixed(exponential, poisson, e[0], e[1], r))))
    print("poisson, coin", r, repr(float(discrete(poisson, coin, r))))
