import pytest

from stillbench.foundation.rounding import interval_text, plain, significant, with_interval

CASES = [
    # half of the shorter side is the uncertainty; two digits of it
    ((0.18991, 0.18972, 0.19010), ("0.189910", "0.189720", "0.190100")),
    ((20.0, 17.1, 22.4), ("20.0", "17.1", "22.4")),
    ((1234.5, 1111.0, 1400.0), ("1234", "1111", "1400")),
    ((0.0, 0.0, 14.46), ("0.0", "0.0", "14.5")),
    ((-3.21, -5.4, -1.0), ("-3.2", "-5.4", "-1.0")),
    ((1e-12, 0.5e-12, 2e-12), ("1.00e-12", "5.0e-13", "2.00e-12")),
    ((5.0, 5.0, 5.0), ("5.000000", "5.000000", "5.000000")),
]


@pytest.mark.parametrize(("numbers", "texts"), CASES)
def test_two_digits_of_the_uncertainty(numbers: tuple[float, float, float], texts: tuple[str, str, str]) -> None:
    assert with_interval(*numbers) == texts


def test_texts() -> None:
    assert interval_text(20.0, 17.1, 22.4) == "20.0 (17.1 to 22.4)"
    assert significant(0.0995, 2) == "0.10"
    assert significant(1234.0) == "1230"
    assert significant(0.0) == "0"
    assert plain(0.01) == "0.01"
    assert plain(21.0) == "21"
