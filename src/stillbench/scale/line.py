"""Least squares with its uncertainty, and the combination of uncertainties.

References
----------
JCGM 100 (GUM) H.3: straight line by least squares; G.4: effective degrees of freedom (Welch-Satterthwaite).
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import FloatArray


@dataclass(frozen=True)
class LineFit:
    """A least-squares fit with equal weights.

    Attributes
    ----------
    values : (p,) float array
    covariance : (p, p) float array
        From the scatter of the residuals.
    residuals : (n,) float array
    scatter : float
        Standard deviation of the residuals, with n - p degrees of freedom.
    dof : int
    """

    values: FloatArray
    covariance: FloatArray
    residuals: FloatArray
    scatter: float
    dof: int


def fit_line(columns: Sequence[FloatArray], observed: FloatArray) -> LineFit:
    """Fit ``observed`` (n,) by ``columns``, p of (n,), n > p.

    Raises
    ------
    ValueError
        With too few observations.
    """
    design = np.column_stack(list(columns))
    count, terms = design.shape
    if count <= terms:
        raise ValueError(count)
    size = np.sqrt((design**2).sum(axis=0))
    values, *_ = np.linalg.lstsq(design / size, observed, rcond=None)
    values = values / size
    residuals = observed - design @ values
    scatter = math.sqrt(float(residuals @ residuals) / (count - terms))
    inverse = np.linalg.inv((design / size).T @ (design / size)) / np.outer(size, size)
    return LineFit(values, scatter**2 * inverse, residuals, scatter, count - terms)


def effective_dof(contributions: Sequence[tuple[float, float]]) -> float:
    """Return the effective degrees of freedom of a root sum of squares of (standard uncertainty, degrees of freedom) (GUM G.2b)."""
    total = sum(u**2 for u, _ in contributions)
    parts = sum(u**4 / dof for u, dof in contributions if math.isfinite(dof) and dof > 0)
    return total**2 / parts if parts > 0 else math.inf


def coverage_factor(dof: float, coverage: float) -> float:
    """Return the factor of a two-sided interval: Student's t at ``dof``, the normal one where that is endless (GUM G.3, table G.2)."""
    from scipy.special import ndtri, stdtrit  # noqa: PLC0415  heavy imports stay inside functions

    upper = 0.5 + coverage / 2.0
    return float(stdtrit(dof, upper)) if math.isfinite(dof) else float(ndtri(upper))
