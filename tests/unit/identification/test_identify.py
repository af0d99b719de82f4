"""States, bands and readings of the identification stage."""

import numpy as np
import pytest
from tests.conftest import made_noise

from stillbench.pipeline import characterize
from stillbench.vocabulary.characterization import ChannelResult
from stillbench.vocabulary.log_sheet import ChannelSection, LogSheet


def result_of(log: object, rate: float = 1.0, **choices: object) -> ChannelResult:
    choices.setdefault("unit", "rad/s")
    return characterize(log, rate=rate, made_at="2026-01-01", **choices).channels[0]  # type: ignore[arg-type]


def test_units_scale_as_they_must() -> None:
    """The same samples at another rate: N goes with sqrt(dt), K with 1/sqrt(dt), B stays, R goes with 1/dt."""
    log = made_noise(30_000, 5, white=1.0, flicker=0.1, walk=0.01) + 1e-3 * np.arange(30_000)
    slow, fast = result_of(log, 1.0).noise.terms, result_of(log, 100.0).noise.terms
    for name, power in (
        ("angle_random_walk", 0.5),
        ("bias_instability", 0.0),
        ("rate_random_walk", -0.5),
        ("rate_ramp", -1.0),
    ):
        one, other = slow[name].coefficient, fast[name].coefficient
        assert one is not None
        assert other == pytest.approx(one * 0.01**power, rel=1e-6)


def test_short_log_cannot_tell_flicker_from_walk() -> None:
    """16 384 samples of N + B: mostly both readings are accepted; at least one of five made logs must say so plainly."""
    ambiguous = 0
    for seed in range(5):
        noise = result_of(made_noise(16_384, 60 + seed, white=1.0, flicker=0.05)).noise
        assert all("angle_random_walk" in chosen for chosen in noise.accepted)
        if len(noise.accepted) > 1:
            ambiguous += 1
            states = {noise.terms[name].state for name in ("bias_instability", "rate_random_walk")}
            assert states == {"ambiguous"}
            assert "too short to tell" in noise.terms["bias_instability"].because
    assert ambiguous >= 1


@pytest.mark.parametrize("n_samples", [16, 40, 100])
def test_very_short_log(n_samples: int) -> None:
    result = result_of(made_noise(n_samples, 5, white=1.0))
    white = result.noise.terms["angle_random_walk"]
    assert white.state == "resolved"
    assert result.noise.accepted == (("angle_random_walk",),)
    # Four standard errors on each side of the mean hold the truth.
    assert abs(result.bias.value) < 4 * (result.bias.upper - result.bias.lower) / (2 * 1.96)
    assert result.noise.terms["bias_instability"].state == "not observable"
    assert result.noise.terms["bias_instability"].coefficient is None
    assert "short_record" in {finding.kind for finding in result.findings}


@pytest.mark.parametrize("corner", [0.02, 0.1])
def test_a_low_pass_in_the_sensor_is_recognised(corner: float) -> None:
    """One pole at ``corner`` cycles per sample: the full band is refused, and N below it is right within 3 % and its error."""
    from scipy.signal import lfilter  # noqa: PLC0415

    pole = np.exp(-2 * np.pi * corner)
    log = lfilter([1 - pole], [1, -pole], made_noise(200_000, 5, white=1.0))
    noise = result_of(log).noise
    assert noise.response is not None
    assert noise.response.corner == pytest.approx(corner, rel=0.6)  # "about", by design
    white = noise.terms["angle_random_walk"]
    assert white.coefficient == pytest.approx(1.0, abs=0.03 + 4 / np.sqrt(2 * 200_000 * 2 * noise.band[1]))
    finding = next(f for f in result_of(log).findings if f.kind == "low_pass")
    assert "averaging times above" in finding.disposition


def test_a_ramp_neither_spoils_the_fit_nor_hides_a_filter() -> None:
    ramp = 1e-5 * np.arange(100_000)
    noise = made_noise(100_000, 5, white=1.0)
    assert abs(result_of(noise + ramp).noise.goodness - result_of(noise).noise.goodness) < 0.5
    from scipy.signal import lfilter  # noqa: PLC0415

    pole = np.exp(-2 * np.pi * 0.1)
    model = result_of(lfilter([1 - pole], [1, -pole], noise) + ramp).noise
    assert model.response is not None
    assert model.terms["angle_random_walk"].coefficient == pytest.approx(1.0, abs=0.03)


def test_correlated_noise_is_named_with_its_time() -> None:
    from stillbench.terms.correlated import CorrelatedNoise  # noqa: PLC0415

    generator = np.random.default_rng(4)
    log = generator.standard_normal(131_072) + 0.1 * CorrelatedNoise(1_000.0).generate(131_072, generator)
    model = result_of(log, 10.0).noise
    term = model.terms["exponentially_correlated"]
    assert term.state == "resolved"
    assert term.lower is not None
    assert term.upper is not None
    assert term.lower < 0.1 < term.upper
    assert term.parameters["correlation_time_lower_s"] < 100.0 < term.parameters["correlation_time_upper_s"]
    assert all("exponentially_correlated" in chosen for chosen in model.accepted)
    assert "exponentially_correlated" not in result_of(made_noise(131_072, 5, white=1.0)).noise.terms


@pytest.mark.parametrize(
    ("shape", "words"), [("pole", "one pole"), ("butter", "two poles"), ("average", "moving average")]
)
def test_the_low_pass_of_a_sensor_is_fitted_by_shape(shape: str, words: str) -> None:
    """Corner at an eighth of the rate; white level within 1 % and its error, corner within 5 %."""
    from scipy.signal import butter, lfilter  # noqa: PLC0415

    pole = np.exp(-2 * np.pi / 8)
    filters = {"pole": ([1 - pole], [1, -pole]), "butter": butter(2, 0.25), "average": (np.ones(4) / 4, [1.0])}
    log = lfilter(*filters[shape], made_noise(131_072, 6, white=1.0, walk=1e-3))[100:]
    noise = result_of(np.round(log / 0.05) * 0.05, 100.0).noise
    assert noise.response is not None
    assert noise.response.shape == words
    corner = {"pole": 12.5, "butter": 12.5, "average": 0.443 * 100 / 4}[shape]
    assert noise.response.corner == pytest.approx(corner, rel=0.05)
    # The model line of the curve is that behind the filter: short averages lie on it too.
    curve = result_of(np.round(log / 0.05) * 0.05, 100.0).curve
    assert curve.model is not None
    assert np.max(np.abs(np.log(curve.deviation[:20] / curve.model[:20]))) < 0.03
    white = noise.terms["angle_random_walk"]
    assert white.coefficient == pytest.approx(0.1, rel=0.01 + 3 * 0.0055)  # RMSE of the white level is some 0.5 %


def test_the_second_opinion_agrees_on_clean_noise() -> None:
    result = result_of(made_noise(131_072, 6, white=1.0, flicker=0.05, walk=2e-3))
    for name in ("angle_random_walk", "bias_instability", "rate_random_walk"):
        term = result.noise.terms[name]
        second = term.curve_estimate
        assert second is not None
        assert term.coefficient is not None
        assert second.lower < term.coefficient < second.upper
    assert "methods_disagree" not in {finding.kind for finding in result.findings}


def test_quantization_noise_is_tried_on_increments_only() -> None:
    steps = made_noise(50_000, 5, white=0.05, quantization=1.0)
    sheet = LogSheet(channel={"x": ChannelSection(unit="rad", kind="increment")})
    with_q = result_of({"x": steps}, log_sheet=sheet, unit=None).noise
    q = with_q.terms["quantization_noise"]
    assert q.unit == "rad"
    assert q.lower is not None
    assert q.upper is not None
    assert q.lower < 1.0 < q.upper
    assert "quantization_noise" not in result_of(steps).noise.terms


def test_rounding_by_a_converter_is_white_and_not_quantization_noise() -> None:
    """LSB = sigma: N rises by sqrt(1 + 1/12), 4.1 % (W. R. Bennett, Bell Syst. Tech. J. 27 (1948) 446)."""
    log = np.round(made_noise(100_000, 5, white=1.0))
    white = result_of(log).noise.terms["angle_random_walk"]
    assert white.coefficient == pytest.approx(np.sqrt(13 / 12), abs=4 / np.sqrt(2 * 100_000))


def test_unresolved_white_noise_has_no_figure() -> None:
    log = np.round(made_noise(60_000, 5, white=0.2) + np.sin(np.arange(60_000) / 9_000))
    white = result_of(log).noise.terms["angle_random_walk"]
    assert (white.coefficient, white.state) == (None, "not observable")


def test_heavy_tails_widen_the_interval_of_white_noise() -> None:
    heavy = np.random.default_rng(3).standard_t(5, 100_000)
    white = result_of(heavy).noise.terms["angle_random_walk"]
    assert white.upper is not None
    assert white.coefficient is not None
    relative = (white.upper / white.coefficient - 1) / 1.96
    # Variance of ln N: (kurtosis - 1)/(4 n) with the kurtosis of the sample, 9 in the limit.
    kurtosis = float(np.mean(heavy**4) / np.mean(heavy**2) ** 2)
    assert relative == pytest.approx(np.sqrt((kurtosis - 1) / 4 / 100_000), rel=0.05)


def test_textbook_reading() -> None:
    terms = result_of(made_noise(200_000, 5, white=1.0, walk=0.01)).noise.terms
    assert terms["angle_random_walk"].textbook is not None
    assert terms["angle_random_walk"].textbook.value == pytest.approx(1.0, rel=0.05)
    walk = terms["rate_random_walk"].textbook
    assert walk is not None
    assert walk.value == pytest.approx(0.01, rel=0.5)
    # N and K with no flicker: the lowest point is sqrt(2 N K/sqrt 3), and is taken for B by the textbook.
    floor = terms["bias_instability"].textbook
    assert floor is not None
    assert floor.value == pytest.approx(np.sqrt(2 * 0.01 / np.sqrt(3)) / 0.664, rel=0.15)
    assert terms["bias_instability"].state == "upper bound"


def test_numbers_are_the_same_for_any_kind_of_array(tmp_path_factory: pytest.TempPathFactory) -> None:
    import pandas as pd  # noqa: PLC0415

    log = made_noise(20_000, 5, white=1.0, walk=0.01).astype(np.float32)
    path = tmp_path_factory.mktemp("arrays") / "log.npy"
    np.save(path, np.asfortranarray(np.column_stack([log, log])))
    mapped = np.load(path, mmap_mode="r")
    ways = {
        "float32": log,
        "float64": log.astype(np.float64),
        "memory map": mapped[:, 1],
        "series": pd.Series(log, name="x"),
        "strided": np.repeat(log, 2)[::2],
    }
    found = {name: result_of(way) for name, way in ways.items()}
    reference = found["float64"]
    for result in found.values():
        assert np.array_equal(result.curve.deviation, reference.curve.deviation)
        assert (
            result.noise.terms["rate_random_walk"].coefficient == reference.noise.terms["rate_random_walk"].coefficient
        )


def test_a_large_offset_costs_no_digits() -> None:
    """An offset of 1e8 on noise of 1: the samples themselves are rounded to 1.5e-8, nothing more is lost."""
    log = made_noise(20_000, 5, white=1.0, walk=0.01)
    near, far = result_of(log), result_of(log + 1e8)
    assert np.max(np.abs(far.curve.deviation / near.curve.deviation - 1)) < 1e-7
    for name, term in near.noise.terms.items():
        if term.state == "resolved":
            assert far.noise.terms[name].coefficient == pytest.approx(term.coefficient, rel=1e-6)


def test_results_show_themselves() -> None:
    result = result_of(made_noise(2_000, 5, white=1.0))
    frame = result.noise.to_frame()
    assert list(frame.index) == list(result.noise.terms)
    assert "resolved" in result.noise._repr_html_()
