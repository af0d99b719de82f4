"""Conformance probability of a normally distributed estimate."""

import math


def _normal_cdf(z: float) -> float:
    return 0.5 * math.erfc(-z / math.sqrt(2.0))


def conformance_probability(
    value: float, uncertainty: float, *, lower_limit: float = -math.inf, upper_limit: float = math.inf
) -> float:
    """Return the probability that a normal measurand lies within the limits.

    Parameters
    ----------
    value, uncertainty : float
        Estimate and standard uncertainty, same unit as the limits.
    lower_limit, upper_limit : float

    References
    ----------
    JCGM 106:2012, 7.4: p = Phi((T_U - y)/u) - Phi((T_L - y)/u) (from memory, reproduced on its examples in the tests).
    """
    if uncertainty == 0:
        return float(lower_limit <= value <= upper_limit)
    return _normal_cdf((upper_limit - value) / uncertainty) - _normal_cdf((lower_limit - value) / uncertainty)
