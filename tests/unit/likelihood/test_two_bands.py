"""A run too long for one transform, binned in two bands: the estimates are those of one transform."""

import numpy as np
import pytest

from stillbench.foundation.arrays import FloatArray
from stillbench.likelihood import bins as module
from stillbench.likelihood.bins import bin_runs
from stillbench.likelihood.fit import maximise
from stillbench.terms.catalogue import BY_ROLE, MEAN_SHAPES

TRUE = np.array([1.0, 0.05, 1e-3])
ROLES = ("white", "flicker", "walk")
TRIALS = 40


def estimates(values: FloatArray) -> FloatArray:
    bins = bin_runs([values], [BY_ROLE[role] for role in ROLES], MEAN_SHAPES)
    assert np.all(bins.last > bins.first)
    assert np.array_equal(bins.first[1:], bins.last[:-1])
    return np.asarray(np.sqrt(maximise(bins, shapes=np.zeros(1, dtype=bool)).theta))


def test_two_bands_lose_next_to_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """Root mean square errors within 5 % of those of one transform, on the same made logs."""
    n_samples = (1 << 18) + 777
    pairs = []
    for trial in range(TRIALS):
        generator = np.random.default_rng([31, trial])
        parts = [
            strength * np.asarray(BY_ROLE[role].generate(n_samples, generator))
            for strength, role in zip(TRUE, ROLES, strict=True)
        ]
        values = np.sum(parts, axis=0)
        whole = estimates(values)
        with monkeypatch.context() as patch:
            patch.setattr(module, "LONGEST_TRANSFORM", 1 << 16)
            patch.setattr(module, "BLOCK_TRANSFORM", 1 << 13)
            pairs.append((whole, estimates(values)))
    errors = np.sqrt(np.mean((np.array(pairs) / TRUE - 1.0) ** 2, axis=0))
    assert np.all(errors[1] < 1.05 * errors[0]), errors


def test_a_ramp_is_seen_through_two_bands(monkeypatch: pytest.MonkeyPatch) -> None:
    values = np.random.default_rng(5).standard_normal(1 << 18) + 1e-6 * np.arange(1 << 18)
    whole = bin_runs([values], [BY_ROLE["white"]], MEAN_SHAPES)
    monkeypatch.setattr(module, "LONGEST_TRANSFORM", 1 << 16)
    monkeypatch.setattr(module, "BLOCK_TRANSFORM", 1 << 13)
    parted = bin_runs([values], [BY_ROLE["white"]], MEAN_SHAPES)
    slopes = [maximise(bins, shapes=np.ones(1, dtype=bool)).beta[0] for bins in (whole, parted)]
    assert slopes[1] == pytest.approx(slopes[0], rel=1e-3)
    assert slopes[0] == pytest.approx(1e-6, rel=0.05)
