"""Independent libraries as judges: allantools for the curve, statsmodels for the likelihood of white noise plus walk."""

import allantools
import numpy as np
import pytest
from statsmodels.tsa.statespace.structural import UnobservedComponents
from tests.conftest import made_noise

from stillbench.deviation.averaging import averaging_factors
from stillbench.deviation.overlapping import pooled_deviation
from stillbench.likelihood.bins import bin_runs
from stillbench.likelihood.fit import maximise
from stillbench.terms.catalogue import BY_ROLE


@pytest.mark.parametrize("offset", [0.0, 1e4])
def test_curve_agrees_with_allantools(offset: float) -> None:
    rate = offset + made_noise(20_000, 5, white=1.0, flicker=0.1, walk=0.01)
    factors = averaging_factors(rate.size)
    ours, pairs = pooled_deviation([rate], factors)
    taus, theirs, _, counts = allantools.oadev(rate - offset, rate=1.0, data_type="freq", taus=factors)
    assert np.array_equal(np.rint(taus), factors)
    assert np.array_equal(pairs, counts)
    # 1e-10 relative: float64 sums; the offset costs the digits it takes in the samples themselves.
    assert np.max(np.abs(ours / theirs - 1.0)) < 1e-10


def test_white_noise_and_walk_agree_with_a_kalman_filter() -> None:
    """The cosine-transform likelihood of mean + white + walk is exact: a diffuse Kalman filter finds the same maximum.

    Agreement to 0.1 of a standard error (binning costs less).
    """
    terms = [BY_ROLE["white"], BY_ROLE["walk"]]
    for seed in range(3):
        rate = made_noise(4_000, 100 + seed, white=1.0, walk=0.03)
        fit = maximise(bin_runs([rate], terms, ()))
        errors = np.sqrt(np.diag(np.linalg.inv(fit.information)))
        level = UnobservedComponents(rate, level="local level")
        found = level.fit(disp=False, start_params=fit.theta)
        theirs = np.asarray(found.params)
        assert np.all(np.abs(fit.theta - theirs) < 0.1 * errors)
