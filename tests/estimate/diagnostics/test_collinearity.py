"""Inflation of the variance against statsmodels and against the variances themselves."""

from __future__ import annotations

import numpy as np
import pytest
from statsmodels.datasets import longley
from statsmodels.regression.linear_model import OLS, WLS
from statsmodels.stats.outliers_influence import variance_inflation_factor

from adjustplan.estimate.diagnostics.collinearity import Inflation, inflation_findings, variance_inflation
from adjustplan.estimate.not_estimable import NotEstimableError


def marked(width, *places):
    return np.isin(np.arange(width), places)


@pytest.mark.parametrize("place", range(1, 7))
def test_one_column_has_the_factor_that_statsmodels_gives(place):
    # Longley's data, whose columns are famous for telling the same
    data = longley.load_pandas().exog.to_numpy()
    columns = np.column_stack([np.ones(len(data)), data])
    got = variance_inflation(columns, np.ones(len(data)), marked(7, place), np.eye(7)[place])
    assert got.contrast == pytest.approx(variance_inflation_factor(columns, place), rel=1e-6)
    assert got.generalised == pytest.approx(got.contrast, rel=1e-9)
    assert got.per_column == pytest.approx(got.contrast, rel=1e-9)


def test_the_factors_of_longley_are_those_in_print():
    # GNP deflator, GNP, unemployed, armed forces, population, year: 135.5, 1788.5, 33.6, 3.6, 399.2, 759.0 as R's
    # linear model on these data is known for; from memory
    data = longley.load_pandas().exog.to_numpy()
    columns = np.column_stack([np.ones(len(data)), data])
    weights = np.ones(len(data))
    got = [variance_inflation(columns, weights, marked(7, place), np.eye(7)[place]).contrast for place in range(1, 7)]
    assert got == pytest.approx([135.53, 1788.51, 33.62, 3.59, 399.15, 758.98], abs=0.005)


@pytest.fixture
def design():
    rng = np.random.default_rng(6)
    n = 300
    age = rng.normal(0, 1, n)
    dose = np.digitize(age + rng.normal(0, 1, n), [-0.5, 0.8])
    site = rng.integers(0, 2, n)
    columns = np.column_stack([np.ones(n), dose == 1, dose == 2, age, site, age**2]).astype(float)
    return columns, rng.integers(1, 9, n).astype(float)


def test_weights_count_people(design):
    columns, rows = design
    exposure, contrast = marked(6, 1, 2), np.array([0.0, 0, 1, 0, 0, 0])
    each = np.repeat(columns, rows.astype(int), axis=0)
    got = variance_inflation(columns, rows, exposure, contrast)
    assert got.contrast == pytest.approx(variance_inflation(each, np.ones(len(each)), exposure, contrast).contrast)


@pytest.mark.parametrize("contrast", [[0.0, 0, 1, 0, 0, 0], [0.0, -1, 1, 0, 0, 0], [0.0, 2, 0.5, 0, 0, 0]])
def test_a_contrast_has_the_ratio_of_its_variances_with_and_without_covariates(design, contrast):
    columns, rows = design
    contrast = np.array(contrast)
    whole = WLS(np.zeros(len(rows)), columns, weights=rows).fit().normalized_cov_params
    alone = WLS(np.zeros(len(rows)), columns[:, :3], weights=rows).fit().normalized_cov_params
    expected = (contrast @ whole @ contrast) / (contrast[:3] @ alone @ contrast[:3])
    assert variance_inflation(columns, rows, marked(6, 1, 2), contrast).contrast == pytest.approx(expected, rel=1e-10)


def test_the_generalised_factor_is_that_of_fox_and_monette(design):
    # det R11 · det R22 / det R of the correlations, their equation
    columns, _ = design
    correlations = np.corrcoef(columns[:, 1:].T)
    expected = np.linalg.det(correlations[:2, :2]) * np.linalg.det(correlations[2:, 2:]) / np.linalg.det(correlations)
    got = variance_inflation(columns, np.ones(len(columns)), marked(6, 1, 2), np.array([0.0, 0, 1, 0, 0, 0]))
    assert got.generalised == pytest.approx(expected, rel=1e-9)
    assert got.per_column == pytest.approx(np.sqrt(expected), rel=1e-9)
    assert got.columns == 2


def test_unrelated_covariates_inflate_nothing():
    columns = np.array([[1.0, x, z] for x in (0, 1) for z in (0, 1)])
    assert variance_inflation(columns, np.ones(4), marked(3, 1), np.eye(3)[1]).contrast == pytest.approx(1)


def test_units_change_no_factor(design):
    columns, rows = design
    exposure, contrast = marked(6, 3), np.array([0.0, 0, 0, 1, 0, 0])
    scaled = columns * np.array([1, 1, 1, 1e-6, 1, 1e6])
    expected = 1 / (1 - OLS(columns[:, 3], np.delete(columns, 3, axis=1)).fit().rsquared)
    ones = np.ones(len(rows))
    assert variance_inflation(scaled, ones, exposure, contrast).contrast == pytest.approx(expected, rel=1e-8)


def test_collinear_covariates_among_themselves_do_no_harm(design):
    columns, rows = design
    more = np.column_stack([columns, columns[:, 3] - 2 * columns[:, 4]])
    contrast = np.array([0.0, 0, 1, 0, 0, 0])
    got = variance_inflation(more, rows, marked(7, 1, 2), np.append(contrast, 0.0))
    assert got.contrast == pytest.approx(
        variance_inflation(columns, rows, marked(6, 1, 2), contrast).contrast, rel=1e-8
    )


def test_an_exposure_that_the_covariates_determine_has_no_factor(design):
    columns, rows = design
    more = np.column_stack([columns, columns[:, 1] + columns[:, 3]])
    for exposure in (marked(7, 1), marked(7, 1, 2)):
        with pytest.raises(NotEstimableError) as raised:
            variance_inflation(more, rows, exposure, np.eye(7)[1])
        assert raised.value.finding.code == "estimate-collinear"
    constant = np.column_stack([np.ones(4), np.full(4, 3.0), np.arange(4.0)])
    with pytest.raises(NotEstimableError):
        variance_inflation(constant, np.ones(4), marked(3, 1), np.eye(3)[1])


def test_a_contrast_of_covariates_is_refused(design):
    columns, rows = design
    for contrast in (np.eye(6)[3], np.zeros(6)):
        with pytest.raises(ValueError, match="exposure's columns"):
            variance_inflation(columns, rows, marked(6, 1, 2), contrast)


@pytest.mark.parametrize(("factor", "severity"), [(4.9, None), (5.0, "note"), (9.9, "note"), (16.0, "warning")])
def test_inflation_is_told_with_its_number(factor, severity):
    said = inflation_findings("night_work", Inflation(factor, factor, 1))
    assert [finding.severity for finding in said] == ([severity] if severity else [])
    if factor == 16.0:
        assert "16 times" in said[0].message
        assert "4 times as wide" in said[0].message
        assert said[0].code == "estimate-inflated"
