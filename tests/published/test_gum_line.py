"""Least squares and combination of uncertainties against the worked examples of the GUM (JCGM 100:2008)."""

import numpy as np

from stillbench.scale.line import coverage_factor, effective_dof, fit_line

# H.3, table H.6: readings of a thermometer and their corrections.
T = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
B = np.array([-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160])


def test_straight_line_h3() -> None:
    """Published: y1 = -0.1712(29), y2 = 0.00218(67), r = -0.930, s = 0.0035, b(30) = -0.1494(41)."""
    fit = fit_line([np.ones(T.size), T - 20.0], B)
    errors = np.sqrt(np.diag(fit.covariance))
    assert [f"{value:.4f}" for value in (fit.values[0], errors[0])] == ["-0.1712", "0.0029"]
    assert [f"{value:.5f}" for value in (fit.values[1], errors[1])] == ["0.00218", "0.00067"]
    assert f"{fit.covariance[0, 1] / errors[0] / errors[1]:.3f}" == "-0.930"
    assert f"{fit.scatter:.4f}" == "0.0035"
    at = np.array([1.0, 10.0])
    assert [f"{value:.4f}" for value in (at @ fit.values, np.sqrt(at @ fit.covariance @ at))] == ["-0.1494", "0.0041"]
    assert fit.dof == 9


def test_effective_degrees_of_freedom_g41() -> None:
    """G.4.1: relative 0.25, 0.57 and 0.82 % from 10, 5 and 15 observations; 1.03 %, 19.0 degrees of freedom, U95 = 2.2 %."""
    parts = [(0.25, 9.0), (0.57, 4.0), (0.82, 14.0)]
    combined = np.sqrt(sum(u**2 for u, _ in parts))
    dof = effective_dof(parts)
    assert f"{combined:.2f}" == "1.03"
    assert f"{dof:.1f}" == "19.0"
    assert f"{coverage_factor(np.floor(dof + 0.01), 0.95) * combined:.1f}" == "2.2"


def test_coverage_factors_table_g2() -> None:
    """Table G.2, 95 %: t for 1, 4, 19 degrees of freedom and for endless ones."""
    assert [f"{coverage_factor(nu, 0.95):.2f}" for nu in (1.0, 4.0, 19.0, np.inf)] == ["12.71", "2.78", "2.09", "1.96"]
