"""With a planted effect and confounding, the crude estimate is biased and the adjusted one is right.

The true values follow from the way the data are made. The draw of 200 000 people is seeded. A right estimate
lies more than four standard errors from the truth once in 16 000 draws; the crude one must lie more than ten
away.
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest

from adjustplan.estimate import fit

PEOPLE = 200_000


def confounded(seed: int = 5) -> pd.DataFrame:
    """Age and site raise exposure and outcome; the exposure has a ratio or a difference of its own."""
    random = np.random.default_rng(seed)
    age, site = random.integers(0, 5, PEOPLE), random.integers(0, 3, PEOPLE)
    night = random.random(PEOPLE) < 0.15 + 0.1 * age + 0.1 * site
    risk = np.exp(-4 + 0.3 * age + 0.25 * site + math.log(1.5) * night)
    odds = np.exp(-3 + 0.3 * age + 0.25 * site + math.log(2.0) * night)
    return pd.DataFrame(
        {
            "age": age,
            "site": site,
            "night_work": night.astype(int),
            "by_risk": (random.random(PEOPLE) < risk).astype(int),
            "by_odds": (random.random(PEOPLE) < odds / (1 + odds)).astype(int),
            "glucose": 5 + 0.2 * age + 0.1 * site + 0.5 * night + random.normal(0, 1, PEOPLE),
        }
    )


@pytest.mark.parametrize(
    ("measure", "outcome", "truth"),
    [("risk ratio", "by_risk", 1.5), ("odds ratio", "by_odds", 2.0), ("mean difference", "glucose", 0.5)],
)
def test_adjusting_for_the_confounders_recovers_the_planted_effect(write_plan, measure, outcome, truth):
    plan = write_plan(
        confounded(),
        measure=measure,
        edges="age, site -> night_work\nage, site -> diabetes\nnight_work -> diabetes",
        columns={"diabetes": outcome},
        forms={"age": "linear", "site": "linear"},
        data="rows.parquet",
    )
    result = fit(plan)
    planned = result.adjusted[0]
    scale = float if measure == "mean difference" else math.log
    assert abs(scale(planned.estimate) - scale(truth)) < 4 * planned.standard_error
    assert abs(scale(result.crude.estimate) - scale(truth)) > 10 * result.crude.standard_error
    assert planned.sufficient
    assert result.patterns == 5 * 3 * 2


def test_the_model_variance_of_a_risk_ratio_is_too_wide_and_the_robust_one_is_not(write_plan):
    # Zou (2004). The spread of the estimate over 60 seeded studies is the standard error it should have.
    logs, robust, model = [], [], []
    random = np.random.default_rng(11)
    for _ in range(60):
        night = random.random(400) < 0.5
        rows = pd.DataFrame({"night_work": night.astype(int)})
        rows["diabetes"] = (random.random(400) < np.where(night, 0.6, 0.4)).astype(int)
        settings = {"measure": "risk ratio", "members": (), "edges": "night_work -> diabetes"}
        crude = fit(write_plan(rows, **settings)).crude
        logs.append(math.log(crude.estimate))
        robust.append(crude.standard_error)
        model.append(fit(write_plan(rows, variance="model", **settings)).crude.standard_error)
    spread = np.std(logs, ddof=1)
    # a standard deviation from 60 draws is off by 1/sqrt(2·59) = 9.2 %; three times that
    assert np.mean(robust) == pytest.approx(spread, rel=3 / math.sqrt(2 * 59))
    # with risks p and q the two variances are as 1/p + 1/q to (1-p)/p + (1-q)/q, here 1.92
    assert np.mean(model) / np.mean(robust) == pytest.approx(math.sqrt(1.92), rel=0.03)
