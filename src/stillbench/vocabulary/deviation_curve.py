"""The Allan deviation at a set of averaging times."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

from stillbench.foundation.arrays import FloatArray, IntArray


@dataclass(frozen=True)
class DeviationCurve:
    """Overlapping Allan deviation, pooled over runs.

    Attributes
    ----------
    tau : (k,) float array
        Averaging time, s.
    deviation : (k,) float array
        SI.
    lower, upper : (k,) float arrays or None
        Ends of the interval, SI; None until a model has been fitted.
    pairs : (k,) int array
        Number of overlapping pairs of averages.
    edf : (k,) float array or None
        Equivalent degrees of freedom given the fitted model.
    classical_error : (k,) float array
        Relative error 1/sqrt(2 (T/tau - 1)), printed for readers used to it.
    model : (k,) float array or None
        Deviation of the fitted model, SI.
    coverage : float
        Of the interval.
    """

    tau: FloatArray
    deviation: FloatArray
    pairs: IntArray
    classical_error: FloatArray
    lower: FloatArray | None = None
    upper: FloatArray | None = None
    edf: FloatArray | None = None
    model: FloatArray | None = None
    coverage: float = 0.95

    __json_names__: ClassVar[Mapping[str, str]] = {"tau": "tau_s"}
