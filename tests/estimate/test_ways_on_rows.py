"""Every measure by every way to adjust with every model is what comes out of the rows, one by one.

Source of truth: statsmodels fitted to each row for the coefficients and, in regressions, the standard errors; for the
ways that average, the covariance of stacked estimating equations with derivatives taken by machine
(``truth.stacked_equations``). The package sees only covariate patterns with counts and moments. Agreement is asked for
to 1e-8 relative in the estimate and 1e-7 in the standard error and the ends of the interval.
"""

from __future__ import annotations

import math
from itertools import product

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from estimate.planned_numbers import agree, numbers_of
from formulaic.transforms.cubic_spline import natural_cubic_spline
from scipy.stats import norm, t
from truth.stacked_equations import FAMILIES, Rows, doubly_robust, standardised, weighted

from adjustplan.errors import PlanError
from adjustplan.plan.analysis_faults import MODELS, PREDICTING
from adjustplan.study import SCALES, Measure

pytestmark = pytest.mark.filterwarnings("ignore:The Log link function does not respect the domain")

MEMBERS = ("age", "bmi", "site")
FORMS = {"age": "linear", "bmi": "spline(3)", "site": "category"}
MEASURES: tuple[Measure, ...] = tuple(measure for measure in MODELS if measure != "hazard ratio")
REGRESSIONS = [
    (measure, model, variance)
    for measure in MEASURES
    for model in MODELS[measure]
    for variance in ("model", "robust")
    if model in FAMILIES and (measure, variance) != ("rate difference", "model")
]
STANDARDISED = [(measure, model) for measure in MEASURES for model in PREDICTING[measure]]
DOUBLY_ROBUST = [(measure, model) for measure, model in STANDARDISED if not measure.startswith("rate")]
OUTCOMES = {"mean": "glucose", "risk": "ill", "odds": "ill", "prevalence": "ill", "rate": "days"}


def people(count: int = 1500, seed: int = 41) -> pd.DataFrame:
    """Depot staff of few ages and sizes, so that several people share a pattern but not their time at risk."""
    random = np.random.default_rng(seed)
    age = random.integers(30, 37, count).astype(float)
    bmi = random.choice([19.0, 21.5, 23.0, 24.5, 27.0, 31.0], count, p=[0.1, 0.2, 0.25, 0.2, 0.15, 0.1])
    site = random.choice(["east", "north", "west"], count, p=[0.5, 0.3, 0.2])
    lean = 0.2 * (age - 33) + 0.4 * (site == "west") + 0.15 * (bmi - 24) - 0.01 * (bmi - 24) ** 2
    night = (random.random(count) < 1 / (1 + np.exp(0.3 - lean))).astype(float)
    risk = 0.12 * np.exp(0.3 * night + 0.08 * (age - 33) + 0.2 * (site == "north") + 0.03 * (bmi - 24))
    years = random.choice([0.5, 1.0, 2.0, 3.5], count)
    return pd.DataFrame(
        {
            "age": age,
            "bmi": bmi,
            "site": site,
            "night_work": night,
            "hours": np.round(1.5 * night + random.gamma(2.0, 0.8, count) + 0.1 * (age - 30), 1),
            "ill": (random.random(count) < risk).astype(float),
            "glucose": 5 + 0.05 * age + 0.01 * bmi**1.5 + 0.4 * night + random.normal(0, 0.7, count),
            "days": random.poisson(2 * risk * years).astype(float),
            "years": years,
            "weight": random.choice([0.5, 1.0, 2.25, 4.0], count),
            "clinic": random.integers(0, 60, count),
        }
    )


ROWS = people()


def rows_of(measure: str, *, weight: bool = False, cluster: bool = False) -> Rows:
    """The equations' ingredients, with the model matrices written out by hand."""
    bmi = ROWS["bmi"].to_numpy()
    curve = natural_cubic_spline(
        bmi, knots=np.quantile(bmi, [1 / 3, 2 / 3]), lower_bound=bmi.min(), upper_bound=bmi.max(), constraints="center"
    )
    site, night = ROWS["site"], ROWS["night_work"].to_numpy()
    covariates = np.column_stack(
        [np.ones(len(ROWS)), ROWS["age"] - 33, site == "north", site == "west", *curve.values()]
    ).astype(float)
    ends = tuple(np.column_stack([covariates, np.full(len(ROWS), level)]) for level in (1.0, 0.0))
    return Rows(
        ROWS[OUTCOMES[measure.split()[0]]].to_numpy(),
        night,
        covariates,
        np.column_stack([covariates, night]),
        (ends[0], ends[1]),
        weight=ROWS["weight"].to_numpy() if weight else np.ones(1),
        time=ROWS["years"].to_numpy() if measure.startswith("rate") else np.ones(1),
        cluster=ROWS["clinic"].to_numpy() if cluster else None,
    )


@pytest.fixture
def planned(write_plan):
    """Estimate, standard error and interval of the planned set, logarithms for ratios."""

    def run(
        measure: Measure, way: str, model: str | None, *lines: str, exposure: str = "night_work", **settings: object
    ) -> np.ndarray:
        lines = (f'way = "{way}"', *([f'model = "{model}"'] if model else []), *lines)
        if measure.startswith("rate"):
            lines = (*lines, 'person_time = "years"')
        plan = write_plan(
            ROWS,
            measure=measure,
            members=MEMBERS,
            forms=FORMS,
            columns={"night_work": exposure, "diabetes": OUTCOMES[measure.split()[0]]},
            design="cross-sectional" if measure.startswith("prevalence") else "cohort",
            analysis="\n".join(lines),
            data="rows.parquet",
            **settings,
        )
        return numbers_of(plan)

    return run


@pytest.mark.parametrize(("measure", "model", "variance"), REGRESSIONS)
def test_a_regression_is_that_of_statsmodels_on_the_rows(planned, measure, model, variance):
    rows = rows_of(measure)
    found = planned(measure, "regression", model, variance=variance)
    kind = "HC0" if variance == "robust" else "nonrobust"
    if model == "linear":
        # rates: Y/t weighted by t, whose equations are those of Y against x t
        reference = sm.WLS(rows.outcome / rows.time, rows.design, weights=rows.time).fit(cov_type=kind)
    else:
        offset = np.log(rows.time) if measure == "rate ratio" else None
        reference = sm.GLM(rows.outcome, rows.design, family=FAMILIES[model], offset=offset).fit(
            cov_type=kind, maxiter=200, tol=1e-14, tol_criterion="params"
        )
    error, quantile = reference.bse[-1], norm.ppf(0.975)
    if measure == "mean difference":
        quantile = t.ppf(0.975, len(ROWS) - rows.design.shape[1])
    if model == "log-binomial" and variance == "model":
        # the observed information, where statsmodels reports the expected one; for the other models they are the same
        information = -reference.model.hessian(reference.params, observed=True)
        error = math.sqrt(np.linalg.inv(information)[-1, -1])
    agree(found, reference.params[-1], error, quantile)


def test_a_linear_model_of_rates_has_no_variance_of_the_model(planned):
    # Its residual variance is that of Y/t under weights t, which is no moment of the patterns.
    with pytest.raises(PlanError) as refused:
        planned("rate difference", "regression", "linear", variance="model")
    assert [finding.code for finding in refused.value.findings] == ["model-choice"]


@pytest.mark.parametrize(("measure", "model"), STANDARDISED)
def test_standardisation_is_predicting_each_row_at_both_levels(planned, measure, model):
    agree(planned(measure, "standardisation", model), *standardised(rows_of(measure), model, SCALES[measure]))


@pytest.mark.parametrize("measure", MEASURES)
def test_weighting_is_weighting_each_row(planned, measure):
    agree(planned(measure, "weighting", None), *weighted(rows_of(measure), SCALES[measure]))


@pytest.mark.parametrize(("measure", "stabilised"), list(product(("risk ratio", "rate difference"), ("true", "false"))))
def test_known_weights_have_the_variance_of_weighted_means(planned, measure, stabilised):
    tables = f"[analysis.weighting]\nknown = true\nstabilised = {stabilised}"
    found = planned(measure, "weighting", None, tables=tables)
    agree(found, *weighted(rows_of(measure), SCALES[measure], known=True))


@pytest.mark.parametrize("way", ["weighting", "doubly robust"])
def test_weights_with_and_without_the_stabilising_factor_say_the_same(planned, way):
    with_factor, without = (
        planned("odds ratio", way, None, tables=f"[analysis.weighting]\nstabilised = {said}")
        for said in ("true", "false")
    )
    assert with_factor == pytest.approx(without, rel=1e-10)


@pytest.mark.parametrize(("measure", "model"), DOUBLY_ROBUST)
def test_the_doubly_robust_estimate_is_the_corrected_prediction_of_each_row(planned, measure, model):
    agree(planned(measure, "doubly robust", model), *doubly_robust(rows_of(measure), model, SCALES[measure]))


@pytest.mark.parametrize(("share", "known"), list(product((0.01, 0.05), ("true", "false"))))
def test_truncated_weights_are_set_to_a_quantile_of_people(planned, share, known):
    tables = f"[analysis.weighting]\ntruncate = {share}\nknown = {known}"
    rows, words = rows_of("risk difference"), {"known": known == "true", "truncate": share}
    found = planned("risk difference", "weighting", None, tables=tables)
    agree(found, *weighted(rows, "difference", **words))
    assert abs(found[0] - weighted(rows, "difference")[0]) > 1e-5
    found = planned("risk difference", "doubly robust", "logistic", tables=tables)
    agree(found, *doubly_robust(rows, "logistic", "difference", **words))
    assert abs(found[0] - doubly_robust(rows, "logistic", "difference")[0]) > 1e-7


def with_products(rows: Rows, hours: np.ndarray, one: np.ndarray, none: np.ndarray) -> Rows:
    """The same rows with an exposure in numbers and its product with age, compared at ``one`` and ``none``."""
    design, *ends = (np.column_stack([rows.covariates, x, x * rows.covariates[:, 1]]) for x in (hours, one, none))
    return Rows(rows.outcome, rows.exposed, rows.covariates, design, (ends[0], ends[1]), rows.weight, rows.time)


@pytest.mark.parametrize("measure", ["mean difference", "risk difference", "odds ratio", "rate ratio"])
def test_one_unit_more_is_standardised_over_where_each_row_is(planned, measure):
    hours = ROWS["hours"].to_numpy()
    rows = with_products(rows_of(measure), hours, hours + 1, hours)
    found = planned(measure, "standardisation", None, 'modifier = "age"', exposure="hours")
    model = {"mean": "linear", "rate": "poisson"}.get(measure.split()[0], "logistic")
    agree(found, *standardised(rows, model, SCALES[measure]))


@pytest.mark.parametrize("measure", ["mean ratio", "risk ratio", "rate difference"])
def test_two_amounts_are_standardised_over_all_rows(planned, measure):
    hours = ROWS["hours"].to_numpy()
    rows = with_products(rows_of(measure), hours, np.full(len(hours), 4.0), np.zeros(len(hours)))
    contrast = "{ exposed = 4.0, reference = 0.0 }"
    found = planned(measure, "standardisation", None, 'modifier = "age"', exposure="hours", contrast=contrast)
    model = {"mean": "linear", "rate": "poisson"}.get(measure.split()[0], "logistic")
    agree(found, *standardised(rows, model, SCALES[measure]))
