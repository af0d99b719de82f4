"""The slow plain twin: definitions written as loops, to judge the fast estimator."""

from fractions import Fraction

import numpy as np

from stillbench.foundation.arrays import FloatArray


def plain_overlapping_deviation(rate: FloatArray, factor: int) -> float:
    """Overlapping Allan deviation straight from its definition: adjacent averages, every start."""
    averages = [rate[i : i + factor].mean() for i in range(rate.size - factor + 1)]
    squares = [(averages[i + factor] - averages[i]) ** 2 for i in range(len(averages) - factor)]
    return float(np.sqrt(sum(squares) / (2 * len(squares))))


def plain_deviation(rate: FloatArray, factor: int) -> float:
    """Allan deviation of adjacent averages that do not overlap (NIST SP 1065)."""
    whole = rate.size // factor
    averages = rate[: whole * factor].reshape(whole, factor).mean(axis=1)
    return float(np.sqrt(np.sum(np.diff(averages) ** 2) / (2 * (whole - 1))))


def exact_overlapping_variance(rate: FloatArray, factor: int) -> Fraction:
    """Overlapping Allan variance of the given binary numbers in exact rational arithmetic."""
    angle = [Fraction(0)]
    for value in rate:
        angle.append(angle[-1] + Fraction(float(value)))
    second = [angle[i + 2 * factor] - 2 * angle[i + factor] + angle[i] for i in range(len(angle) - 2 * factor)]
    return sum((value * value for value in second), Fraction(0)) / (2 * factor * factor * len(second))
