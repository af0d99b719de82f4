"""The published cases: what, from where, the digits as printed, and how they are computed here."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from stillbench.assessment.conformance import conformance_probability
from stillbench.deviation.intervals import chi_square_limits
from stillbench.deviation.overlapping import overlapping_deviation
from stillbench.deviation.plain import plain_deviation
from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.units import parse_unit
from stillbench.terms.covariance import curve_edf
from stillbench.terms.mixture import Mixture

SP1065 = "NIST SP 1065 (2008)"
JCGM106 = "JCGM 106:2012 (from memory)"


@dataclass(frozen=True)
class Case:
    """One published number.

    Attributes
    ----------
    name, source : str
    printed : str
        As published; the digits to reproduce.
    compute : callable
    """

    name: str
    source: str
    printed: str
    compute: Callable[[], float]


def thousand_points() -> FloatArray:
    """Return the 1000-point set of SP 1065, p. 107: n[i+1] = 16807 n[i] mod 2147483647, over 2147483647."""
    number = 1_234_567_890
    values = np.empty(1_000)
    for i in range(values.size):
        values[i] = number / 2_147_483_647
        number = 16_807 * number % 2_147_483_647
    return values


NINE_POINTS = np.array([892.0, 809.0, 823.0, 798.0, 671.0, 644.0, 883.0, 903.0, 677.0])


def _overlapping(points: FloatArray, factor: int) -> Callable[[], float]:
    return lambda: overlapping_deviation(points, sample_interval=1.0, factor=factor)


def _adjacent(points: FloatArray, factor: int) -> Callable[[], float]:
    return lambda: plain_deviation(points, factor)


def _edf(role: str, n_samples: int, factor: int) -> Callable[[], float]:
    return lambda: float(curve_edf(Mixture({role: 1.0}), np.array([factor]), [n_samples])[0])


def _limit(n_observations: int, which: int) -> Callable[[], float]:
    return lambda: float(chi_square_limits(np.ones(1), np.array([n_observations - 1.0]), 0.95)[which][0])


def _ratio(one: str, other: str) -> Callable[[], float]:
    return lambda: parse_unit(one).factor / parse_unit(other).factor


def cases() -> Iterator[Case]:
    """Give the published cases in order."""
    points = thousand_points()
    for factor, printed in ((1, "2.922319e-01"), (10, "9.159953e-02"), (100, "3.241343e-02")):
        yield Case(
            f"overlapping Allan deviation, 1000 points, m = {factor}",
            f"{SP1065}, table 31",
            printed,
            _overlapping(points, factor),
        )
    for factor, printed in ((10, "9.965736e-02"), (100, "3.897804e-02")):
        yield Case(
            f"Allan deviation, 1000 points, m = {factor}", f"{SP1065}, table 31", printed, _adjacent(points, factor)
        )
    for factor, printed in ((1, "91.22945"), (2, "85.95287")):
        yield Case(
            f"overlapping Allan deviation, 9 points, m = {factor}",
            f"{SP1065}, table 30",
            printed,
            _overlapping(NINE_POINTS, factor),
        )
    yield Case("Allan deviation, 9 points, m = 2", f"{SP1065}, table 30", "115.8082", _adjacent(NINE_POINTS, 2))
    for n_samples, factor, printed in ((1_000, 1, "666.222296"), (1_000, 10, "146.072326"), (1_000, 100, "12.813268")):
        yield Case(
            f"degrees of freedom, white, n = {n_samples}, m = {factor}",
            "exact, by hand",
            printed,
            _edf("white", n_samples, factor),
        )
    yield Case("degrees of freedom, walk, n = 1000, m = 10", "exact, by hand", "91.754774", _edf("walk", 1_000, 10))
    for n_observations, which, printed in (
        (10, 0, "0.6878"),
        (10, 1, "1.8256"),
        (100, 0, "0.8780"),
        (100, 1, "1.1617"),
    ):
        end = ("lower", "upper")[which]
        yield Case(
            f"{end} 95 % factor of a deviation, {n_observations} observations",
            "Boost C++ math documentation, table",
            printed,
            _limit(n_observations, which),
        )
    yield Case("deg/s/sqrt(Hz) in deg/sqrt(h)", "by hand", "60.00000", _ratio("deg/s/sqrt(Hz)", "deg/sqrt(h)"))
    yield Case("deg/h/sqrt(h) in deg/s/sqrt(s)", "by hand", "4.629630e-06", _ratio("deg/h/sqrt(h)", "deg/s/sqrt(s)"))
    yield Case("ug/sqrt(Hz) in m/s/sqrt(h)", "by hand", "5.88399e-04", _ratio("ug/sqrt(Hz)", "m/s/sqrt(h)"))
    yield Case(
        "conformance probability, motor oil",
        f"{JCGM106}, 7.4",
        "0.66",
        lambda: conformance_probability(13.6, 1.8, lower_limit=12.5, upper_limit=16.3),
    )
    yield Case(
        "conformance probability, burst pressure",
        f"{JCGM106}, 7.3",
        "0.99",
        lambda: conformance_probability(509.7, 8.6, lower_limit=490.0),
    )
