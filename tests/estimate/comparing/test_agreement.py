"""Agreement of sufficient sets against stacked equations on rows, resampled rows, and right and wrong graphs."""

from __future__ import annotations

import json
import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from scipy.stats import chi2
from truth.stacked_equations import MEANS, Rows, covariance, score

from adjustplan.data import Moments, Patterns
from adjustplan.data.patterns import Outcome
from adjustplan.estimate import fit
from adjustplan.estimate.comparing.agreement import Agreement, agreement
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.problem import Setting

CODING = ExposureCoding("category", 1.0, 0.0, ("1", "0"))
FORMS = {"age": "linear", "site": "category", "diet": "category"}


def planned(measure: str, model: str, way: str = "regression", variance: str = "robust") -> Setting:
    return Setting("night_work", measure, model, way, variance, CODING, FORMS)


def patterns_of(rows: pd.DataFrame) -> Patterns:
    """Every row a pattern of its own, with its cluster if it has one."""
    outcome = rows["diabetes"].to_numpy(dtype=float)
    people = np.ones(len(rows), dtype=np.int64)
    values = rows[["night_work", "age", "site", "diet"]].astype(float).reset_index(drop=True)
    weight = rows["weight"].to_numpy() if "weight" in rows else np.ones(len(rows))
    moments = Moments.of_equals(people, outcome, np.ones(len(rows)), weight)
    keys = rows[[name for name in ("cluster",) if name in rows]].reset_index(drop=True)
    seen = Outcome("number", len(rows), 0, 0, float(outcome.min()), float(outcome.max()))
    return Patterns(values, dict.fromkeys(values, "number"), people, moments, seen, keys)


def draw(random: np.random.Generator, count: int, *, hidden: float = 0.0, risk: bool = False) -> pd.DataFrame:
    """Site acts on age and on night work; age and diet act on the outcome; diet acts on nothing else.

    Adjusting for age or for site blocks the one back-door path. With ``hidden`` something unmeasured opens another one
    through diet, which sets with and without diet then handle differently.
    """
    unseen = random.normal(0, 1, count)
    site = random.binomial(1, 0.4, count).astype(float)
    age = 0.8 * site + random.normal(0, 1, count)
    diet = (random.random(count) < 1 / (1 + np.exp(-hidden * unseen))).astype(float)
    lean = -0.3 + 0.9 * site + hidden * unseen
    night = (random.random(count) < 1 / (1 + np.exp(-lean))).astype(float)
    mean = 0.5 * night + 0.6 * age + 0.7 * diet
    outcome = mean + random.normal(0, 1, count)
    if risk:
        outcome = (random.random(count) < 1 / (1 + np.exp(1.5 - mean))).astype(float)
    return pd.DataFrame({"night_work": night, "age": age, "site": site, "diet": diet, "diabetes": outcome})


SETS = (("age",), ("site",), ("diet", "site"))


def columns(rows: pd.DataFrame, members: tuple[str, ...]) -> np.ndarray:
    return np.column_stack([np.ones(len(rows)), rows["night_work"], *(rows[name] for name in members)])


def differences(values: np.ndarray, matrix: np.ndarray) -> float:
    """Wald's chi-square of all values being the same."""
    apart = np.diff(np.eye(len(values)), axis=0)
    return float((apart @ values) @ np.linalg.solve(apart @ matrix @ apart.T, apart @ values))


def stacked(rows: pd.DataFrame, model: str, *, marginal: bool) -> tuple[np.ndarray, np.ndarray]:
    """Effects of the three sets and their covariance, with the equations of all sets in one system."""
    family = {"linear": sm.families.Gaussian(), "logistic": sm.families.Binomial(), "poisson": sm.families.Poisson()}
    outcome, count = rows["diabetes"].to_numpy(), len(rows)
    weight = rows["weight"].to_numpy() if "weight" in rows else np.ones(count)
    designs = [columns(rows, members) for members in SETS]
    ends = [[np.where(np.arange(d.shape[1]) == 1, level, d) for level in (1.0, 0.0)] for d in designs]
    betas = [
        np.asarray(
            sm.GLM(outcome, design, family=family[model], var_weights=weight)
            .fit(tol=1e-14, tol_criterion="params", maxiter=100)
            .params
        )
        for design in designs
    ]
    means = [
        [np.average(MEANS[model](end @ beta), weights=weight) for end in pair]
        for pair, beta in zip(ends, betas, strict=True)
    ]
    root = np.concatenate([np.concatenate([beta, pair]) for beta, pair in zip(betas, means, strict=True)])
    starts = np.cumsum([0, *(len(beta) + 2 for beta in betas)])

    def equations(theta: np.ndarray) -> np.ndarray:
        parts = []
        for place, design in enumerate(designs):
            own = theta[starts[place] : starts[place + 1]]
            beta, pair = own[:-2], own[-2:]
            parts.append(score(model, outcome, np.ones(count), design, beta))
            parts += [(MEANS[model](end @ beta) - mean)[:, None] for end, mean in zip(ends[place], pair, strict=True)]
        return np.hstack(parts)

    cluster = rows["cluster"].to_numpy() if "cluster" in rows else None
    nothing = np.ones(count)
    people = Rows(outcome, nothing, designs[0], designs[0], (designs[0], designs[0]), weight, nothing, cluster)
    whole = covariance(people, equations, root)
    slopes, values = np.zeros((3, len(root))), np.zeros(3)
    for place in range(3):
        if not marginal:
            slopes[place, starts[place] + 1] = 1.0
            values[place] = betas[place][1]
            continue
        one, none = means[place]
        last = starts[place + 1]
        slopes[place, last - 2 : last] = 1 / (one * (1 - one)), -1 / (none * (1 - none))
        values[place] = math.log(one / (1 - one) / (none / (1 - none)))
    return values, slopes @ whole @ slopes.T


@pytest.mark.parametrize("more", [(), ("weight",), ("cluster",), ("weight", "cluster")])
@pytest.mark.parametrize(
    ("measure", "model"), [("mean difference", "linear"), ("risk ratio", "poisson"), ("odds ratio", "logistic")]
)
def test_the_test_is_that_of_estimating_equations_stacked_by_row(measure, model, more):
    random = np.random.default_rng(14)
    rows = draw(random, 700, risk=model != "linear")
    rows = rows.assign(**{name: random.choice([0.5, 1.0, 2.0], 700) for name in more if name == "weight"})
    rows = rows.assign(**{name: random.integers(0, 40, 700) for name in more if name == "cluster"})
    variance = "cluster" if "cluster" in more else "robust"
    found = agreement(patterns_of(rows), planned(measure, model, variance=variance), SETS)
    values, matrix = stacked(rows, model, marginal=measure == "odds ratio")
    shown = np.array([one.estimate for one in found.estimates])
    assert (np.log(shown) if model != "linear" else shown) == pytest.approx(values, rel=1e-8)
    assert [one.standard_error for one in found.estimates] == pytest.approx(np.sqrt(np.diag(matrix)), rel=1e-7)
    assert found.statistic == pytest.approx(differences(values, matrix), rel=1e-5)
    assert found.degrees == 2
    assert found.p == pytest.approx(chi2.sf(found.statistic, 2), rel=1e-9)
    high, low = found.apart
    assert (high, low) == (int(np.argmax(values)), int(np.argmin(values)))
    error = math.sqrt(matrix[high, high] + matrix[low, low] - 2 * matrix[high, low])
    ends = values[high] - values[low] + np.array([0, -1, 1]) * 1.959963984540054 * error
    assert found.difference.standard_error == pytest.approx(error, rel=1e-6)
    numbers = (found.difference.estimate, found.difference.lower, found.difference.upper)
    assert numbers == pytest.approx(tuple(np.exp(ends) if model != "linear" else ends), rel=1e-6)
    assert found.way == ("standardisation" if measure == "odds ratio" else "regression")


def test_an_odds_ratio_is_compared_as_the_marginal_one_which_does_not_move_with_what_predicts_only():
    # a huge sample: diet and age predict strongly, so conditional odds ratios differ by right, marginal ones do not
    rows = draw(np.random.default_rng(0), 60_000, risk=True)
    rows["diabetes"] = np.random.default_rng(1).binomial(
        1, 1 / (1 + np.exp(1.5 - rows["night_work"] - 2 * rows["diet"] - 0.3 * rows["age"]))
    )
    found = agreement(patterns_of(rows), planned("odds ratio", "logistic", variance="model"), SETS)
    conditional = [
        math.exp(sm.Logit(rows["diabetes"], columns(rows, members)).fit(disp=0).params.iloc[1]) for members in SETS
    ]
    shown = [one.estimate for one in found.estimates]
    assert conditional[2] / conditional[1] > 1.15
    assert shown[2] / shown[1] == pytest.approx(1, abs=0.02)
    assert found.p > 0.001


@pytest.mark.parametrize("way", ["regression", "standardisation", "weighting", "doubly robust"])
def test_the_covariance_is_that_of_resampled_people(way):
    # 500 bootstrap samples of the rows: the Monte Carlo error of a spread is 3.2 %, so three of them are 10 %
    random = np.random.default_rng(5)
    rows = draw(random, 500)
    everybody, setting = patterns_of(rows), planned("mean difference", "linear", way)
    sets = (("site",), ("age",))
    found = agreement(everybody, setting, sets)
    drawn = []
    for _ in range(500):
        people = np.bincount(random.integers(0, 500, 500), minlength=500)
        weights = people.astype(float)
        drawn.append([by_hand(rows, weights, members, way) for members in sets])
    spread = np.diff(np.array(drawn), axis=1).std()
    assert found.difference.standard_error == pytest.approx(spread, rel=0.1)


def by_hand(rows: pd.DataFrame, weights: np.ndarray, members: tuple[str, ...], way: str) -> float:
    """The effect in weighted rows by plain least squares and Newton's method."""
    outcome, night = rows["diabetes"].to_numpy(), rows["night_work"].to_numpy()
    design = columns(rows, members)
    coefficients = np.linalg.solve((design.T * weights) @ design, design.T @ (weights * outcome))
    if way in ("regression", "standardisation"):
        return float(coefficients[1])  # without products the average of the predictions is the coefficient
    covariates = np.delete(design, 1, axis=1)
    alpha = np.zeros(covariates.shape[1])
    for _ in range(12):
        score = 1 / (1 + np.exp(-covariates @ alpha))
        information = (covariates.T * (weights * score * (1 - score))) @ covariates
        alpha = alpha + np.linalg.solve(information, covariates.T @ (weights * (night - score)))
    score = 1 / (1 + np.exp(-covariates @ alpha))
    inverse = [night / score, (1 - night) / (1 - score)]
    if way == "weighting":
        means = [np.average(outcome, weights=weights * one) for one in inverse]
        return float(means[0] - means[1])
    ends = [np.where(np.arange(design.shape[1]) == 1, level, design) @ coefficients for level in (1.0, 0.0)]
    means = [np.average(end + one * (outcome - end), weights=weights) for end, one in zip(ends, inverse, strict=True)]
    return float(means[0] - means[1])


def test_under_a_right_graph_one_study_in_twenty_disagrees():
    random = np.random.default_rng(31)
    setting = planned("mean difference", "linear")
    found = [agreement(patterns_of(draw(random, 300)), setting, SETS).p for _ in range(300)]
    # 15 of 300 are expected; 4 to 26 are three binomial standard errors
    assert 4 <= sum(p < 0.05 for p in found) <= 26
    assert np.mean(found) == pytest.approx(0.5, abs=3 * math.sqrt(1 / 12 / 300))


def test_the_test_does_not_lean_on_the_variance_of_the_model():
    rows = draw(np.random.default_rng(33), 300)
    robust = agreement(patterns_of(rows), planned("mean difference", "linear"), SETS)
    model = agreement(patterns_of(rows), planned("mean difference", "linear", variance="model"), SETS)
    assert (model.statistic, model.difference) == (robust.statistic, robust.difference)
    assert model.estimates[0].standard_error != robust.estimates[0].standard_error


def test_under_a_wrong_graph_the_sets_disagree():
    random = np.random.default_rng(32)
    setting = planned("mean difference", "linear")
    found = [agreement(patterns_of(draw(random, 3000, hidden=1.2)), setting, SETS) for _ in range(20)]
    assert all(one.p < 0.01 for one in found)
    assert {one.findings[0].code for one in found} == {"estimate-sets-disagree"}
    assert "disagree by more than chance" in found[0].meaning
    # what diet carries of the hidden cause is what tells the sets apart
    assert all("diet" in found[0].sets[place] for place in found[0].apart if place == 2)
    assert all(2 in one.apart for one in found)


def test_sets_that_are_the_same_function_of_the_data_cannot_disagree():
    rows = draw(np.random.default_rng(2), 300)
    rows["diet"] = 1 - rows["site"]
    found = agreement(patterns_of(rows), planned("mean difference", "linear"), (("site",), ("diet",)))
    assert (found.statistic, found.degrees, found.p) == (None, 0, None)
    assert found.difference.estimate == pytest.approx(0, abs=1e-9)
    assert "cannot disagree" in found.meaning
    assert found.findings == ()
    json.dumps(found.to_dict(), allow_nan=False)


def test_a_set_that_repeats_another_takes_no_degree_of_freedom():
    rows = draw(np.random.default_rng(2), 300)
    rows["diet"] = 1 - rows["site"]
    three = agreement(patterns_of(rows), planned("mean difference", "linear"), (("site",), ("diet",), ("age",)))
    two = agreement(patterns_of(rows), planned("mean difference", "linear"), (("site",), ("age",)))
    assert three.degrees == two.degrees == 1
    assert three.statistic == pytest.approx(two.statistic, rel=1e-6)


def test_only_rows_complete_for_every_set_are_compared():
    rows = draw(np.random.default_rng(3), 400)
    rows.loc[:99, "age"] = np.nan
    rows.loc[350:, "site"] = np.nan
    complete = rows.dropna()
    holed = agreement(patterns_of(rows), planned("mean difference", "linear"), SETS)
    whole = agreement(patterns_of(complete), planned("mean difference", "linear"), SETS)
    assert holed.rows == len(complete) == 250
    assert holed.estimates == whole.estimates
    assert holed.statistic == pytest.approx(whole.statistic)


def test_fewer_than_two_sets_with_an_estimate_have_no_agreement():
    rows = draw(np.random.default_rng(3), 200)
    rows["diet"] = rows["night_work"]  # collinear with the exposure
    assert agreement(patterns_of(rows), planned("mean difference", "linear"), (("site",), ("diet",))) is None
    rows["age"] = np.nan
    assert agreement(patterns_of(rows), planned("mean difference", "linear"), (("site",), ("age",))) is None


def test_stratified_estimates_are_compared_by_regression():
    rows = draw(np.random.default_rng(7), 500, risk=True)
    found = agreement(patterns_of(rows), planned("risk difference", "linear", "stratification"), SETS[1:])
    plain = agreement(patterns_of(rows), planned("risk difference", "linear"), SETS[1:])
    assert found == plain
    assert found.way == "regression"


CHAIN = "site -> age\nsite -> night_work\nage -> diabetes\nnight_work -> diabetes\n"


def test_a_fit_compares_the_sufficient_sets_of_the_graph(write_plan):
    rows = draw(np.random.default_rng(8), 300)
    plan = write_plan(
        rows, edges=CHAIN, members=("age",), forms={"age": "linear", "site": "category"}, measure="mean difference"
    )
    found = fit(plan)
    assert isinstance(found.agreement, Agreement)
    assert set(found.agreement.sets) == {("age",), ("site",)}
    shown, text = found.agreement.to_dict(), str(found)
    for one in shown["estimates"]:
        assert f"{one['estimate']:.3g} ({one['lower']:.3g} to {one['upper']:.3g})" in text
    assert shown["meaning"] in text
    assert f"χ² = {shown['statistic']:.3g}" in shown["meaning"]
