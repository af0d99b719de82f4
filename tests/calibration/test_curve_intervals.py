"""The band of the curve covers the true deviation: white, flicker and walk, from T/tau = 3 to 100.

1000 logs of 1200 samples each; binomial bounds at 99.9 %, around 93.5 to 97.5 %, which is what a chi-square interval with
the right degrees of freedom can do (the mean square is not exactly chi-square).
"""

import numpy as np
import pytest
from scipy import stats

from stillbench.deviation.intervals import chi_square_limits
from stillbench.deviation.overlapping import pooled_deviation
from stillbench.terms.catalogue import BY_ROLE
from stillbench.terms.covariance import curve_edf
from stillbench.terms.mixture import Mixture

LOGS = 1_000
N_SAMPLES = 1_200
FACTORS = np.array([12, 40, 120, 240, 400])


@pytest.mark.parametrize("role", ["white", "flicker", "walk"])
def test_band_covers(role: str) -> None:
    generator = np.random.default_rng(11)
    truth = np.sqrt(Mixture({role: 1.0}).allan_variance(FACTORS))
    edf = curve_edf(Mixture({role: 1.0}), FACTORS, [N_SAMPLES])
    covered = np.zeros(FACTORS.size)
    for _ in range(LOGS):
        sigma, _ = pooled_deviation([BY_ROLE[role].generate(N_SAMPLES, generator)], FACTORS)
        lower, upper = chi_square_limits(sigma, edf, 0.95)
        covered += (lower <= truth) & (truth <= upper)
    fewest = stats.binom.ppf(0.0005, LOGS, 0.935)
    most = stats.binom.ppf(0.9995, LOGS, 0.975)
    assert np.all((fewest <= covered) & (covered <= most)), covered
