"""Allan deviations against NIST SP 1065 (W. J. Riley, Handbook of Frequency Stability Analysis, 2008).

The 1000-point set is generated as SP 1065 prescribes (p. 107); deviations are Table 31 (p. 108), the nine points Tables 29
and 30 (p. 107, after NBS Monograph 140, annex 8.E). Values as transcribed in public test files that cite these pages.
"""

import numpy as np
import pytest

from stillbench.deviation.overlapping import overlapping_deviation, pooled_deviation
from stillbench.deviation.plain import plain_deviation
from stillbench.foundation.arrays import FloatArray

NINE_POINTS = np.array([892.0, 809.0, 823.0, 798.0, 671.0, 644.0, 883.0, 903.0, 677.0])


def thousand_points() -> FloatArray:
    number = 1_234_567_890
    values = []
    for _ in range(1000):
        values.append(number / 2_147_483_647)
        number = 16_807 * number % 2_147_483_647
    return np.array(values)


def test_generator_gives_the_published_integers() -> None:
    points = thousand_points() * 2_147_483_647
    assert [round(value) for value in points[1:4]] == [395_529_916, 1_209_410_747, 633_705_974]


@pytest.mark.parametrize(("factor", "printed"), [(1, "2.922319e-01"), (10, "9.159953e-02"), (100, "3.241343e-02")])
def test_overlapping_deviation_of_the_thousand_points(factor: int, printed: str) -> None:
    got = overlapping_deviation(thousand_points(), sample_interval=1.0, factor=factor)
    assert f"{got:.6e}" == printed


@pytest.mark.parametrize(("factor", "printed"), [(1, "2.922319e-01"), (10, "9.965736e-02"), (100, "3.897804e-02")])
def test_deviation_without_overlap_of_the_thousand_points(factor: int, printed: str) -> None:
    assert f"{plain_deviation(thousand_points(), factor):.6e}" == printed


@pytest.mark.parametrize(("factor", "printed"), [(1, "91.22945"), (2, "85.95287")])
def test_overlapping_deviation_of_the_nine_points(factor: int, printed: str) -> None:
    assert f"{overlapping_deviation(NINE_POINTS, sample_interval=1.0, factor=factor):.5f}" == printed


@pytest.mark.parametrize(("factor", "printed"), [(1, "91.22945"), (2, "115.8082")])
def test_deviation_without_overlap_of_the_nine_points(factor: int, printed: str) -> None:
    assert f"{plain_deviation(NINE_POINTS, factor):.{len(printed.split('.')[1])}f}" == printed


@pytest.mark.parametrize(("factor", "count"), [(1, 999), (10, 981), (100, 801)])
def test_number_of_pairs_of_the_thousand_points(factor: int, count: int) -> None:
    _, pairs = pooled_deviation([thousand_points()], np.array([factor]))
    assert pairs[0] == count
