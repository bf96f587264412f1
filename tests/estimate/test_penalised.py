"""Firth's penalised likelihood: the 2×2 table, brute force, and separated data."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from scipy.optimize import brentq, minimize, minimize_scalar
from scipy.stats import binom

from adjustplan.estimate.penalised import penalised_logistic

HALF = 3.841458820694124 / 2


def by_hand(beta, columns, rows, mean):
    """Person by person: the Bernoulli likelihood times the root of the determinant of the information."""
    value, information = 0.0, np.zeros((columns.shape[1],) * 2)
    for x, n, m in zip(columns, rows, mean, strict=True):
        risk = 1 / (1 + math.exp(-(x @ beta)))
        value += n * (m * math.log(risk) + (1 - m) * math.log(1 - risk))
        information += n * risk * (1 - risk) * np.outer(x, x)
    return value + 0.5 * math.log(np.linalg.det(information))


def small_study(seed, width=3, people=30):
    rng = np.random.default_rng(seed)
    columns = np.column_stack([np.ones(people), rng.random(people) < 0.5, rng.normal(size=(people, width - 2))])
    return columns.astype(float), rng.integers(1, 4, people).astype(float), rng.integers(0, 2, people).astype(float)


@pytest.mark.parametrize("table", [(3, 7, 5, 5), (8, 0, 3, 7), (8, 0, 0, 9), (0, 4, 200, 1), (1, 1, 1, 1)])
def test_in_a_two_by_two_table_it_adds_one_half_to_each_cell(table):
    a, b, c, d = table
    columns = np.array([[1.0, 1.0], [1.0, 0.0]])
    rows, mean = np.array([a + b, c + d], dtype=float), np.array([a / (a + b), c / (c + d)])
    got = penalised_logistic(columns, rows, mean, np.array([0.0, 1.0]))
    assert got.estimate == pytest.approx(math.log((a + 0.5) * (d + 0.5) / ((b + 0.5) * (c + 0.5))), abs=1e-8)
    assert got.lower < got.estimate < got.upper
    # the information at the estimate, in closed form: the risks are (a + 1/2) / (a + b + 1) and likewise
    one, two = (a + 0.5) / (a + b + 1), (c + 0.5) / (c + d + 1)
    variance = 1 / ((a + b) * one * (1 - one)) + 1 / ((c + d) * two * (1 - two))
    assert got.standard_error == pytest.approx(math.sqrt(variance), rel=1e-8)


@pytest.mark.parametrize("table", [(3, 7, 5, 5), (8, 0, 3, 7), (8, 0, 0, 9)])
def test_the_limits_of_a_two_by_two_table_are_those_of_its_profile(table):
    # with 1/2 in each cell the penalised likelihood of two risks is a product of two binomials with a half more of each
    a, b, c, d = (count + 0.5 for count in table)
    columns = np.array([[1.0, 1.0], [1.0, 0.0]])
    rows = np.array([table[0] + table[1], table[2] + table[3]], dtype=float)
    got = penalised_logistic(columns, rows, np.array([table[0], table[2]]) / rows, np.array([0.0, 1.0]))

    def profile(theta):
        def minus(base):
            up = base + theta
            value = a * up - (a + b) * np.logaddexp(0, up) + c * base - (c + d) * np.logaddexp(0, base)
            return -value

        return -minimize_scalar(minus, bounds=(-30, 30), method="bounded", options={"xatol": 1e-10}).fun

    top = profile(math.log(a * d / (b * c)))
    for limit in (got.lower, got.upper):
        assert top - profile(limit) == pytest.approx(HALF, abs=1e-6)


@pytest.mark.parametrize("seed", range(4))
def test_it_is_the_highest_penalised_likelihood_that_brute_force_finds(seed):
    columns, rows, mean = small_study(seed)
    contrast = np.array([0.0, 1.0, 0.0]) if seed < 2 else np.array([0.0, 1.0, 2.0])
    got = penalised_logistic(columns, rows, mean, contrast)
    options = {"xatol": 1e-10, "fatol": 1e-13, "maxiter": 5000}
    found = minimize(
        lambda beta: -by_hand(beta, columns, rows, mean), np.zeros(3), method="Nelder-Mead", options=options
    )
    assert got.coefficients == pytest.approx(found.x, abs=1e-5)
    assert got.log_likelihood == pytest.approx(-found.fun, abs=1e-9)
    assert got.estimate == pytest.approx(contrast @ found.x, abs=1e-5)
    assert got.standard_error == pytest.approx(math.sqrt(contrast @ got.covariance @ contrast))


@pytest.mark.parametrize("seed", range(2))
def test_the_limits_are_where_brute_force_finds_the_profile_low_enough(seed):
    columns, rows, mean = small_study(seed, people=12)
    contrast = np.array([0.0, 1.0, -0.5])
    got = penalised_logistic(columns, rows, mean, contrast)

    def profile(theta):
        def minus(rest):  # the second coefficient is what holds the contrast at theta
            beta = np.array([rest[0], theta + 0.5 * rest[1], rest[1]])
            return -by_hand(beta, columns, rows, mean)

        best = minimize(minus, got.coefficients[[0, 2]], method="Nelder-Mead", options={"xatol": 1e-9, "fatol": 1e-12})
        return -best.fun - got.log_likelihood + HALF

    assert got.lower == pytest.approx(brentq(profile, got.estimate - 8, got.estimate), abs=1e-5)
    assert got.upper == pytest.approx(brentq(profile, got.estimate, got.estimate + 8), abs=1e-5)


def test_separated_data_have_a_finite_estimate_and_interval():
    columns, rows, _ = small_study(5, width=4, people=60)
    mean = (columns[:, 1] == 1).astype(float)
    got = penalised_logistic(columns, rows, mean, np.array([0.0, 1.0, 0.0, 0.0]))
    assert got.converged
    assert 2 < got.lower < got.estimate < got.upper < 100
    # the estimate ± 1.96 errors is far too symmetrical here
    assert got.upper - got.estimate > got.estimate - got.lower


def test_patterns_with_counts_are_people_written_out():
    columns, rows, mean = small_study(6)
    rows[3], mean[3] = 0, np.nan  # what a pattern without people holds must not matter
    again = np.repeat(np.arange(30), rows.astype(int))
    short = penalised_logistic(columns, rows, mean, np.array([0.0, 1.0, 0.0]))
    long = penalised_logistic(columns[again], np.ones(len(again)), mean[again], np.array([0.0, 1.0, 0.0]))
    assert [short.estimate, short.lower, short.upper] == pytest.approx(
        [long.estimate, long.lower, long.upper], abs=1e-7
    )


def test_it_takes_the_first_order_bias_of_maximum_likelihood_away():
    # the exact expectation over all tables of two groups of eight; the bias of a logit of maximum likelihood is, to
    # first order, (2p - 1) / (2np(1 - p)) (Anscombe 1956; Firth 1993)
    columns, truth = np.array([[1.0, 1.0], [1.0, 0.0]]), math.log((0.6 / 0.4) / (0.4 / 0.6))
    expected = 0.0
    for cases in itertools.product(range(9), repeat=2):
        got = penalised_logistic(columns, np.array([8.0, 8.0]), np.array(cases) / 8, np.array([0.0, 1.0]))
        expected += float(np.prod(binom.pmf(cases, 8, [0.6, 0.4]))) * got.estimate
    first_order = 2 * (2 * 0.6 - 1) / (2 * 8 * 0.6 * 0.4)
    assert abs(expected - truth) < first_order / 5
