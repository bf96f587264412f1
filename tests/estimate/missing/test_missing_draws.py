"""Drawn regressions and shared-out cells against statsmodels on the rows, exact algebra and brute force."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import stats
from statsmodels.discrete.discrete_model import MNLogit
from statsmodels.genmod.families import Binomial
from statsmodels.genmod.generalized_linear_model import GLM
from statsmodels.regression.linear_model import OLS

from adjustplan.estimate.missing.draws import class_probabilities, draw_classes, draw_linear
from adjustplan.estimate.missing.matching import share_alike, share_by, share_matched

Floats = NDArray[np.float64]
DRAWS = 4000


def cells() -> tuple[Floats, NDArray[np.int64]]:
    """A model matrix with a category and a number, and people per line."""
    random = np.random.default_rng(2)
    lines = np.column_stack([np.ones(30), np.repeat([0.0, 1.0], 15), np.tile(np.linspace(-1, 1, 15), 2)])
    return lines, random.integers(1, 20, 30)


def assert_centre_and_spread(draws: Floats, mean: Floats, covariance: Floats) -> None:
    """Sample mean and variances of normal-like draws within four standard errors of what they should be."""
    spread = np.sqrt(np.diag(covariance))
    assert np.all(np.abs(draws.mean(axis=0) - mean) < 4 * spread / math.sqrt(len(draws)))
    found = np.cov(draws, rowvar=False) / np.outer(spread, spread)
    wanted = covariance / np.outer(spread, spread)
    assert np.all(np.abs(found - wanted) < 4 * math.sqrt(2 / len(draws)))


def test_linear_draws_have_the_posterior_of_a_linear_regression() -> None:
    """Means, covariance RSS / (ν - 2) (X'X)⁻¹ and E[1/σ²] = ν / RSS, from statsmodels on the rows."""
    columns, counts = cells()
    random = np.random.default_rng(3)
    values = columns @ np.array([1.0, 2.0, -1.0]) + random.normal(size=30)
    rows = OLS(np.repeat(values, counts), np.repeat(columns, counts, axis=0)).fit()
    found = [draw_linear(columns, counts.astype(float), values, random) for _ in range(DRAWS)]
    assert found[0][0] == pytest.approx(np.asarray(rows.params), rel=1e-10)
    covariance = np.asarray(rows.normalized_cov_params) * rows.ssr / (rows.df_resid - 2)
    assert_centre_and_spread(np.array([drawn for _, drawn, _ in found]), np.asarray(rows.params), covariance)
    precision = np.array([deviation**-2 for _, _, deviation in found]) * rows.ssr / rows.df_resid
    assert abs(precision.mean() - 1) < 4 * math.sqrt(2 / rows.df_resid / DRAWS)
    # a chi-squared over its degrees of freedom has the variance 2 / ν, and kurtosis 3 + 12 / ν
    error = 2 / rows.df_resid * math.sqrt((2 + 12 / rows.df_resid) / DRAWS)
    assert abs(precision.var() - 2 / rows.df_resid) < 4 * error


def test_class_draws_are_around_the_maximum_likelihood_estimate() -> None:
    """Three classes; coefficients and their covariance from statsmodels' multinomial logit on the rows."""
    columns, counts = cells()
    random = np.random.default_rng(4)
    truth = np.array([[0.3, -0.2], [0.5, -0.8], [-0.5, 0.4]])
    shared = random.multinomial(10 * counts, class_probabilities(columns, truth))
    line, level = np.nonzero(shared)
    people = shared[line, level]
    rows = MNLogit(np.repeat(level, people), np.repeat(columns[line], people, axis=0)).fit(disp=0, tol=1e-12)
    draws = []
    for _ in range(DRAWS):
        coefficients, augmented = draw_classes(columns[line], people.astype(float), level, 3, random)
        assert coefficients is not None
        assert not augmented
        draws.append(coefficients.T.ravel())
    assert_centre_and_spread(np.array(draws), np.asarray(rows.params).T.ravel(), np.asarray(rows.cov_params()))


def test_collinear_predictors_predict_as_without_the_copy() -> None:
    columns, counts = cells()
    random = np.random.default_rng(5)
    values = columns @ np.array([1.0, 2.0, -1.0]) + random.normal(size=30)
    doubled = np.column_stack([columns, columns[:, 1], np.zeros(30)])
    alone = draw_linear(columns, counts.astype(float), values, np.random.default_rng(1))[0]
    twice = draw_linear(doubled, counts.astype(float), values, np.random.default_rng(1))[0]
    assert doubled @ twice == pytest.approx(columns @ alone, abs=1e-9)
    classes = random.integers(0, 2, 30)
    coefficients, augmented = draw_classes(doubled, counts.astype(float), classes, 2, random)
    assert coefficients is not None
    assert not augmented
    assert np.abs(coefficients).max() < 10


def test_perfect_prediction_is_met_by_the_published_added_people() -> None:
    """White, Daniel and Royston (2010): p + 1 people at mean ± SD of each predictor, for each class.

    The maximum likelihood estimate with these rows comes from statsmodels; without them it is infinite.
    """
    columns = np.array([[1.0, 0.0, -1.0], [1.0, 0.0, 1.0], [1.0, 1.0, -1.0], [1.0, 1.0, 1.0]] * 2)
    classes = np.repeat([0, 1], 4)
    counts = np.array([40.0, 30, 20, 25, 25, 35, 0, 0])  # nobody at level 1 of the first predictor is in class 1
    seen = counts > 0
    columns, classes, counts = columns[seen], classes[seen], counts[seen]
    mean = np.average(columns, axis=0, weights=counts)
    spread = np.sqrt(np.average((columns - mean) ** 2, axis=0, weights=counts))
    added = [mean + sign * spread * (np.arange(3) == place) for _ in (0, 1) for place in (1, 2) for sign in (1.0, -1.0)]
    rows = GLM(
        np.concatenate([classes, np.repeat([0, 1], 4)]),
        np.vstack([columns, added]),
        family=Binomial(),
        freq_weights=np.concatenate([counts, np.full(8, 3 / 8)]),
    ).fit(tol=1e-12, maxiter=200)
    random = np.random.default_rng(6)
    found = [draw_classes(columns, counts, classes, 2, random) for _ in range(DRAWS // 4)]
    assert all(augmented for _, augmented in found)
    draws = np.array([coefficients[:, 0] for coefficients, _ in found if coefficients is not None])
    assert len(draws) == DRAWS // 4
    assert_centre_and_spread(draws, np.asarray(rows.params), np.asarray(rows.normalized_cov_params))


@pytest.mark.parametrize("people", [3, 40])
def test_a_large_cell_is_shared_out_as_its_people_would_be_one_by_one(people: int) -> None:
    """The number at each level is multinomial: mean n p, variance n p (1 - p), for few people and for many."""
    random = np.random.default_rng(7)
    weights = np.array([5.0, 1, 4, 10])
    chances = weights / weights.sum()
    repeats = 5000
    counts = np.full(repeats, people)
    for row, level, share in (
        share_alike(counts, weights, random),
        share_by(counts, np.tile(chances, (repeats, 1)), random),
    ):
        table = np.zeros((repeats, 4))
        np.add.at(table, (row, level), share)
        assert (table.sum(axis=1) == people).all()
        variance = people * chances * (1 - chances)
        assert np.all(np.abs(table.mean(axis=0) - people * chances) < 4 * np.sqrt(variance / repeats))
        kurtosis = 3 + (1 - 6 * chances * (1 - chances)) / variance
        error = variance * np.sqrt((kurtosis - 1) / repeats)
        assert np.all(np.abs(table.var(axis=0) - variance) < 4 * error)


@pytest.mark.parametrize("people", [1, 60])
def test_tied_donors_share_the_five_places_by_their_numbers(people: int) -> None:
    """Nearest are 3 people, then 10 tied ones for the two places left: chances 2/5, 1/5, 2/5 · 4/10, 2/5 · 6/10."""
    random = np.random.default_rng(8)
    repeats = 6000 // people
    (row, level, share), _ = share_matched(
        np.full(repeats, people),
        np.full(repeats, 0.1),
        np.array([3, 0, 2, 1, 4]),
        np.array([6.0, 2, 4, 1, 50]),
        np.array([1.0, 0, 1, 0, 9]),
        random,
    )
    assert np.bincount(row, weights=share).tolist() == [people] * repeats
    found = np.bincount(level, weights=share, minlength=5)
    assert found[4] == 0
    assert stats.chisquare(found[:4], 6000 * np.array([0.4, 0.2, 0.16, 0.24])).pvalue > 1e-4


def test_matching_on_cells_is_matching_person_by_person() -> None:
    """Brute force: lay the people out in a random order, sort by distance, take five, pick one."""
    random = np.random.default_rng(9)
    levels, donors = np.arange(12) % 7, random.integers(1, 5, 12)
    predicted = np.array([0.0, 0.0, 0.2, 0.3, 0.3, 0.3, 0.7, 0.9, 1.0, 1.0, 1.4, 2.0])
    one_by_one = np.repeat(levels, donors), np.repeat(predicted, donors)
    draws = 4000
    for wanted in (-3.0, 0.26, 0.8, 5.0):
        brute, means = np.zeros(7), np.zeros(draws)
        for draw in range(draws):
            shuffled = random.permutation(len(one_by_one[0]))
            nearest = np.argsort(np.abs(one_by_one[1][shuffled] - wanted), kind="stable")[:5]
            brute[one_by_one[0][shuffled][random.choice(nearest)]] += 1
            means[draw] = one_by_one[1][shuffled][nearest].mean()
        (_, level, share), gaps = share_matched(
            np.array([draws]), np.array([wanted]), levels, donors.astype(float), predicted, random
        )
        ours = np.bincount(level, weights=share, minlength=7)
        assert gaps[0] == pytest.approx(abs(means.mean() - wanted), abs=1e-9)
        both = (brute + ours) > 0
        assert stats.chi2_contingency(np.vstack([brute, ours])[:, both]).pvalue > 1e-4


def test_fewer_people_than_five_are_all_donors() -> None:
    (_, level, share), _ = share_matched(
        np.array([3000]),
        np.array([0.0]),
        np.array([0, 1]),
        np.array([1.0, 2.0]),
        np.array([0.0, 4.0]),
        np.random.default_rng(10),
    )
    assert stats.binomtest(int(share[level == 1].sum()), 3000, 2 / 3).pvalue > 1e-4
