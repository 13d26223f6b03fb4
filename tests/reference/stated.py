"""Reference values for tests/stated_problems.rs. Written with NumPy 2.4.6 and SciPy 1.17.1: python3 tests/reference/stated.py

Rating curve: SciPy's log densities, added up over the rows that have a flow.
Scores: for each pair the correlation r of the standard normal scores with
    E[(x(U) - mx)(y(r U + sqrt(1 - r^2) V) - my)] = linear sx sy,
the expectation by a 120-point Gauss-Hermite rule in both, the moments by the same rule, r by Brent's method.
The uniform and the beta variable have kinks at infinity only, so that the rule converges for them as well.
"""

import numpy as np
from scipy import optimize, stats

nodes, weights = np.polynomial.hermite_e.hermegauss(120)
weights = weights / np.sqrt(2 * np.pi)


def quantiles(law):
    """x(u) by the tail that u is in."""
    return lambda u: np.where(u < 0, law.ppf(stats.norm.cdf(u)), law.isf(stats.norm.sf(u)))


gumbel_scale = 12.0 * np.sqrt(6) / np.pi
gamma_shape = (2.0 / 0.5) ** 2
log_sd = np.sqrt(np.log1p(0.15**2))
laws = {
    "inflow": stats.gumbel_r(40.0 - np.euler_gamma * gumbel_scale, gumbel_scale),
    "strength": stats.lognorm(log_sd, scale=np.exp(np.log(30.0) - log_sd**2 / 2)),
    "wear": stats.gamma(gamma_shape, scale=0.5**2 / 2.0),
    "seepage": stats.expon(scale=1.5),
    "opening": stats.beta(2.0, 3.0),
    "depth": stats.norm(5.0, 0.4),
}
linear = [
    [],
    [-0.30],
    [0.25, -0.40],
    [0.35, 0.10, 0.30],
    [0.20, 0.05, -0.15, 0.10],
    [0.50, -0.10, 0.15, 0.20, 0.30],
]


def score(x, y, wanted):
    u, v = nodes[:, None], nodes[None, :]
    w = weights[:, None] * weights[None, :]
    xs, ys = x(nodes), y(nodes)
    mx, my = weights @ xs, weights @ ys
    sx, sy = np.sqrt(weights @ (xs - mx) ** 2), np.sqrt(weights @ (ys - my) ** 2)

    def off(r):
        return np.sum(w * (x(u) - mx) * (y(r * u + np.sqrt(1 - r * r) * v) - my)) / (sx * sy) - wanted

    return optimize.brentq(off, -0.95, 0.95, xtol=1e-14)


names = list(laws)
print("scores, row by row below the diagonal")
for i, row in enumerate(linear):
    print([float(f"{score(quantiles(laws[names[i]]), quantiles(laws[names[j]]), row[j]):.10f}") for j in range(i)])

stage = {"Alder": [(0.52, 2.9), (0.81, 7.4)], "Birch": [(0.44, 2.2), (1.02, 11.3)], "Cedar": [(0.67, 4.1)]}
a, b, noise, between = 11.0, 1.6, 0.12, 0.2
effects = {"Alder": 0.05, "Birch": -0.11, "Cedar": 0.3}
prior = (
    stats.lognorm.logpdf(a, 0.5, scale=10.0)
    + stats.norm.logpdf(b, 1.5, 0.3)
    + stats.halfnorm.logpdf(noise, scale=0.2)
    + stats.halfcauchy.logpdf(between, scale=0.3)
    + sum(stats.norm.logpdf(e, 0.0, between) for e in effects.values())
)
likelihood = sum(
    stats.norm.logpdf(np.log(q), np.log(a) + effects[s] + b * np.log(h), noise)
    for s, rows in stage.items()
    for h, q in rows
)
print("rating curve, log density", repr(prior + likelihood))
