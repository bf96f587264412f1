"""What stress testing is told of a fit, against least squares on the rows and against plain counting."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm

from adjustplan.estimate import fit
from adjustplan.estimate.fitting import analyse
from adjustplan.estimate.stress.running import observe, stress_plan


def rows() -> pd.DataFrame:
    random = np.random.default_rng(8)
    age, site = random.normal(50, 8, 900).round(1), random.choice(["east", "north", "west"], 900)
    night = (random.random(900) < 1 / (1 + np.exp(1 - 0.05 * (age - 50) - 0.6 * (site == "west")))).astype(int)
    glucose = 5 + 0.03 * age + 0.4 * night + 0.3 * (site == "west") + random.normal(0, 1, 900)
    return pd.DataFrame({"age": age, "site": site, "night_work": night, "diabetes": glucose})


EDGES = "age, site -> night_work\nage, site -> diabetes\nnight_work -> diabetes"
SETTINGS = {"edges": EDGES, "forms": {"age": "linear", "site": "category"}}


def test_a_linear_fit_is_observed_as_least_squares_sees_it(write_plan):
    data = rows()
    plan = write_plan(data, measure="mean difference", **SETTINGS)
    seen = observe(analyse(plan, 0))
    dummies = pd.get_dummies(data["site"], drop_first=True, dtype=float)
    covariates = pd.concat([data[["age"]], dummies], axis=1)
    whole = sm.OLS(data["diabetes"], sm.add_constant(pd.concat([data[["night_work"]], covariates], axis=1))).fit()
    assert seen.estimate == pytest.approx(whole.params["night_work"], rel=1e-9)
    assert seen.degrees_of_freedom == whole.df_resid
    assert seen.outcome_sd == pytest.approx(data["diabetes"].std(), rel=1e-12)
    for name, columns in (("age", ["age"]), ("site", list(dummies))):
        others = covariates.drop(columns=columns)
        part = sm.OLS(data["diabetes"], sm.add_constant(pd.concat([data[["night_work"]], others], axis=1))).fit()
        with_exposure = sm.OLS(data["night_work"], sm.add_constant(covariates)).fit()
        without_exposure = sm.OLS(data["night_work"], sm.add_constant(others)).fit()
        told = seen.yardsticks[name]
        assert told.without == pytest.approx(part.params["night_work"], rel=1e-9)
        assert told.with_outcome == pytest.approx(1 - whole.ssr / part.ssr, rel=1e-8)
        assert told.with_exposure == pytest.approx(1 - with_exposure.ssr / without_exposure.ssr, rel=1e-8)


@pytest.mark.parametrize("way", ["regression", "standardisation", "weighting", "doubly robust"])
def test_the_risks_behind_a_risk_difference_differ_by_it(write_plan, way):
    data = rows().assign(diabetes=lambda table: (table["diabetes"] > 6.8).astype(int))
    plan = write_plan(data, measure="risk difference", analysis=f'way = "{way}"', **SETTINGS)
    seen = observe(analyse(plan, 0))
    assert seen.risks is not None
    assert seen.risks[0] - seen.risks[1] == pytest.approx(seen.estimate, rel=1e-9)
    counts = pd.crosstab(data["night_work"], data["diabetes"])
    table = seen.table
    assert table is not None
    cells = (table.exposed_with, table.exposed_without, table.reference_with, table.reference_without)
    assert cells == (counts.loc[1, 1], counts.loc[1, 0], counts.loc[0, 1], counts.loc[0, 0])
    assert seen.sizes == (counts.loc[1].sum(), counts.loc[0].sum())


def test_an_evalue_is_that_of_the_fitted_risk_ratio(write_plan):
    data = rows().assign(diabetes=lambda table: (table["diabetes"] > 6.8).astype(int))
    plan = write_plan(data, measure="risk ratio", **SETTINGS)
    ratio = fit(plan).adjusted[0].estimate
    # VanderWeele and Ding 2017: RR + sqrt(RR (RR - 1))
    assert stress_plan(plan).confounding.evalue.estimate == pytest.approx(ratio + math.sqrt(ratio * (ratio - 1)))
