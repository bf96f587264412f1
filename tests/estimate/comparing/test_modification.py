"""Effects by level of a modifier against statsmodels on rows with products, and against planted truths."""

from __future__ import annotations

import json
import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from scipy.optimize import approx_fprime
from scipy.stats import chi2, norm, t

from adjustplan.data import Moments, Patterns
from adjustplan.data.patterns import Outcome
from adjustplan.estimate import fit
from adjustplan.estimate.comparing.modification import EffectModification, modify
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.loading import load
from adjustplan.estimate.modelling import estimate_effect
from adjustplan.estimate.problem import Setting

MEMBERS = ("age", "site")
Z = norm.ppf(0.975)


def depots(count: int = 3000, seed: int = 3) -> pd.DataFrame:
    random = np.random.default_rng(seed)
    age = random.integers(30, 60, count).astype(float)
    site = random.choice(["east", "north", "west"], count, p=[0.5, 0.3, 0.2])
    north, west = site == "north", site == "west"
    night = (random.random(count) < 0.35 + 0.15 * west).astype(float)
    risk = 0.1 * np.exp(0.02 * (age - 45) + night * (0.3 + 0.5 * north - 0.1 * west) + 0.2 * north)
    return pd.DataFrame(
        {
            "age": age,
            "site": site,
            "night_work": night,
            "diabetes": (random.random(count) < risk).astype(float),
            "glucose": 5 + 0.02 * age + night * (0.2 + 0.4 * north) + random.normal(0, 1, count),
            "clinic": random.integers(0, 50, count),
            "weight": random.choice([0.5, 1.0, 2.0], count),
        }
    )


ROWS = depots()
LEVELS = ("east", "north", "west")


@pytest.fixture
def modified(write_plan):
    """What comes of the planned modifier."""

    def run(*lines: str, modifier: str = "site", rows: pd.DataFrame = ROWS, forms=None, **more) -> EffectModification:
        plan = write_plan(
            rows,
            members=MEMBERS,
            forms=forms or {"age": "linear", "site": "category"},
            analysis="\n".join([f'modifier = "{modifier}"', *lines]),
            data="rows.parquet",
            **more,
        )
        loaded = load(plan, 1)
        found = modify(loaded.patterns.complete(["night_work", *MEMBERS]), loaded.setting, list(MEMBERS))
        assert found is not None
        json.dumps(found.to_dict(), allow_nan=False)
        return found

    return run


def by_site(rows: pd.DataFrame = ROWS) -> np.ndarray:
    """1, night, age, north, west, night × north, night × west."""
    north, west, night = (rows["site"] == "north"), (rows["site"] == "west"), rows["night_work"]
    parts = [np.ones(len(rows)), night, rows["age"] - 45, north, west, night * north, night * west]
    return np.column_stack(parts).astype(float)


CONTRASTS = np.array([[0, 1, 0, 0, 0, 0, 0], [0, 1, 0, 0, 0, 1, 0], [0, 1, 0, 0, 0, 0, 1]], dtype=float)
JOINT = {  # exposure alone, level alone, both, against neither
    "north": np.array([[0, 1, 0, 0, 0, 0, 0], [0, 0, 0, 1, 0, 0, 0], [0, 1, 0, 1, 0, 1, 0]], dtype=float),
    "west": np.array([[0, 1, 0, 0, 0, 0, 0], [0, 0, 0, 0, 1, 0, 0], [0, 1, 0, 0, 1, 0, 1]], dtype=float),
}
FAMILIES = {"odds ratio": sm.families.Binomial(), "risk ratio": sm.families.Poisson()}


def reference(measure: str, variance: str, design: np.ndarray, outcome: str = "diabetes"):
    """The same regression on the rows."""
    options = {"model": {"cov_type": "nonrobust"}, "robust": {"cov_type": "HC0"}}.get(variance)
    if variance == "cluster":
        groups = {"groups": ROWS["clinic"], "use_correction": False}
        options = {"cov_type": "cluster", "cov_kwds": groups}
    if measure == "mean difference":
        return sm.OLS(ROWS[outcome], design).fit(**options)
    return sm.GLM(ROWS[outcome], design, family=FAMILIES[measure]).fit(tol=1e-13, **options)


def numbers(estimate) -> tuple[float, float, float, float]:
    return estimate.estimate, estimate.lower, estimate.upper, estimate.standard_error


def linear(row: np.ndarray, model, quantile: float = Z, *, ratio: bool = True) -> tuple[float, float, float, float]:
    """A combination of coefficients with its interval."""
    value, error = row @ model.params.to_numpy(), math.sqrt(row @ model.cov_params().to_numpy() @ row)
    ends = np.array([value, value - quantile * error, value + quantile * error])
    return (*(np.exp(ends) if ratio else ends), error)


def delta(function, rows: np.ndarray, model, *, log: bool = False) -> tuple[float, float, float, float]:
    """A function of three log ratios, its interval from a numerical gradient."""

    def of(beta: np.ndarray) -> float:
        value = function(*np.exp(rows @ beta))
        return math.log(value) if log else value

    beta = model.params.to_numpy()
    step = 1e-6
    gradient = np.array([(of(beta + step * one) - of(beta - step * one)) / (2 * step) for one in np.eye(len(beta))])
    forward = approx_fprime(beta, of, 1e-8)
    assert gradient == pytest.approx(forward, rel=1e-4, abs=1e-5)
    value, error = of(beta), math.sqrt(gradient @ model.cov_params().to_numpy() @ gradient)
    ends = np.array([value, value - Z * error, value + Z * error])
    return (*(np.exp(ends) if log else ends), error)


PLANNED = {
    "model": {"variance": "model"},
    "robust": {"variance": "robust"},
    "cluster": {},
}


@pytest.mark.parametrize("variance", PLANNED)
@pytest.mark.parametrize("measure", ["odds ratio", "risk ratio", "mean difference"])
def test_effects_by_level_are_those_of_one_regression_with_products(modified, measure, variance):
    lines = ['cluster = "clinic"'] if variance == "cluster" else []
    lines += ['model = "poisson"'] if measure == "risk ratio" else []
    outcome = "glucose" if measure == "mean difference" else "diabetes"
    found = modified(*lines, measure=measure, columns={"diabetes": outcome}, **PLANNED[variance])
    model = reference(measure, variance, by_site(), outcome)
    ratio = measure != "mean difference"
    quantile = t.ppf(0.975, len(ROWS) - 7) if not ratio and variance != "cluster" else Z
    assert [stratum.level for stratum in found.strata] == list(LEVELS)
    for stratum, contrast in zip(found.strata, CONTRASTS, strict=True):
        assert numbers(stratum.effect) == pytest.approx(linear(contrast, model, quantile, ratio=ratio), rel=1e-6)
        assert stratum.rows == (ROWS["site"] == stratum.level).sum()
    assert found.strata[0].against_reference is None
    for stratum, contrast in zip(found.strata[1:], CONTRASTS[1:], strict=True):
        expected = linear(contrast - CONTRASTS[0], model, quantile, ratio=ratio)
        assert numbers(stratum.against_reference) == pytest.approx(expected, rel=1e-6)
    wald = model.wald_test(np.eye(7)[5:], use_f=False, scalar=True)
    assert found.test.statistic == pytest.approx(float(wald.statistic), rel=1e-6)
    assert found.test.degrees == 2
    assert found.test.p == pytest.approx(chi2.sf(float(wald.statistic), 2), rel=1e-6)
    if not ratio:
        assert all(stratum.relative_excess_risk is None for stratum in found.strata)


@pytest.mark.parametrize("variance", PLANNED)
@pytest.mark.parametrize("measure", ["odds ratio", "risk ratio"])
def test_additive_interaction_is_the_delta_method_on_the_rows(modified, measure, variance):
    lines = ['cluster = "clinic"'] if variance == "cluster" else []
    lines += ['model = "poisson"'] if measure == "risk ratio" else []
    found = modified(*lines, measure=measure, **PLANNED[variance])
    model = reference(measure, variance, by_site())
    north = found.strata[1]
    expected = delta(lambda r10, r01, r11: r11 - r10 - r01 + 1, JOINT["north"], model)
    assert numbers(north.relative_excess_risk) == pytest.approx(expected, rel=1e-5)
    expected = delta(lambda r10, r01, r11: (r11 - r10 - r01 + 1) / r11, JOINT["north"], model)
    assert numbers(north.attributable_proportion) == pytest.approx(expected, rel=1e-5)
    expected = delta(lambda r10, r01, r11: (r11 - 1) / (r10 + r01 - 2), JOINT["north"], model, log=True)
    assert numbers(north.synergy_index) == pytest.approx(expected, rel=1e-5)
    expected = delta(lambda r10, r01, r11: r11 - r10 - r01 + 1, JOINT["west"], model)
    assert numbers(found.strata[2].relative_excess_risk) == pytest.approx(expected, rel=1e-5)


@pytest.mark.parametrize("variance", PLANNED)
def test_a_number_modifies_at_its_quartiles(modified, variance):
    lines = ['cluster = "clinic"'] if variance == "cluster" else []
    found = modified(*lines, modifier="age", **PLANNED[variance])
    night, age = ROWS["night_work"], ROWS["age"]
    sites = [ROWS["site"] == name for name in ("north", "west")]
    design = np.column_stack([np.ones(len(ROWS)), night, age - 45, *sites, night * (age - 45)]).astype(float)
    model = reference("odds ratio", variance, design)
    quartiles = np.quantile(age, [0.25, 0.5, 0.75], method="inverted_cdf")
    contrasts = [np.array([0, 1, 0, 0, 0, value - 45]) for value in quartiles]
    for stratum, value, contrast, word in zip(
        found.strata, quartiles, contrasts, ("25 %", "median", "75 %"), strict=True
    ):
        assert stratum.level == f"{value:g} ({word})"
        assert numbers(stratum.effect) == pytest.approx(linear(contrast, model), rel=1e-6)
        assert stratum.rows == len(ROWS)
    for stratum, value, contrast in zip(found.strata[1:], quartiles[1:], contrasts[1:], strict=True):
        assert numbers(stratum.against_reference) == pytest.approx(linear(contrast - contrasts[0], model), rel=1e-5)
        alone = np.array([0, 0, value - quartiles[0], 0, 0, 0])
        joint = np.stack([contrasts[0], alone, alone + contrast])
        expected = delta(lambda r10, r01, r11: r11 - r10 - r01 + 1, joint, model)
        assert numbers(stratum.relative_excess_risk) == pytest.approx(expected, rel=1e-5)
    assert found.test.degrees == 1
    assert found.test.statistic == pytest.approx((model.params.iloc[5] / model.bse.iloc[5]) ** 2, rel=1e-6)


def test_a_curve_of_the_modifier_is_tested_with_all_its_columns(modified):
    found = modified(modifier="age", forms={"age": "spline(3)", "site": "category"})
    assert found.test.degrees == 3
    assert len(found.strata) == 3


def test_one_unit_more_of_an_exposure_has_effects_but_no_level_that_is_its_absence(modified):
    dose = np.random.default_rng(1).integers(0, 40, len(ROWS)).astype(float)
    rows = ROWS.assign(night_work=dose)
    found = modified(rows=rows)
    north, west = rows["site"] == "north", rows["site"] == "west"
    design = np.column_stack([np.ones(len(rows)), dose, rows["age"] - 45, north, west, dose * north, dose * west])
    model = reference("odds ratio", "model", design.astype(float))
    for stratum, contrast in zip(found.strata, CONTRASTS, strict=True):
        assert numbers(stratum.effect) == pytest.approx(linear(contrast, model), rel=1e-6)
    assert all(stratum.relative_excess_risk is None for stratum in found.strata)


def test_two_stated_levels_of_a_continuous_exposure_have_joint_effects(modified):
    dose = np.random.default_rng(1).integers(0, 40, len(ROWS)).astype(float)
    rows = ROWS.assign(night_work=dose)
    found = modified(rows=rows, contrast="{ exposed = 30, reference = 10 }")
    north, west = rows["site"] == "north", rows["site"] == "west"
    design = np.column_stack([np.ones(len(rows)), dose, rows["age"] - 45, north, west, dose * north, dose * west])
    model = reference("odds ratio", "model", design.astype(float))
    joint = np.array([[0, 20, 0, 0, 0, 0, 0], [0, 0, 0, 1, 0, 10, 0], [0, 20, 0, 1, 0, 30, 0]], dtype=float)
    expected = delta(lambda r10, r01, r11: r11 - r10 - r01 + 1, joint, model)
    assert numbers(found.strata[1].relative_excess_risk) == pytest.approx(expected, rel=1e-4)


@pytest.mark.parametrize("way", ["standardisation", "weighting", "doubly robust", "stratification"])
def test_other_ways_look_at_each_level_as_a_study_of_its_own(modified, write_plan, way):
    forms = {"age": "category", "site": "category"}
    rows = ROWS.assign(age=(ROWS["age"] > 45).astype(float))
    found = modified(f'way = "{way}"', rows=rows, forms=forms, measure="risk ratio")
    for stratum in found.strata:
        plan = write_plan(
            rows[rows["site"] == stratum.level],
            members=("age",),
            forms=forms,
            measure="risk ratio",
            analysis=f'way = "{way}"',
            data="one.parquet",
        )
        loaded = load(plan, 1)
        alone = estimate_effect(loaded.patterns.complete(["night_work", "age"]), loaded.setting, ["age"]).estimate
        assert numbers(stratum.effect) == pytest.approx(numbers(alone), rel=1e-9)
    first, second = found.strata[0].effect, found.strata[1].effect
    apart = found.strata[1].against_reference
    assert apart.estimate == pytest.approx(second.estimate / first.estimate)
    assert apart.standard_error == pytest.approx(math.hypot(first.standard_error, second.standard_error))
    values = np.log([stratum.effect.estimate for stratum in found.strata])
    weights = 1 / np.array([stratum.effect.standard_error for stratum in found.strata]) ** 2
    # Cochran's Q of independent estimates
    heterogeneity = float(weights @ (values - np.average(values, weights=weights)) ** 2)
    assert found.test.statistic == pytest.approx(heterogeneity)


def test_clusters_that_reach_across_levels_make_their_effects_correlated(modified):
    random = np.random.default_rng(9)
    clinic = random.integers(0, 60, 6000)
    level = np.array(["east", "west"])[random.integers(0, 2, 6000)]
    night = (random.random(60) < 0.5).astype(float)[clinic]  # everybody of a clinic has the same exposure
    common = random.normal(0, 1, 60)[clinic]
    rows = pd.DataFrame(
        {
            "site": level,
            "age": random.integers(30, 33, 6000).astype(float),
            "night_work": night,
            "diabetes": common + random.normal(0, 0.2, 6000),
            "clinic": clinic,
        }
    )
    found = modified('way = "standardisation"', 'cluster = "clinic"', rows=rows, measure="mean difference")
    north, night, age = rows["site"] == "west", rows["night_work"], rows["age"] - 31
    west = found.strata[0].level == "west"
    parts = [np.ones(6000), night, north, night * north, age, age * north]
    design = np.column_stack(parts).astype(float)
    model = sm.OLS(rows["diabetes"], design).fit(
        cov_type="cluster", cov_kwds={"groups": clinic, "use_correction": False}
    )
    # ages hardly differ and do not act, so averaging predictions over them leaves the coefficient of the product
    sign = -1 if west else 1
    apart = found.strata[1].against_reference
    assert apart.estimate == pytest.approx(sign * model.params.iloc[3], rel=1e-9)
    assert apart.standard_error == pytest.approx(model.bse.iloc[3], rel=1e-9)
    assert apart.standard_error < 0.2 * found.strata[0].effect.standard_error


def test_a_planted_excess_risk_is_recovered_and_its_interval_holds_it():
    # risks 0.05, 0.08, 0.09, 0.20 give risk ratios 1.6, 1.8 and 4, so an excess of 1.6
    cells = pd.DataFrame({"night_work": [0.0, 1.0, 0.0, 1.0], "site": ["east", "east", "west", "west"]})
    people, risks = np.array([14_400, 9600, 11_600, 7600]), np.array([0.05, 0.08, 0.09, 0.20])
    coding = ExposureCoding("category", 1.0, 0.0, ("1", "0"))
    forms = {"site": "category"}
    setting = Setting("night_work", "risk ratio", "poisson", "regression", "robust", coding, forms, "site")
    random = np.random.default_rng(21)
    found = []
    for _ in range(400):
        share = random.binomial(people, risks) / people
        moments = Moments.plain(people, share, people * share * (1 - share))
        outcome = Outcome("number", int(people.sum()), 0, 0, 0.0, 1.0)
        kinds = {"night_work": "number", "site": "text"}
        patterns = Patterns(cells, kinds, people, moments, outcome, pd.DataFrame(index=cells.index))
        found.append(modify(patterns, setting, ["site"]).strata[1].relative_excess_risk)
    values = np.array([one.estimate for one in found])
    assert values.mean() == pytest.approx(1.6, abs=3 * values.std() / math.sqrt(400))
    # the Monte Carlo error of a spread over 400 draws is 3.5 %
    assert np.mean([one.standard_error for one in found]) == pytest.approx(values.std(), rel=0.1)
    # of 400 intervals at 95 %, between 367 and 393 hold (binomial, three standard errors)
    assert 367 <= sum(one.lower < 1.6 < one.upper for one in found) <= 393


def test_a_level_where_nobody_is_exposed_has_no_effect_to_report(modified):
    rows = ROWS[~((ROWS["site"] == "north") & (ROWS["night_work"] == 1))]
    found = modified(rows=rows)
    assert found.strata == ()
    (finding,) = found.findings
    assert finding.code == "estimate-modification"
    assert "“site” = north" in finding.message


def test_a_level_where_nobody_exposed_falls_ill_is_refused(modified):
    rows = ROWS.assign(diabetes=np.where((ROWS["site"] == "north") & (ROWS["night_work"] == 1), 0.0, ROWS["diabetes"]))
    found = modified(rows=rows)
    assert found.strata == ()
    assert [one.code for one in found.findings] == ["estimate-modification"]


def test_effects_that_protect_have_no_synergy_index_but_everything_else(modified):
    random = np.random.default_rng(2)
    risk = np.where(ROWS["night_work"] == 1, 0.1, 0.3)
    rows = ROWS.assign(diabetes=(random.random(len(ROWS)) < risk).astype(float))
    found = modified(rows=rows)
    assert any(stratum.synergy_index is None for stratum in found.strata[1:])
    assert "estimate-synergy" in [one.code for one in found.findings]
    assert all(stratum.relative_excess_risk is not None for stratum in found.strata[1:])


def test_a_log_binomial_model_that_does_not_settle_becomes_poisson_with_robust_variance(modified):
    random = np.random.default_rng(12)
    night, age = ROWS["night_work"], ROWS["age"]
    risk = np.clip(0.02 + 0.031 * (age - 30) + 0.05 * night, 0, 1)
    rows = ROWS.assign(diabetes=(random.random(len(ROWS)) < risk).astype(float))
    found = modified('model = "log-binomial"', rows=rows, measure="risk ratio")
    assert "estimate-log-binomial" in [one.code for one in found.findings]
    model = sm.GLM(rows["diabetes"], by_site(rows), family=sm.families.Poisson()).fit(cov_type="HC0", tol=1e-13)
    for stratum, contrast in zip(found.strata, CONTRASTS, strict=True):
        assert numbers(stratum.effect) == pytest.approx(linear(contrast, model), rel=1e-6)


@pytest.mark.parametrize(
    ("lines", "rows", "modifier"),
    [
        (['model = "penalised logistic"'], ROWS, "site"),
        (['way = "standardisation"'], ROWS, "age"),
        ([], ROWS.assign(age=np.where(np.arange(len(ROWS)) < 400, ROWS["age"], 45.0)), "age"),
    ],
)
def test_what_has_no_effects_by_level_says_so(modified, lines, rows, modifier):
    found = modified(*lines, modifier=modifier, rows=rows)
    assert found.strata == ()
    assert [(one.code, one.severity) for one in found.findings] == [("estimate-modification", "warning")]


def test_text_and_json_hold_the_same_numbers(modified):
    found = modified()
    text = "\n".join(found.lines())
    for stratum in found.to_dict()["strata"]:
        for name in ("effect", "against_reference", "relative_excess_risk", "attributable_proportion", "synergy_index"):
            if (one := stratum[name]) is not None:
                assert f"{one['estimate']:.3g} ({one['lower']:.3g} to {one['upper']:.3g})" in text
    assert f"χ² = {found.to_dict()['test']['statistic']:.3g}, 2 degrees of freedom" in text


def test_a_fit_reports_the_planned_modifier_and_none_outside_the_set(write_plan):
    forms = {"age": "linear", "site": "category"}
    plan = write_plan(ROWS, members=MEMBERS, forms=forms, analysis='modifier = "site"')
    assert fit(plan).modification.modifier == "site"
    assert fit(write_plan(ROWS, members=MEMBERS, forms=forms)).modification is None
