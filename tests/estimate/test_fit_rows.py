"""The estimates from covariate patterns are those that statsmodels gives on the rows.

Source of truth: statsmodels fitted to every row, with the model matrix written out by its formula engine.
Agreement is asked for to 1e-8 relative, for the estimate, both standard errors and the interval.
"""

from __future__ import annotations

from itertools import product

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
import statsmodels.formula.api as smf
from formulaic.transforms.cubic_spline import natural_cubic_spline

from adjustplan.estimate import fit

MEASURES = ("mean difference", "odds ratio", "risk ratio")
TERMS = {
    "category": ({"site": "category", "age": "category"}, "C(site) + C(age)"),
    "linear": ({"site": "category", "age": "linear"}, "C(site) + age"),
    "spline": (
        {"site": "category", "age": "spline(4)"},
        "curve",
    ),
}


def people(count: int = 1500, seed: int = 20210101) -> pd.DataFrame:
    """Depot staff with an exposure that depends on age and site, and some missing values."""
    random = np.random.default_rng(seed)
    age = random.integers(22, 34, count).astype(float)
    site = random.choice(["east", "north", "west"], count, p=[0.5, 0.3, 0.2])
    night = random.random(count) < 0.2 + 0.03 * (age - 22) + 0.1 * (site == "west")
    diabetes = random.random(count) < 0.08 + 0.02 * (age - 22) + 0.1 * night + 0.05 * (site == "north")
    rows = pd.DataFrame({"age": age, "site": site, "night_work": night.astype(int), "diabetes": diabetes.astype(float)})
    rows["glucose"] = 5 + 0.03 * age + 0.4 * night + random.normal(0, 0.7, count)
    rows.loc[random.random(count) < 0.04, "age"] = np.nan
    rows.loc[random.random(count) < 0.03, "site"] = None
    rows.loc[random.random(count) < 0.05, ["diabetes", "glucose"]] = np.nan
    return rows


def on_the_rows(rows: pd.DataFrame, measure: str, terms: str, robust: bool) -> tuple[float, float, float, float]:
    """Estimate, standard error and interval from every row, on the scale of the measure."""
    outcome = "glucose" if measure == "mean difference" else "diabetes"
    complete = rows.dropna(subset=["age", "site", "night_work", outcome])
    if terms == "curve":  # spelt out, so that no formula engine chooses its own knots
        age = complete["age"].to_numpy()
        basis = natural_cubic_spline(
            age,
            knots=np.quantile(age, [0.25, 0.5, 0.75]),
            lower_bound=age.min(),
            upper_bound=age.max(),
            constraints="center",
        )
        complete = complete.assign(**{f"curve{place}": column for place, column in basis.items()})
        terms = "C(site) + curve1 + curve2 + curve3 + curve4"
    formula = f"{outcome} ~ night_work{' + ' + terms if terms else ''}"
    kind = "HC0" if robust else "nonrobust"
    if measure == "mean difference":
        result = smf.ols(formula, complete).fit(cov_type=kind, use_t=True)
    else:
        family = sm.families.Binomial() if measure == "odds ratio" else sm.families.Poisson()
        model = smf.glm(formula, complete, family=family)
        result = model.fit(cov_type=kind, tol_criterion="params", tol=1e-12)
    lower, upper = result.conf_int().loc["night_work"]
    value = result.params["night_work"]
    numbers = np.array([value, lower, upper])
    if measure != "mean difference":
        numbers = np.exp(numbers)
    return float(numbers[0]), float(result.bse["night_work"]), float(numbers[1]), float(numbers[2])


@pytest.mark.parametrize(("measure", "form", "variance"), list(product(MEASURES, TERMS, ("model", "robust"))))
@pytest.mark.parametrize("data", ["rows.csv", "rows.parquet"])
def test_patterns_give_what_the_rows_give(write_plan, measure, form, variance, data):
    rows = people()
    forms, terms = TERMS[form]
    outcome = {"diabetes": "glucose"} if measure == "mean difference" else {}
    plan = write_plan(rows, measure=measure, forms=forms, variance=variance, columns=outcome, data=data)
    result = fit(plan)
    planned = result.adjusted[0]
    expected = on_the_rows(rows, measure, terms, variance == "robust")
    got = (planned.estimate, planned.standard_error, planned.lower, planned.upper)
    assert got == pytest.approx(expected, rel=1e-8)
    crude = on_the_rows(rows, measure, "", variance == "robust")
    got = (planned.crude.estimate, planned.crude.standard_error, planned.crude.lower, planned.crude.upper)
    assert got == pytest.approx(crude, rel=1e-8)
    assert result.variance == variance
    complete = rows.dropna(subset=["age", "site", outcome.get("diabetes", "diabetes")])
    assert planned.rows == result.rows == len(complete)


@pytest.mark.parametrize("measure", MEASURES)
def test_a_linear_covariate_far_from_zero_loses_no_digits(write_plan, measure):
    rows = people().dropna()
    far = rows.assign(age=rows["age"] + 100_000.0)
    columns = {"diabetes": "glucose"} if measure == "mean difference" else {}
    settings = {"measure": measure, "forms": {"age": "linear"}, "columns": columns}
    near_result = fit(write_plan(rows, **settings)).adjusted[0]
    far_result = fit(write_plan(far, **settings)).adjusted[0]
    assert far_result.estimate == pytest.approx(near_result.estimate, rel=1e-9)
    assert far_result.standard_error == pytest.approx(near_result.standard_error, rel=1e-9)


def test_the_default_variance_is_robust_for_a_risk_ratio_only(write_plan):
    rows = people()
    assert fit(write_plan(rows, measure="risk ratio")).variance == "robust"
    assert fit(write_plan(rows, measure="odds ratio")).variance == "model"
    assert fit(write_plan(rows, measure="mean difference", columns={"diabetes": "glucose"})).variance == "model"


@pytest.mark.parametrize("data", ["rows.csv", "rows.parquet"])
def test_a_boolean_outcome_and_a_boolean_exposure_count_as_zero_and_one(write_plan, data):
    rows = people().dropna()
    truth = rows.assign(night_work=rows["night_work"] == 1, diabetes=rows["diabetes"] == 1)
    numbers = fit(write_plan(rows, measure="risk ratio", data=data)).adjusted[0]
    booleans = fit(write_plan(truth, measure="risk ratio", data=data)).adjusted[0]
    assert (booleans.estimate, booleans.standard_error) == (numbers.estimate, numbers.standard_error)


def test_an_outcome_far_from_zero_keeps_its_digits(write_plan):
    rows = people().dropna()
    raised = rows.assign(glucose=rows["glucose"] + 1e6)
    settings = {"measure": "mean difference", "columns": {"diabetes": "glucose"}, "variance": "robust"}
    low, high = (fit(write_plan(part, **settings)).adjusted[0] for part in (rows, raised))
    assert high.estimate == pytest.approx(low.estimate, rel=1e-8)
    assert high.standard_error == pytest.approx(low.standard_error, rel=1e-8)
