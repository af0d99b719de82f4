"""Conformance probabilities of the examples of JCGM 106:2012 (inputs and results from memory, reproduced by computation)."""

import pytest

from stillbench.assessment.conformance import conformance_probability
from stillbench.assessment.uncertainty import normal_quantile


def test_viscosity_of_motor_oil() -> None:
    """JCGM 106, 7.4: y = 13.6, u = 1.8, limits 12.5 and 16.3; published 0.66."""
    found = conformance_probability(13.6, 1.8, lower_limit=12.5, upper_limit=16.3)
    assert (f"{found:.2f}", f"{found:.5f}") == ("0.66", "0.66263")


def test_burst_pressure_of_a_container() -> None:
    """JCGM 106, 7.3: y = 509.7 kPa, u = 8.6 kPa, lower limit 490 kPa; published 0.99."""
    found = conformance_probability(509.7, 8.6, lower_limit=490.0)
    assert (f"{found:.2f}", f"{found:.5f}") == ("0.99", "0.98901")


def test_breakdown_voltage_of_a_diode() -> None:
    """JCGM 106, 7.3: y = -5.47 V, u = 0.05 V, upper limit -5.40 V; published 0.92."""
    assert f"{conformance_probability(-5.47, 0.05, upper_limit=-5.40):.2f}" == "0.92"


@pytest.mark.parametrize(
    ("probability", "printed"), [(0.80, "0.84"), (0.90, "1.28"), (0.95, "1.64"), (0.99, "2.33"), (0.999, "3.09")]
)
def test_one_sided_quantiles(probability: float, printed: str) -> None:
    """JCGM 106, Table 1 (z for a one-sided limit; 0.95 is printed 1.64)."""
    assert f"{normal_quantile(probability):.2f}" == printed
    assert f"{conformance_probability(0.0, 1.0, upper_limit=normal_quantile(probability)):.3f}" == f"{probability:.3f}"
