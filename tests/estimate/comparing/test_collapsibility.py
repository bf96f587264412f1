"""Confounding and non-collapsibility against exact joint distributions, hand arithmetic and stacked equations."""

from __future__ import annotations

import json
import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from truth.stacked_equations import MEANS, Rows, covariance, score

from adjustplan.data import Moments, Patterns
from adjustplan.data.patterns import Outcome
from adjustplan.estimate import fit
from adjustplan.estimate.comparing.collapsibility import Collapsibility, collapsibility
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.problem import Setting

CODING = ExposureCoding("category", 1.0, 0.0, ("1", "0"))


def planned(variance: str = "model", **more: object) -> Setting:
    forms = {"site": "category", "age": "linear"}
    return Setting("night_work", "odds ratio", "logistic", "regression", variance, CODING, forms, **more)


def patterns_of(cells: pd.DataFrame) -> Patterns:
    """Cells with columns night_work, site (or age), people and risk, and perhaps cluster."""
    people = cells["people"].to_numpy(dtype=np.int64)
    risk = cells["risk"].to_numpy(dtype=float)
    names = [name for name in ("night_work", "site", "age") if name in cells]
    values = cells[names].astype(float).reset_index(drop=True)
    keys = cells[[name for name in ("cluster",) if name in cells]].reset_index(drop=True)
    seen = Outcome("number", int(people.sum()), 0, 0, 0.0, 1.0)
    moments = Moments.plain(people, risk, people * risk * (1 - risk))
    return Patterns(values, dict.fromkeys(names, "number"), people, moments, seen, keys)


def odds(risk: float) -> float:
    return risk / (1 - risk)


def joint(people: dict[tuple[int, int], int], risks: dict[tuple[int, int], float]) -> pd.DataFrame:
    """Cells by (night work, site)."""
    rows = [{"night_work": a, "site": z, "people": n, "risk": risks[a, z]} for (a, z), n in people.items()]
    return pd.DataFrame(rows)


# odds of 1/9 and 3/2 without, three times as high with the exposure: a conditional odds ratio of exactly 3
RISKS = {(0, 0): 0.1, (1, 0): 0.25, (0, 1): 0.6, (1, 1): 9 / 11}


def test_without_confounding_the_crude_odds_ratio_is_the_marginal_one_and_the_conditional_lies_further_out():
    cells = joint({(0, 0): 1000, (1, 0): 1000, (0, 1): 1000, (1, 1): 1000}, RISKS)
    found = collapsibility(patterns_of(cells), planned(), ("site",))
    exposed, reference = (0.25 + 9 / 11) / 2, (0.1 + 0.6) / 2
    marginal = odds(exposed) / odds(reference)
    assert found.conditional.estimate == pytest.approx(3, rel=1e-9)
    assert found.crude.estimate == pytest.approx(marginal, rel=1e-9)
    assert found.marginal.estimate == pytest.approx(marginal, rel=1e-9)
    assert found.confounding == pytest.approx(1, rel=1e-9)
    assert found.non_collapsibility.estimate == pytest.approx(3 / marginal, rel=1e-9)
    assert found.non_collapsibility.estimate > 1.35
    assert found.non_collapsibility.lower > 1


def test_a_protective_exposure_lies_further_below_one_among_people_alike():
    turned = {(1 - a, z): risk for (a, z), risk in RISKS.items()}
    cells = joint({(0, 0): 1000, (1, 0): 1000, (0, 1): 1000, (1, 1): 1000}, turned)
    found = collapsibility(patterns_of(cells), planned(), ("site",))
    assert found.conditional.estimate == pytest.approx(1 / 3, rel=1e-9)
    assert found.conditional.estimate < found.marginal.estimate < 1
    assert found.non_collapsibility.upper < 1


def test_confounding_and_non_collapsibility_are_parted_as_by_hand():
    cells = joint({(0, 0): 3000, (1, 0): 1000, (0, 1): 1000, (1, 1): 3000}, RISKS)
    found = collapsibility(patterns_of(cells), planned(), ("site",))
    crude = odds(0.25 * 0.25 + 0.75 * 9 / 11) / odds(0.75 * 0.1 + 0.25 * 0.6)
    marginal = odds((0.25 + 9 / 11) / 2) / odds((0.1 + 0.6) / 2)
    assert found.crude.estimate == pytest.approx(crude, rel=1e-9)
    assert found.marginal.estimate == pytest.approx(marginal, rel=1e-9)
    assert found.confounding == pytest.approx(crude / marginal, rel=1e-9)
    assert found.non_collapsibility.estimate == pytest.approx(3 / marginal, rel=1e-9)
    assert found.non_collapsibility.estimate / found.confounding == pytest.approx(3 / crude, rel=1e-9)


def test_a_covariate_that_does_not_predict_the_outcome_leaves_both_factors_at_one():
    risks = {(0, 0): 0.2, (1, 0): 0.4, (0, 1): 0.2, (1, 1): 0.4}
    cells = joint({(0, 0): 900, (1, 0): 300, (0, 1): 200, (1, 1): 700}, risks)
    found = collapsibility(patterns_of(cells), planned(), ("site",))
    assert found.confounding == pytest.approx(1, rel=1e-9)
    assert found.non_collapsibility.estimate == pytest.approx(1, rel=1e-9)
    assert found.crude.estimate == pytest.approx(odds(0.4) / odds(0.2), rel=1e-9)


def test_crude_and_conditional_can_agree_although_there_is_confounding():
    # half of the exposed are at either site, of the reference people 6 in 17 at the second: crude odds of 47/123 and
    # 47/41 by hand. The two steps undo each other, and a rule that looks for a change in the estimate sees nothing.
    cells = joint({(0, 0): 1100, (1, 0): 1000, (0, 1): 600, (1, 1): 1000}, RISKS)
    found = collapsibility(patterns_of(cells), planned(), ("site",))
    assert found.crude.estimate == pytest.approx(3, rel=1e-9)
    assert found.conditional.estimate == pytest.approx(3, rel=1e-9)
    assert found.confounding == pytest.approx(found.non_collapsibility.estimate, rel=1e-9)
    assert found.confounding > 1.2


def people(count: int, seed: int) -> pd.DataFrame:
    random = np.random.default_rng(seed)
    age = random.normal(0, 1.5, count)
    night = (random.random(count) < 1 / (1 + np.exp(-0.5 * age))).astype(float)
    risk = 1 / (1 + np.exp(0.8 - night - age))
    return pd.DataFrame(
        {
            "night_work": night,
            "age": age,
            "people": 1,
            "risk": (random.random(count) < risk).astype(float),
            "cluster": random.integers(0, 60, count),
        }
    )


@pytest.mark.parametrize("variance", ["model", "robust", "cluster"])
def test_the_interval_is_that_of_both_odds_ratios_stacked_in_one_system(variance):
    rows = people(800, 4)
    cells = rows if variance == "cluster" else rows.drop(columns="cluster")
    found = collapsibility(patterns_of(cells), planned(variance), ("age",))
    outcome, one = rows["risk"].to_numpy(), np.ones(800)
    design = np.column_stack([one, rows["night_work"], rows["age"]])
    ends = [np.column_stack([one, level * one, rows["age"]]) for level in (1, 0)]
    beta = np.asarray(sm.GLM(outcome, design, family=sm.families.Binomial()).fit(tol=1e-14).params)
    means = np.array([MEANS["logistic"](end @ beta).mean() for end in ends])

    def equations(theta: np.ndarray) -> np.ndarray:
        predicted = [MEANS["logistic"](end @ theta[:3]) for end in ends]
        apart = [(risk - mean)[:, None] for risk, mean in zip(predicted, theta[3:], strict=True)]
        return np.hstack([score("logistic", outcome, one, design, theta[:3]), *apart])

    cluster = rows["cluster"].to_numpy() if variance == "cluster" else None
    base = Rows(outcome, one, design, design, (design, design), one, one, cluster)
    matrix = covariance(base, equations, np.concatenate([beta, means]))
    slopes = np.array([0, 1, 0, -1 / (means[0] * (1 - means[0])), 1 / (means[1] * (1 - means[1]))])
    error = math.sqrt(slopes @ matrix @ slopes)
    value = beta[1] - math.log(odds(means[0]) / odds(means[1]))
    assert math.log(found.non_collapsibility.estimate) == pytest.approx(value, rel=1e-8)
    assert found.non_collapsibility.standard_error == pytest.approx(error, rel=1e-6)
    limits = np.exp(value + np.array([-1, 1]) * 1.959963984540054 * error)
    assert (found.non_collapsibility.lower, found.non_collapsibility.upper) == pytest.approx(tuple(limits), rel=1e-6)


def test_the_interval_is_as_wide_as_the_spread_over_studies():
    random = np.random.default_rng(9)
    shares = np.array([[0.3, 0.2], [0.15, 0.35]])  # by site and night work
    found = []
    for _ in range(300):
        counts = random.multinomial(3000, shares.ravel()).reshape(2, 2)
        cells = joint(
            {(a, z): counts[z, a] for a in (0, 1) for z in (0, 1)},
            {(a, z): random.binomial(counts[z, a], RISKS[a, z]) / counts[z, a] for a in (0, 1) for z in (0, 1)},
        )
        found.append(collapsibility(patterns_of(cells), planned(), ("site",)).non_collapsibility)
    logs = np.log([one.estimate for one in found])
    # the Monte Carlo error of a spread over 300 draws is 4 %
    assert np.mean([one.standard_error for one in found]) == pytest.approx(logs.std(), rel=0.12)
    exposed, reference = (0.5 * 0.25 + 0.5 * 9 / 11), (0.5 * 0.1 + 0.5 * 0.6)
    truth = 3 / (odds(exposed) / odds(reference))
    # 274 to 296 of 300 are three binomial standard errors
    assert 274 <= sum(one.lower < truth < one.upper for one in found) <= 296


def test_a_planned_modifier_does_not_change_the_model_that_is_averaged():
    risks = RISKS | {(1, 1): 0.65}  # an effect that differs between sites
    cells = joint({(0, 0): 3000, (1, 0): 1000, (0, 1): 1000, (1, 1): 3000}, risks)
    plain = collapsibility(patterns_of(cells), planned(), ("site",))
    assert collapsibility(patterns_of(cells), planned(modifier="site"), ("site",)) == plain


def test_what_cannot_be_estimated_is_not_parted():
    cells = joint({(0, 0): 500, (1, 0): 500, (0, 1): 500, (1, 1): 500}, RISKS | {(1, 0): 0.0, (1, 1): 0.0})
    assert collapsibility(patterns_of(cells), planned(), ("site",)) is None


def test_a_fit_by_logistic_regression_says_what_is_confounding(write_plan):
    rows = people(600, 5).rename(columns={"risk": "diabetes"})
    plan = write_plan(rows, members=("age",), forms={"age": "linear"})
    found = fit(plan)
    assert isinstance(found.collapsibility, Collapsibility)
    shown, text = found.collapsibility.to_dict(), str(found)
    json.dumps(shown, allow_nan=False)
    for name in ("crude", "marginal", "conditional", "non_collapsibility"):
        one = shown[name]
        assert f"{one['estimate']:.3g} ({one['lower']:.3g} to {one['upper']:.3g})" in text
    assert shown["meaning"] in text
    assert f"{1 / shown['confounding']:.3g}" in shown["meaning"]
    assert found.collapsibility.findings == ()
