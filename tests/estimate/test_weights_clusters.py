"""Sampling weights and clusters: what statsmodels gives for the rows, with no correction for small samples.

A sampling weight multiplies a person's equations, so it enters the sandwich squared; a cluster is one unit whose
equations are summed. Regressions are held against statsmodels (weights as ``var_weights``, covariance "HC0", or
"cluster" with its corrections turned off), and both they and the ways that average against stacked estimating equations
on the rows (``truth.stacked_equations``). Agreement is asked for to 1e-8 relative in the estimate and 1e-7 in its
standard error.
"""

from __future__ import annotations

import math
from itertools import product

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from estimate.planned_numbers import agree, numbers_of
from scipy.stats import norm, t
from truth.stacked_equations import FAMILIES, Rows, doubly_robust, regression, standardised, weighted

from adjustplan.errors import PlanError
from adjustplan.estimate import fit
from adjustplan.plan.analysis_faults import MODELS
from adjustplan.study import SCALES, Measure

pytestmark = [
    pytest.mark.filterwarnings("ignore:The Log link function does not respect the domain"),
    # statsmodels' warning for weights with a sandwich; the stacked equations below say that it is right here
    pytest.mark.filterwarnings("ignore:cov_type not fully supported with var_weights"),
]

OUTCOMES = {"mean": "glucose", "risk": "ill", "odds": "ill", "rate": "days"}
MEASURES: tuple[Measure, ...] = (
    "mean difference",
    "mean ratio",
    "risk difference",
    "risk ratio",
    "odds ratio",
    "rate difference",
    "rate ratio",
)
REGRESSIONS = [(measure, model) for measure in MEASURES for model in MODELS[measure] if model in FAMILIES]
GIVEN = ("weights", "clusters", "weights and clusters")


def people(count: int = 1200, seed: int = 77) -> pd.DataFrame:
    """Staff of 40 clinics that differ in exposure and outcome; some were sampled more often than others."""
    random = np.random.default_rng(seed)
    clinic = random.integers(0, 40, count)
    of_clinic = random.normal(0, 0.5, 40)[clinic]
    age = random.integers(30, 36, count).astype(float)
    site = np.array(["east", "north", "west"])[clinic % 3]
    night = (random.random(count) < 1 / (1 + np.exp(0.4 - 0.3 * (age - 32) - of_clinic))).astype(float)
    risk = 0.15 * np.exp(0.3 * night + 0.06 * (age - 32) + 0.3 * of_clinic)
    years = random.choice([0.5, 1.0, 2.5], count)
    ill = (random.random(count) < risk).astype(float)
    return pd.DataFrame(
        {
            "age": age,
            "site": site,
            "clinic": [f"clinic {number}" for number in clinic],
            "night_work": night,
            "ill": ill,
            "glucose": 5 + 0.05 * age + 0.4 * night + of_clinic + random.normal(0, 0.7, count),
            "days": random.poisson(2 * risk * years).astype(float),
            "years": years,
            # the ill were sampled more often, so that weights matter to the estimate
            "share": np.where(ill == 1, random.choice([1.0, 2.0], count), random.choice([1.0, 2.5, 4.0], count)),
        }
    )


ROWS = people()


def rows_of(measure: str, given: str) -> Rows:
    site, night = ROWS["site"], ROWS["night_work"].to_numpy()
    covariates = np.column_stack([np.ones(len(ROWS)), ROWS["age"], site == "north", site == "west"]).astype(float)
    ends = [np.column_stack([covariates, np.full(len(ROWS), level)]) for level in (1.0, 0.0)]
    return Rows(
        ROWS[OUTCOMES[measure.split()[0]]].to_numpy(),
        night,
        covariates,
        np.column_stack([covariates, night]),
        (ends[0], ends[1]),
        weight=ROWS["share"].to_numpy() if "weights" in given else np.ones(1),
        time=ROWS["years"].to_numpy() if measure.startswith("rate") else np.ones(1),
        cluster=pd.factorize(ROWS["clinic"])[0] if "clusters" in given else None,
    )


@pytest.fixture
def planned(write_plan):
    """Estimate, standard error and interval of the planned set, logarithms for ratios."""

    def run(measure: Measure, given: str, *lines: str, rows: pd.DataFrame = ROWS, **settings: object) -> np.ndarray:
        lines = (*lines, *(['weights = "share"'] if "weights" in given else []))
        lines = (*lines, *(['cluster = "clinic"'] if "clusters" in given else []))
        if measure.startswith("rate"):
            lines = (*lines, 'person_time = "years"')
        plan = write_plan(
            rows,
            measure=measure,
            forms={"age": "linear", "site": "category"},
            columns={"diabetes": OUTCOMES[measure.split()[0]]},
            edges="age, site -> night_work\nage, site -> diabetes\nnight_work -> diabetes",
            analysis="\n".join(lines),
            data="rows.parquet",
            **settings,
        )
        return numbers_of(plan)

    return run


def by_statsmodels(measure: str, model: str, given: str) -> tuple[float, float]:
    """The exposure's coefficient and its standard error, from every row."""
    rows = rows_of(measure, given)
    words: dict[str, object] = {"cov_type": "HC0"}
    if rows.cluster is not None:
        correction = {"groups": rows.cluster, "use_correction": False, "df_correction": False}
        words = {"cov_type": "cluster", "cov_kwds": correction}
    # a rate is Y/t with weight t: the same equations as Y with the offset log t
    result = sm.GLM(
        rows.outcome / rows.time, rows.design, family=FAMILIES[model], var_weights=rows.weight * rows.time
    ).fit(maxiter=200, tol=1e-14, tol_criterion="params", **words)
    return float(result.params[-1]), float(result.bse[-1])


@pytest.mark.parametrize(("measure", "model"), REGRESSIONS)
@pytest.mark.parametrize("given", GIVEN)
def test_a_regression_is_that_of_statsmodels_on_the_rows(planned, measure, model, given):
    quantile = norm.ppf(0.975)
    if measure == "mean difference" and "clusters" not in given:
        quantile = t.ppf(0.975, len(ROWS) - 5)
    found = planned(measure, given, f'model = "{model}"')
    agree(found, *by_statsmodels(measure, model, given), quantile)
    agree(found, *regression(rows_of(measure, given), model), quantile)


@pytest.mark.parametrize("measure", MEASURES)
@pytest.mark.parametrize("given", GIVEN)
def test_standardisation_is_that_of_the_stacked_equations(planned, measure, given):
    model = {"mean": "linear", "rate": "poisson"}.get(measure.split()[0], "logistic")
    found = planned(measure, given, 'way = "standardisation"')
    agree(found, *standardised(rows_of(measure, given), model, SCALES[measure]))


@pytest.mark.parametrize("measure", MEASURES)
@pytest.mark.parametrize("given", GIVEN)
def test_weighting_is_that_of_the_stacked_equations(planned, measure, given):
    agree(planned(measure, given, 'way = "weighting"'), *weighted(rows_of(measure, given), SCALES[measure]))


@pytest.mark.parametrize("given", GIVEN)
def test_truncated_and_known_weights_too(planned, given):
    tables = "[analysis.weighting]\ntruncate = 0.05"
    rows = rows_of("risk ratio", given)
    found = planned("risk ratio", given, 'way = "weighting"', tables=tables)
    agree(found, *weighted(rows, "ratio", truncate=0.05))
    found = planned("risk ratio", given, 'way = "weighting"', tables=f"{tables}\nknown = true")
    agree(found, *weighted(rows, "ratio", truncate=0.05, known=True))


@pytest.mark.parametrize("measure", [measure for measure in MEASURES if not measure.startswith("rate")])
@pytest.mark.parametrize("given", GIVEN)
def test_the_doubly_robust_estimate_is_that_of_the_stacked_equations(planned, measure, given):
    model = "linear" if measure.startswith("mean") else "logistic"
    found = planned(measure, given, 'way = "doubly robust"')
    agree(found, *doubly_robust(rows_of(measure, given), model, SCALES[measure]))


@pytest.mark.parametrize("way", ["regression", "standardisation", "weighting", "doubly robust"])
def test_twice_the_weight_for_all_is_not_twice_as_many_people(planned, way):
    once = planned("risk difference", "weights", f'way = "{way}"')
    twice = planned("risk difference", "weights", f'way = "{way}"', rows=ROWS.assign(share=2 * ROWS["share"]))
    assert twice == pytest.approx(once, rel=1e-9)
    more = planned("risk difference", "weights", f'way = "{way}"', rows=pd.concat([ROWS, ROWS]))
    assert more[:2] == pytest.approx([once[0], once[1] / math.sqrt(2)], rel=1e-9)


@pytest.mark.parametrize("way", ["regression", "standardisation", "weighting", "doubly robust"])
def test_a_cluster_of_copies_counts_as_one_person(write_plan, way):
    # every person three times, in a cluster of their own: the estimate and standard error of each once
    rows = ROWS.assign(person=np.arange(len(ROWS)).astype(float))
    copies = pd.concat([rows] * 3)
    settings = {
        "measure": "risk ratio",
        "forms": {"age": "linear", "site": "category"},
        "columns": {"diabetes": "ill"},
        "edges": "age, site -> night_work\nage, site -> diabetes\nnight_work -> diabetes",
    }
    once = fit(write_plan(rows, analysis=f'way = "{way}"', variance="robust", **settings)).adjusted[0]
    thrice = fit(write_plan(copies, analysis=f'way = "{way}"\ncluster = "person"', **settings)).adjusted[0]
    assert thrice.estimate == pytest.approx(once.estimate, rel=1e-9)
    assert thrice.standard_error == pytest.approx(once.standard_error, rel=1e-8)


@pytest.mark.parametrize(("way", "given"), list(product(["regression", "weighting"], ["weights", "clusters"])))
def test_the_variance_of_the_model_is_refused_beside_them(planned, way, given):
    with pytest.raises(PlanError) as refused:
        planned("risk ratio", given, f'way = "{way}"', variance="model")
    assert {finding.code for finding in refused.value.findings} == {"model-choice"}


@pytest.mark.parametrize("given", ["weights", "clusters"])
def test_a_stratified_estimate_has_no_interval_for_them(write_plan, given):
    column = {"weights": 'weights = "share"', "clusters": 'cluster = "clinic"'}[given]
    plan = write_plan(
        ROWS,
        measure="risk ratio",
        forms={"age": "category", "site": "category"},
        columns={"diabetes": "ill"},
        edges="age, site -> night_work\nage, site -> diabetes\nnight_work -> diabetes",
        analysis=f'way = "stratification"\n{column}',
    )
    found = fit(plan).adjusted[0]
    assert found.estimate is None
    assert found.lower is None
    assert "estimate-way-weights" in {finding.code for finding in found.findings}
