"""Each check finds what it is for, at its size and place, and leaves clean logs alone."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from tests.conftest import made_noise

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import NothingToMeasureError
from stillbench.likelihood.bins import bin_runs
from stillbench.likelihood.fit import maximise
from stillbench.screening.fill import fill_holes, local_strengths
from stillbench.screening.screen import screen
from stillbench.terms.catalogue import BY_ROLE
from stillbench.vocabulary.record import Clock, Record, Run
from stillbench.vocabulary.screened_record import ScreenedRecord

CLOCK = Clock("array", 0.0, 0.0, 0, ())


def record_of(values: FloatArray, interval: float = 0.01) -> Record:
    return Record(
        "x", "angular rate", "rad/s", values.copy(), np.isnan(values), interval, (Run(0, values.size, 0.0),), CLOCK
    )


def kinds(screened: ScreenedRecord) -> list[str]:
    return [finding.kind for finding in screened.findings]


MIXES = {
    "N": {"white": 1.0},
    "NB": {"white": 1.0, "flicker": 0.2},
    "NK": {"white": 1.0, "walk": 0.01},
    "K": {"white": 0.01, "walk": 0.1},
}


@pytest.mark.parametrize("mix", MIXES)
def test_clean_logs_are_left_alone(mix: str) -> None:
    """40 logs of each mix; false alarms below 1 % by design, so at most the binomial bound of them."""
    alarms = 0
    for seed in range(40):
        screened = screen(record_of(made_noise(16_384, 300 + seed, **MIXES[mix])))
        alarms += bool(screened.findings)
        assert screened.n_offered == 16_384
    assert alarms <= stats.binom.ppf(0.999, 40, 0.01)


def test_repeated_values_in_a_short_log() -> None:
    true = made_noise(450, 5, white=1.0)
    screened = screen(record_of(np.repeat(true, 2)))
    assert kinds(screened) == ["repeated_values"]
    assert screened.record.sample_interval == pytest.approx(0.02)


def test_noise_that_doubles_part_way() -> None:
    values = made_noise(40_000, 5, white=1.0) * np.where(np.arange(40_000) < 10_000, 2.0, 1.0)
    finding = next(f for f in screen(record_of(values)).findings if f.kind == "variance_change")
    assert finding.measure == pytest.approx(0.5, rel=0.05)
    assert finding.start == pytest.approx(100.0, abs=1.0)


@pytest.mark.parametrize("hold", [1.05, 1.25, 1.6, 2.0, 2.5, 4.0, 20.4])
def test_repeated_values(hold: float) -> None:
    true = made_noise(30_000, 5, white=1.0)
    places = np.floor((np.arange(int(30_000 * hold) - 50) + 0.37) / hold).astype(int)
    screened = screen(record_of(true[places]))
    assert kinds(screened) == ["repeated_values"]
    assert screened.record.sample_interval == pytest.approx(0.01 * hold, rel=1e-5)
    # What is left is the true sequence, but for a sample at the ends.
    left = screened.record.values
    start = int(np.flatnonzero(true == left[0])[0])
    assert start <= 1
    assert np.mean(left == true[start : start + left.size]) > 0.999
    fit = maximise(bin_runs([left], [BY_ROLE["white"]], ()))
    assert np.sqrt(fit.theta[0]) == pytest.approx(1.0, abs=4 / np.sqrt(2 * left.size))


def test_coarse_steps_of_a_slow_signal_are_no_repeats() -> None:
    slow = np.round(made_noise(30_000, 5, white=0.05, walk=0.02) * 4) / 4
    assert "repeated_values" not in kinds(screen(record_of(slow)))


def test_a_spike_is_found_where_it_is() -> None:
    values = made_noise(50_000, 5, white=1.0, walk=0.002)
    values[12_345] += 15.0
    values[12_400] -= 9.0
    screened = screen(record_of(values))
    spikes = [finding for finding in screened.findings if finding.kind == "spike"]
    assert [round((finding.start or 0) * 100) for finding in spikes] == [12_345, 12_400]
    assert all(finding.excluded for finding in spikes)
    assert spikes[0].measure == pytest.approx(15.0, abs=4.0)
    assert screened.n_used == 49_998
    assert screened.unscreened is not None
    assert screened.unscreened.values[12_345] > 10
    assert abs(screened.record.values[12_345]) < 8


def test_a_spike_at_the_very_start() -> None:
    values = made_noise(20_000, 5, white=1.0)
    values[0] += 500.0
    screened = screen(record_of(values))
    assert kinds(screened) == ["spike"]
    assert screened.n_used == 19_999


def test_a_steep_warm_up_is_no_spike() -> None:
    time = np.arange(40_000)
    values = made_noise(40_000, 5, white=1.0) + 300 * np.exp(-time / 2_000)
    assert "spike" not in kinds(screen(record_of(values)))


def test_heavy_tails_are_no_spikes() -> None:
    values = np.random.default_rng(3).standard_t(5, 100_000)
    screened = screen(record_of(values))
    assert kinds(screened) == ["heavy_tails"]
    assert screened.n_used == 100_000


def test_stuck() -> None:
    values = np.round(made_noise(40_000, 5, white=1.0) * 5) / 5
    values[20_000:20_015] = values[20_000]
    screened = screen(record_of(values))
    (stuck,) = screened.findings
    assert (stuck.kind, stuck.measure, stuck.excluded) == ("stuck", 15.0, True)
    assert stuck.start == pytest.approx(200.0)


def test_constant_is_refused() -> None:
    with pytest.raises(NothingToMeasureError, match="equal"):
        screen(record_of(np.full(1_000, 2.5)))


@pytest.mark.parametrize("step", [0.0, 0.2])
def test_clipping(step: float) -> None:
    values = np.clip(made_noise(100_000, 5, white=1.0), -10, 2.0)
    if step:
        values = np.round(values / step) * step
    screened = screen(record_of(values))
    (finding,) = screened.findings
    assert finding.kind == "saturation"
    assert not finding.excluded
    assert finding.measure == pytest.approx(100 * stats.norm.sf(2.0 - step / 2), rel=0.1)


def test_declared_range() -> None:
    record = replace(record_of(made_noise(10_000, 5, white=1.0)), limits=(-3.0, 3.0))
    (finding,) = screen(record).findings
    assert finding.kind == "saturation"
    assert "declared range" in finding.because


def test_handling_is_cut_out_and_still_parts_kept() -> None:
    values = made_noise(40_000, 5, white=1.0)
    values[15_000:18_000] += 60 * np.sin(np.arange(3_000) / 20)
    screened = screen(record_of(values))
    (motion,) = [finding for finding in screened.findings if finding.kind == "motion"]
    assert motion.start is not None
    assert motion.stop is not None
    assert motion.start <= 150.0
    assert motion.stop >= 179.99
    assert motion.stop - motion.start < 40.0
    assert screened.record.runs[0].first == 0
    assert len(screened.record.runs) == 2


def test_a_turn_is_told_from_handling() -> None:
    values = made_noise(40_000, 5, white=1.0)
    values[17_123:] += 900.0
    screened = screen(record_of(values))
    (motion,) = screened.findings
    assert "the level afterwards differs" in motion.because
    assert len(screened.record.runs) == 2


def test_a_log_that_is_hardly_ever_still_is_refused() -> None:
    """Still for 8 %, and in the rest handled harder and harder, so that the still part shows as such."""
    n_samples = 40_000
    strength = np.where(np.arange(n_samples) < 0.3 * n_samples, 1.0, 400.0)
    values = made_noise(n_samples, 5, white=1.0) * strength
    screened = screen(record_of(values))
    assert screened.n_used <= 0.31 * n_samples  # here the still part is kept
    hops = np.repeat(np.random.default_rng(4).normal(0.0, 1e4, 20), n_samples // 20)
    with pytest.raises(NothingToMeasureError, match="at rest"):
        screen(
            record_of(
                made_noise(n_samples, 5, white=1.0)
                + np.repeat(hops[:: n_samples // 400], n_samples // 400) * np.repeat(np.arange(400) % 2, 100)
            )
        )


@pytest.mark.parametrize(("ratio", "found"), [(2.0, False), (0.7, False), (0.5, True), (0.3, True)])
def test_converter_against_noise(ratio: float, found: bool) -> None:  # noqa: FBT001
    values = np.round(made_noise(60_000, 5, white=1.0) * ratio + 0.3 * np.sin(np.arange(60_000) / 9_000)) / ratio
    findings = [f for f in screen(record_of(values)).findings if f.kind == "coarse_converter"]
    assert bool(findings) == found
    if found:
        # Below 0.4 steps the rounding is not white and the figure only says "far too coarse".
        assert findings[0].measure == pytest.approx(ratio, rel=0.1 if ratio > 0.4 else 0.3)


def test_filled_holes_keep_the_strength_of_the_noise() -> None:
    """2 % lost singly and in holes to 20: the fit of the filled log is the fit of the whole one, within its error."""
    for mix in ({"white": 1.0}, {"white": 0.2, "walk": 0.3}):
        whole = made_noise(60_000, 5, **mix)
        lossy = whole.copy()
        generator = np.random.default_rng(2)
        lossy[generator.choice(60_000, 600, replace=False)] = np.nan
        for start in generator.choice(59_000, 30, replace=False) + 10:
            lossy[start : start + 20] = np.nan
        filled = fill_holes(record_of(lossy))
        assert np.isfinite(filled).all()
        assert np.array_equal(filled[~np.isnan(lossy)], lossy[~np.isnan(lossy)])
        terms = [BY_ROLE["white"], BY_ROLE["walk"]]
        before, after = (maximise(bin_runs([values], terms, ())) for values in (whole, filled))
        errors = np.sqrt(np.diag(np.linalg.pinv(before.information)))
        # A loss of 2 % costs 2 % of the information: the estimates differ by sqrt(0.02) of an error; four times that.
        assert np.all(np.abs(after.theta - before.theta) < 4 * np.sqrt(0.02) * errors + 1e-12)


def test_local_strengths() -> None:
    white, walk = local_strengths([made_noise(400_000, 5, white=0.5, walk=0.2)])
    assert white == pytest.approx(0.25, rel=0.02)
    assert walk == pytest.approx(0.04, rel=0.1)
