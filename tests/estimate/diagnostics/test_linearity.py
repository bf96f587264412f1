"""Departure from linearity against models in which the line is a column of its own, and by simulation."""

from __future__ import annotations

import numpy as np
import pytest
from formulaic.transforms.cubic_spline import natural_cubic_spline
from scipy.stats import chi2
from statsmodels.regression.linear_model import OLS

from adjustplan.estimate.diagnostics.linearity import Departure, curvature, departure_from_linearity, linearity_findings
from adjustplan.estimate.diagnostics.wald import WaldTest, wald_test
from adjustplan.estimate.not_estimable import NotEstimableError


def spline(values, knots):
    made = natural_cubic_spline(
        values, knots=knots, lower_bound=values.min(), upper_bound=values.max(), constraints="center"
    )
    return np.column_stack([np.asarray(column) for column in made.values()])


@pytest.fixture
def ages():
    rng = np.random.default_rng(8)
    values = np.sort(rng.uniform(20, 80, 500))
    return values, spline(values, np.array([35.0, 50, 65])), rng


def test_straight_lines_have_no_curvature_and_curves_do(ages):
    values, basis, _ = ages
    constraints = curvature(values, basis)
    assert constraints.shape == (3, 4)
    design = np.column_stack([np.ones_like(values), basis])
    straight = np.linalg.lstsq(design, 3 - 0.7 * values, rcond=None)[0][1:]
    bent = np.linalg.lstsq(design, (values - 50) ** 2, rcond=None)[0][1:]
    assert constraints @ straight == pytest.approx(np.zeros(3), abs=1e-8 * np.abs(straight).max())
    assert np.abs(constraints @ bent).max() > 0.1 * np.abs(bent).max()


@pytest.mark.parametrize("powers", [2, 3, 4])
def test_the_test_is_that_of_the_terms_beside_the_line(powers, ages):
    # in a polynomial the curved part is known: all powers but the first. Here the columns are mixed first
    values, _, rng = ages
    scaled = (values - 50) / 30
    plain = np.column_stack([scaled**power for power in range(1, powers + 1)])
    mixed = plain @ rng.normal(size=(powers, powers))
    outcome = 0.5 * scaled + 0.2 * scaled**2 + rng.normal(size=500)
    fit = OLS(outcome, np.column_stack([np.ones(500), plain])).fit()
    expected = fit.wald_test(np.eye(powers + 1)[2:], use_f=False, scalar=True)
    other = OLS(outcome, np.column_stack([np.ones(500), mixed])).fit()
    got = departure_from_linearity("age", values, mixed, other.params[1:], other.cov_params()[1:, 1:]).test
    assert got.statistic == pytest.approx(float(expected.statistic), rel=1e-6)
    assert got.degrees == powers - 1
    assert got.p == pytest.approx(chi2.sf(float(expected.statistic), powers - 1), rel=1e-5)


def test_the_spline_test_is_the_f_test_of_nested_fits(ages):
    # for least squares the Wald chi-square is the degrees of freedom times the F of the two nested fits, exactly
    values, basis, rng = ages
    outcome = np.sin(values / 10) + rng.normal(size=500)
    curve = OLS(outcome, np.column_stack([np.ones(500), basis])).fit()
    line = OLS(outcome, np.column_stack([np.ones(500), values])).fit()
    f, _, degrees = curve.compare_f_test(line)
    got = departure_from_linearity("age", values, basis, curve.params[1:], curve.cov_params()[1:, 1:]).test
    assert got.degrees == degrees == 3
    assert got.statistic == pytest.approx(3 * f, rel=1e-7)


def test_a_true_line_is_rejected_one_time_in_twenty(ages):
    values, basis, rng = ages
    design = np.column_stack([np.ones(500), basis])
    bread = np.linalg.inv(design.T @ design)
    rejected = 0
    for _ in range(1500):
        outcome = 2 + 0.05 * values + rng.normal(size=500)
        coefficients = bread @ design.T @ outcome
        scale = np.sum((outcome - design @ coefficients) ** 2) / 495
        test = departure_from_linearity("age", values, basis, coefficients[1:], scale * bread[1:, 1:]).test
        rejected += test.p < 0.05
    assert 0.03 < rejected / 1500 < 0.07


def test_repeated_values_change_no_curvature(ages):
    values, basis, _ = ages
    twice, order = np.concatenate([values, values]), np.concatenate([basis, basis])
    assert np.abs(curvature(twice, order)) == pytest.approx(np.abs(curvature(values, basis)), abs=1e-8)


@pytest.mark.parametrize(
    ("shift", "severity", "words"),
    [
        (None, "warning", "freedom, p = 0.003)."),
        (0.4, "warning", "by 0.40 standard"),
        (-0.03, "note", "by 0.03 standard"),
    ],
)
def test_a_curve_is_a_warning_unless_it_hardly_moves_the_estimate(shift, severity, words):
    (finding,) = linearity_findings(Departure("age", WaldTest(13.9, 3, 0.003), shift))
    assert (finding.code, finding.severity) == ("estimate-nonlinear", severity)
    assert words in finding.message


def test_a_line_that_fits_says_nothing():
    assert linearity_findings(Departure("age", WaldTest(1.2, 3, 0.75), 0.9)) == ()


def test_one_straight_column_is_no_curve():
    values = np.arange(10.0)
    with pytest.raises(ValueError, match="draw a curve"):
        curvature(values, (3 * values - 4)[:, None])


def test_a_singular_covariance_gives_no_joint_test():
    with pytest.raises(NotEstimableError) as raised:
        wald_test(np.array([1.0, 1.0]), np.ones((2, 2)))
    assert raised.value.finding.code == "estimate-joint-test"
    for covariance in (np.diag([1.0, 0.0]), np.diag([1.0, -1.0]), np.diag([1.0, np.nan])):
        with pytest.raises(NotEstimableError):
            wald_test(np.array([1.0, 1.0]), covariance)


def test_the_joint_test_does_not_depend_on_units():
    covariance = np.array([[4.0, 1.0], [1.0, 9.0]])
    values = np.array([2.0, -3.0])
    units = np.diag([1e-9, 1e7])
    expected = values @ np.linalg.inv(covariance) @ values
    assert wald_test(units @ values, units @ covariance @ units).statistic == pytest.approx(expected, rel=1e-9)
