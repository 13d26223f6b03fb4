"""Reference values of tests/problem_evidence.rs: SciPy 1.17.1, NumPy 2.4.6."""
import numpy as np
from scipy import integrate, stats
from scipy.special import betaln, gammaln, logsumexp

y = np.array([2.1, 2.6, 1.9, 3.4, 3.0, 3.7, 0.8, 1.3, 1.1, 2.2, 2.9, 2.5])
group = np.repeat(np.arange(4), 3)
same = (group[:, None] == group[None, :]).astype(float)

def joint(tau):
    cov = 0.25 * np.eye(12) + tau**2 * same + 100.0
    return stats.multivariate_normal(np.zeros(12), cov).pdf(y) * stats.halfnorm(scale=1.0).pdf(tau)

z = integrate.quad(joint, 0, 12, epsabs=0, epsrel=1e-11, limit=400)[0]
m = integrate.quad(lambda t: t * joint(t), 0, 12, epsabs=0, epsrel=1e-11, limit=400)[0]
print("one-way random effects: log Z %.10f, E tau %.10f" % (np.log(z), m / z))

n = np.arange(4, 400)
choose = gammaln(n + 1) - gammaln(5) - gammaln(n - 3)
log_term = stats.poisson(6.0).logpmf(n) + choose + betaln(4 + 2, n - 4 + 2) - betaln(2, 2)
log_z = logsumexp(log_term)
print("whole number: log Z %.10f, E n %.10f" % (log_z, np.exp(log_term - log_z) @ n))
