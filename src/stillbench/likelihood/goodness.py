"""Does the model explain the powers? A test of the fit, and a score for a droop at the top of the band."""

import numpy as np

from stillbench.likelihood.bins import BinnedPowers
from stillbench.likelihood.fit import Fit, residual_power


def goodness_of_fit(bins: BinnedPowers, fit: Fit) -> float:
    """Return a standard normal statistic of the deviance of binned powers; large means that the model is wrong.

    Z = sum (nu_j (P_j/S_j - 1 - ln(P_j/S_j)) - e_j) / sqrt(sum v_j), with e_j = nu_j (ln(nu_j/2) - psi(nu_j/2)) and
    v_j = nu_j^2 psi'(nu_j/2) - 2 nu_j the mean and variance of the summand for gamma-distributed powers. It misses a
    doubling of the noise half-way and weak lines.

    Parameters
    ----------
    bins : BinnedPowers
    fit : Fit
        Of the same bins; what its mean shapes explain is taken off first.
    """
    from scipy.special import polygamma, psi  # noqa: PLC0415  heavy imports stay inside functions

    half = bins.dof / 2.0
    ratio = np.maximum(residual_power(bins, fit) / fit.spectrum, np.finfo(float).tiny)
    deviance = bins.dof * (ratio - 1.0 - np.log(ratio))
    expected = bins.dof * (np.log(half) - psi(half))
    variance = bins.dof**2 * polygamma(1, half) - 2.0 * bins.dof
    return float(np.sum(deviance - expected) / np.sqrt(np.sum(variance)))


def droop_score(bins: BinnedPowers, fit: Fit, top: float) -> float:
    """Return the efficient score, standard normal, of extra white power that grows as (f/top)^2.

    Strongly negative: the spectrum falls towards the top of the band, as behind a low-pass filter.
    """
    extra = (bins.frequency / top) ** 2 * float(np.mean(fit.spectrum))
    inverse = 1.0 / fit.spectrum**2
    present = fit.theta > 0
    basis = bins.basis[:, present]
    gradient = 0.5 * float(np.sum(bins.dof * extra * (residual_power(bins, fit) - fit.spectrum) * inverse))
    weight = 0.5 * bins.dof * inverse
    own = float(np.sum(weight * extra**2))
    shared = basis.T @ (weight * extra)
    block = (basis * weight[:, None]).T @ basis
    scale = 1.0 / np.sqrt(np.diag(block))
    known = (scale * shared) @ np.linalg.pinv(block * np.outer(scale, scale)) @ (scale * shared)
    left = own - float(known)
    return gradient / np.sqrt(left) if left > 0 else 0.0
