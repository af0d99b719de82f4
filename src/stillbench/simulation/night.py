"""A made night log: noise terms of known strength, and the small accidents of a night."""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.terms.catalogue import BY_ROLE
from stillbench.vocabulary.quantity import TIME_POWERS


@dataclass(frozen=True)
class Night:
    """Recipe of a made log.

    Attributes
    ----------
    hours, rate : float
        Length, and Hz.
    coefficients : mapping of role to float
        In the unit of the log and seconds.
    null : float
        Mean, in the unit of the log.
    ramp : float
        Unit of the log per s.
    spikes : tuple of (seconds, size)
    lost : tuple of (seconds, seconds)
        Spans with no rows.
    seed : int
    """

    hours: float
    rate: float
    coefficients: Mapping[str, float]
    null: float
    seed: int
    ramp: float = 0.0
    spikes: tuple[tuple[float, float], ...] = ()
    lost: tuple[tuple[float, float], ...] = field(default=())


def make_night(night: Night) -> tuple[FloatArray, FloatArray]:
    """Return times (s) and readings of a made log; rows in lost spans are absent."""
    generator = np.random.default_rng(night.seed)
    n_samples = round(night.hours * 3600.0 * night.rate)
    interval = 1.0 / night.rate
    time = np.arange(n_samples, dtype=np.float64) * interval
    values: FloatArray = night.null + night.ramp * time
    for role, coefficient in night.coefficients.items():
        unit_sample = coefficient / interval ** TIME_POWERS[role]
        values += unit_sample * BY_ROLE[role].generate(n_samples, generator)
    for at, size in night.spikes:
        values[round(at * night.rate)] += size
    keep = np.ones(n_samples, dtype=bool)
    for start, stop in night.lost:
        keep[round(start * night.rate) : round(stop * night.rate)] = False
    return np.asarray(time[keep]), np.asarray(values[keep], dtype=np.float64)
