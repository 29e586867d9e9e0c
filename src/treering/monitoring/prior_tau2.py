"""Between-trial variance under an informative prior.

Higgins, Whitehead and Simmonds 2011, Stat Med 30:903 (read as an abstract), start tau2 from an informative
inverse-gamma prior so that a sequential analysis of few trials does not rest on a tau2 of zero. Here the
posterior mean is taken over the restricted likelihood by one-dimensional integration; the shape of the
prior is our choice.
"""

from __future__ import annotations

import numpy as np

from treering.monitoring.checks import FloatArray, check_positive

#: Shape of the inverse-gamma prior: the mean exists, the variance does not, so data soon outweigh it.
SHAPE = 2.0
_NODES = 400
_SPAN = 9.0  # natural logarithms on each side of the middle


def posterior_mean_tau2(estimates: FloatArray, variances: FloatArray, *, prior_mean: float) -> float:
    """Return the posterior mean of tau2 under an inverse-gamma prior.

    Parameters
    ----------
    estimates, variances : numpy.ndarray, shape (k,)
        Effects on the analysis scale with variances.
    prior_mean : float
        Prior mean of tau2, above 0, on the squared analysis scale. With shape 2 the prior's scale
        parameter equals its mean.

    Returns
    -------
    float
        With one trial the restricted likelihood says nothing, and the (truncated) prior mean comes back.
    """
    check_positive(prior_mean, "prior mean of tau2")
    middle = np.log(max(prior_mean, float(np.var(estimates))))
    low = min(np.log(prior_mean), middle) - _SPAN
    log_tau2 = np.linspace(low, middle + _SPAN, _NODES)
    tau2 = np.exp(log_tau2)
    w = 1.0 / (variances[:, None] + tau2)
    total = w.sum(axis=0)
    mean = (w * estimates[:, None]).sum(axis=0) / total
    q = (w * (estimates[:, None] - mean) ** 2).sum(axis=0)
    likelihood = 0.5 * (np.log(w).sum(axis=0) - np.log(total) - q)
    prior = -(SHAPE + 1.0) * log_tau2 - prior_mean * (SHAPE - 1.0) / tau2
    log_density = likelihood + prior + log_tau2  # one more log for the change of variable
    weight = np.exp(log_density - log_density.max())
    return float(weight @ tau2 / weight.sum())
