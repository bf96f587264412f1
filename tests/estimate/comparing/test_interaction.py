"""Effect modification against brute arithmetic, numerical derivatives, simulation and statsmodels on rows."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from scipy.optimize import approx_fprime
from scipy.stats import chi2
from statsmodels.formula.api import logit, ols

from adjustplan.estimate.comparing.interaction import (
    JointEffects,
    attributable_proportion,
    joint_effects,
    modification,
    ratio_of_ratios,
    relative_excess_risk,
    synergy_index,
)
from adjustplan.estimate.not_estimable import NotEstimableError

# people with the outcome and all people: neither, exposure alone, other factor alone, both
CASES, PEOPLE = np.array([30.0, 45, 40, 96]), np.array([600.0, 500, 400, 320])

MEASURES = {
    relative_excess_risk: (lambda b: math.exp(b[2]) - math.exp(b[0]) - math.exp(b[1]) + 1, False),
    attributable_proportion: (
        lambda b: (math.exp(b[2]) - math.exp(b[0]) - math.exp(b[1]) + 1) / math.exp(b[2]),
        False,
    ),
    synergy_index: (lambda b: math.log((math.exp(b[2]) - 1) / (math.exp(b[0]) + math.exp(b[1]) - 2)), True),
    ratio_of_ratios: (lambda b: b[2] - b[0] - b[1], True),
}


def of_risks(cases=CASES, people=PEOPLE) -> JointEffects:
    """Log risk ratios against the first of four groups, with the covariance that they share through it."""
    logs = np.log(cases / people)
    variances = 1 / cases - 1 / people
    return JointEffects(logs[1:] - logs[0], np.diag(variances[1:]) + variances[0])


def test_risk_ratios_of_a_table_give_the_interaction_that_arithmetic_gives():
    r10, r01, r11 = (45 / 500) / (30 / 600), (40 / 400) / (30 / 600), (96 / 320) / (30 / 600)
    joint = of_risks()
    assert (r10, r01, r11) == pytest.approx((1.8, 2.0, 6.0))
    assert relative_excess_risk(joint).estimate == pytest.approx(6 - 1.8 - 2 + 1)
    assert attributable_proportion(joint).estimate == pytest.approx(3.2 / 6)
    assert synergy_index(joint).estimate == pytest.approx(5 / 1.8)
    assert ratio_of_ratios(joint).estimate == pytest.approx(6 / 3.6)


def test_the_excess_is_the_interaction_contrast_of_risks_over_the_lowest_risk():
    # RERI = (p11 - p10 - p01 + p00) / p00, so its standard error follows from the four binomial variances
    p = CASES / PEOPLE
    v = p * (1 - p) / PEOPLE
    contrast = p[3] - p[1] - p[2] + p[0]
    got = relative_excess_risk(of_risks())
    assert got.estimate == pytest.approx(contrast / p[0], rel=1e-12)
    slope = 1 / p[0] - contrast / p[0] ** 2
    assert got.standard_error == pytest.approx(math.sqrt(v[1:].sum() / p[0] ** 2 + slope**2 * v[0]), rel=1e-12)
    half = 1.959963984540054 * got.standard_error
    assert (got.lower, got.upper) == pytest.approx((got.estimate - half, got.estimate + half))


@pytest.mark.parametrize("measure", MEASURES)
def test_the_interval_is_the_delta_method_with_a_numerical_gradient(measure):
    function, on_log_scale = MEASURES[measure]
    joint = of_risks()
    gradient = approx_fprime(joint.values, function, 1e-7)
    error = math.sqrt(gradient @ joint.covariance @ gradient)
    got = measure(joint)
    assert got.standard_error == pytest.approx(error, rel=1e-5)
    centre = math.log(got.estimate) if on_log_scale else got.estimate
    limits = np.array([centre - 1.959963984540054 * error, centre + 1.959963984540054 * error])
    assert (got.lower, got.upper) == pytest.approx(tuple(np.exp(limits) if on_log_scale else limits), rel=1e-4)


@pytest.mark.parametrize("measure", MEASURES)
def test_intervals_hold_the_planted_truth(measure):
    rng = np.random.default_rng(11)
    truth_p = np.array([0.05, 0.09, 0.10, 0.25])
    people = np.array([6000, 5000, 4000, 3000])
    function, on_log_scale = MEASURES[measure]
    truth = function(np.log(truth_p[1:] / truth_p[0]))
    truth = math.exp(truth) if on_log_scale else truth
    draws = [measure(of_risks(rng.binomial(people, truth_p) * 1.0, people * 1.0)) for _ in range(2000)]
    assert 0.935 < np.mean([draw.lower < truth < draw.upper for draw in draws]) < 0.965
    values = np.array([draw.estimate for draw in draws])
    values = np.log(values) if on_log_scale else values
    # Monte Carlo error of a spread over 2,000 draws is 1.6 %
    assert np.mean([draw.standard_error for draw in draws]) == pytest.approx(values.std(), rel=0.05)


def test_effects_that_add_up_show_no_interaction_on_the_additive_scale_only():
    joint = JointEffects(np.log([1.5, 2.0, 2.5]), np.diag([0.02, 0.03, 0.04]))
    assert relative_excess_risk(joint).estimate == pytest.approx(0, abs=1e-12)
    assert attributable_proportion(joint).estimate == pytest.approx(0, abs=1e-12)
    assert synergy_index(joint).estimate == pytest.approx(1)
    assert ratio_of_ratios(joint).estimate == pytest.approx(2.5 / 3)


def test_effects_that_multiply_show_interaction_on_the_additive_scale_only():
    joint = JointEffects(np.log([1.5, 2.0, 3.0]), np.diag([0.02, 0.03, 0.04]))
    assert ratio_of_ratios(joint).estimate == pytest.approx(1)
    assert ratio_of_ratios(joint).standard_error == pytest.approx(0.3)
    assert relative_excess_risk(joint).estimate == pytest.approx(0.5)


@pytest.mark.parametrize("ratios", [[0.5, 2.0, 3.0], [0.5, 0.6, 0.2], [1.5, 2.0, 0.9], [0.5, 1.5, 2.0]])
def test_a_protective_factor_has_no_synergy_index(ratios):
    joint = JointEffects(np.log(ratios), np.diag([0.02, 0.03, 0.04]))
    if ratios == [0.5, 2.0, 3.0]:
        assert synergy_index(joint).estimate == pytest.approx(4)
        return
    with pytest.raises(NotEstimableError) as raised:
        synergy_index(joint)
    assert raised.value.finding.code == "estimate-synergy"
    assert math.isfinite(relative_excess_risk(joint).estimate)


@pytest.mark.parametrize("measure", MEASURES)
@pytest.mark.parametrize("values", [[0.4, 0.7, 900.0], [math.nan, 0.7, 1.8]])
def test_what_overflows_is_no_number(measure, values):
    with pytest.raises(NotEstimableError):
        measure(JointEffects(np.array(values), np.eye(3)))


@pytest.mark.parametrize("covariance", [np.zeros((3, 3)), -np.eye(3), np.full((3, 3), math.nan)])
def test_without_a_variance_there_is_no_interval(covariance):
    with pytest.raises(NotEstimableError) as raised:
        relative_excess_risk(JointEffects(np.array([0.2, 0.4, 0.9]), covariance))
    assert raised.value.finding.code == "estimate-interaction"


@pytest.fixture(scope="module")
def rows() -> pd.DataFrame:
    rng = np.random.default_rng(5)
    n = 6000
    site = rng.integers(0, 3, n)
    night = rng.binomial(1, 0.3 + 0.1 * site)
    risk = 1 / (1 + np.exp(2.5 - 0.3 * site - np.array([0.2, 0.7, 1.1])[site] * night))
    return pd.DataFrame(
        {"site": site, "night": night, "ill": rng.binomial(1, risk), "glucose": 5 + risk + rng.normal(0, 1, n)}
    )


def contrasts(names: list[str]) -> np.ndarray:
    """Exposed minus reference at each site, in a model with products."""
    made = np.zeros((3, len(names)))
    made[:, names.index("night")] = 1
    for level in (1, 2):
        made[level, names.index(f"night:C(site)[T.{level}]")] = 1
    return made


def test_stratum_estimates_are_those_of_one_model_per_stratum(rows):
    model = logit("ill ~ night * C(site)", rows).fit(disp=0)
    got = modification(model.params.to_numpy(), model.cov_params().to_numpy(), contrasts(list(model.params.index)))
    for level, effect in enumerate(got.effects):
        alone = logit("ill ~ night", rows[rows["site"] == level]).fit(disp=0)
        assert math.log(effect.estimate) == pytest.approx(alone.params["night"], rel=1e-6)
        assert effect.standard_error == pytest.approx(alone.bse["night"], rel=1e-6)
        assert (effect.lower, effect.upper) == pytest.approx(tuple(np.exp(alone.conf_int().loc["night"])), rel=1e-6)


def test_the_ratio_of_ratios_is_the_coefficient_of_the_product(rows):
    model = logit("ill ~ night * C(site)", rows).fit(disp=0)
    got = modification(model.params.to_numpy(), model.cov_params().to_numpy(), contrasts(list(model.params.index)))
    assert got.against_reference[0] is None
    for level in (1, 2):
        product = f"night:C(site)[T.{level}]"
        apart = got.against_reference[level]
        assert math.log(apart.estimate) == pytest.approx(model.params[product])
        assert apart.standard_error == pytest.approx(model.bse[product])
        assert apart.estimate == pytest.approx(got.effects[level].estimate / got.effects[0].estimate)


@pytest.mark.parametrize("reference", [0, 1, 2])
def test_the_joint_test_does_not_depend_on_the_reference(rows, reference):
    model = logit("ill ~ night * C(site)", rows).fit(disp=0)
    names = list(model.params.index)
    got = modification(
        model.params.to_numpy(), model.cov_params().to_numpy(), contrasts(names), reference=reference
    ).test
    products = np.eye(len(names))[[names.index(f"night:C(site)[T.{level}]") for level in (1, 2)]]
    wald = model.wald_test(products, use_f=False, scalar=True)
    assert got.statistic == pytest.approx(float(wald.statistic), rel=1e-8)
    assert got.p == pytest.approx(chi2.sf(float(wald.statistic), 2), rel=1e-7)
    assert got.degrees == 2


def test_differences_of_differences_stay_on_their_scale(rows):
    model = ols("glucose ~ night * C(site)", rows).fit()
    quantile = 1.9603  # near that of t; the interval must follow it
    got = modification(
        model.params.to_numpy(),
        model.cov_params().to_numpy(),
        contrasts(list(model.params.index)),
        ratio=False,
        quantile=quantile,
    )
    groups = rows.groupby(["site", "night"])["glucose"].mean().unstack()
    effects = (groups[1] - groups[0]).to_numpy()
    assert [effect.estimate for effect in got.effects] == pytest.approx(effects)
    apart = got.against_reference[2]
    assert apart.estimate == pytest.approx(effects[2] - effects[0])
    assert apart.upper - apart.lower == pytest.approx(2 * quantile * apart.standard_error)


def test_joint_effects_of_a_saturated_model_are_those_of_the_table(rows):
    two = rows[rows["site"] < 2]
    model = logit("ill ~ night * site", two).fit(disp=0)
    steps = np.array([[0, 1, 0, 0], [0, 0, 1, 0], [0, 1, 1, 1]], float)
    joint = joint_effects(model.params.to_numpy(), model.cov_params().to_numpy(), steps)
    cells = two.groupby(["night", "site"])["ill"].agg(["sum", "count"])
    a, b = cells["sum"], cells["count"] - cells["sum"]
    logs, variances = np.log(a / b), 1 / a + 1 / b
    expected = [logs[place] - logs[0, 0] for place in ((1, 0), (0, 1), (1, 1))]
    assert joint.values == pytest.approx(np.array(expected), rel=1e-6)
    spread = np.diag([variances[1, 0], variances[0, 1], variances[1, 1]]) + variances[0, 0]
    assert joint.covariance == pytest.approx(spread, rel=1e-5)


def test_levels_that_cannot_be_told_apart_have_no_joint_test():
    same = np.array([[1.0, 0.0], [1.0, 0.0]])
    with pytest.raises(NotEstimableError):
        modification(np.array([0.3, 0.2]), np.eye(2), same)


def test_one_level_is_no_modification():
    with pytest.raises(ValueError, match="two levels"):
        modification(np.array([0.3]), np.eye(1), np.array([[1.0]]))
    with pytest.raises(ValueError, match="3 by 3"):
        JointEffects(np.zeros(2), np.eye(2))
