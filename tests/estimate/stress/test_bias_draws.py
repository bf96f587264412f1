"""Probabilistic bias analysis: without uncertainty it is plain arithmetic, with it numeric integration."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import integrate, optimize, stats

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.stress.bias import Bias, simulate
from adjustplan.estimate.stress.distributions import quantile, share_cut_off
from adjustplan.estimate.stress.observed import Observed
from adjustplan.estimate.stress.tables import TwoByTwo
from adjustplan.plan.stress_schema import (
    BinaryConfounder,
    Distribution,
    MisclassifiedExposure,
    MisclassifiedOutcome,
    Probability,
    Selection,
)
from adjustplan.study import Measure

TABLE = TwoByTwo(215.0, 1449.0, 668.0, 4296.0)
RATIO = Observed("odds ratio", 1.4, 1.0, 1.96, math.log(1.96) / 3.92, table=TABLE)
UNSURE = {"among_exposed": {"low": 0.3, "high": 0.7}, "among_reference": 0.2, "outcome_ratio": 2.0}


def confounder(**keys: object) -> BinaryConfounder:
    return BinaryConfounder.model_validate({"name": "u", **keys})


def observed(measure: Measure) -> Observed:
    value = float(TABLE.measured(measure))
    return Observed(measure, value, value - 0.01, value + 0.01, 0.005, table=TABLE)


PROBABILITIES = np.linspace(0, 1, 41)


@pytest.mark.parametrize(
    ("keys", "reference"),
    [
        ({"low": 0.2, "high": 0.6}, stats.uniform(0.2, 0.4)),
        ({"low": 0.2, "mode": 0.3, "high": 0.6}, stats.triang(0.25, 0.2, 0.4)),
        ({"low": 0.2, "mode": 0.2, "high": 0.6}, stats.triang(0.0, 0.2, 0.4)),
        ({"low": 0.2, "mode": 0.6, "high": 0.6}, stats.triang(1.0, 0.2, 0.4)),
        ({"low": 0.2, "from": 0.3, "to": 0.5, "high": 0.6}, stats.trapezoid(0.25, 0.75, 0.2, 0.4)),
        ({"low": 0.2, "from": 0.2, "to": 0.5, "high": 0.6}, stats.trapezoid(0.0, 0.75, 0.2, 0.4)),
        ({"alpha": 3.0, "beta": 8.0}, stats.beta(3, 8)),
    ],
)
def test_quantiles_are_those_of_scipy(keys: dict[str, float], reference: stats.rv_continuous) -> None:
    told = quantile(Probability.model_validate(keys), PROBABILITIES)
    assert_allclose(told, reference.ppf(PROBABILITIES), atol=1e-12)


def test_a_normal_distribution_is_cut_off_where_the_quantity_cannot_be() -> None:
    told = quantile(Probability.model_validate({"mean": 0.9, "sd": 0.2}), PROBABILITIES)
    assert told.min() >= 0
    assert told.max() <= 1
    normal = stats.norm(0.9, 0.2)
    inside = normal.cdf(1) - normal.cdf(0)
    assert_allclose((normal.cdf(told) - normal.cdf(0)) / inside, PROBABILITIES, atol=1e-9)
    whole = Distribution.model_validate({"mean": 0.9, "sd": 0.2})
    assert_allclose(quantile(whole, PROBABILITIES[1:-1]), normal.ppf(PROBABILITIES[1:-1]))
    cut = dict(
        share_cut_off(
            MisclassifiedExposure.model_validate(
                {"name": "log", "sensitivity": {"mean": 0.9, "sd": 0.2}, "specificity": {"mean": 0.5, "sd": 0.01}}
            )
        )
    )
    assert cut == {"sensitivity": pytest.approx(1 - inside)}


def test_known_values_give_the_deterministic_correction() -> None:
    told = simulate(RATIO, confounder(among_exposed=0.6, among_reference=0.2, outcome_ratio=2.0), 500, 1)
    exactly = 1.4 / (1.6 / 1.2)  # Bross 1966
    assert told.systematic is not None
    assert [told.systematic.estimate, told.systematic.lower, told.systematic.upper] == pytest.approx([exactly] * 3)
    assert told.impossible == 0


@pytest.mark.parametrize("measure", ["odds ratio", "risk ratio", "risk difference", "prevalence difference"])
def test_known_misclassification_gives_the_true_measure_of_the_table_back(measure: Measure) -> None:
    a, b, c, d = TABLE.cells
    (se1, se0), (sp1, sp0) = (0.8, 0.9), (0.95, 0.99)
    by_exposure = TwoByTwo(
        se1 * a + (1 - sp1) * c, se0 * b + (1 - sp0) * d, (1 - se1) * a + sp1 * c, (1 - se0) * b + sp0 * d
    )
    by_outcome = TwoByTwo(
        se1 * a + (1 - sp1) * b, (1 - se1) * a + sp1 * b, se0 * c + (1 - sp0) * d, (1 - se0) * c + sp0 * d
    )
    exposure = {"sensitivity_with_outcome": se1, "specificity_with_outcome": sp1}
    outcome = {"sensitivity_in_exposed": se1, "specificity_in_exposed": sp1}
    both = {"name": "record", "sensitivity": se0, "specificity": sp0}
    truth = observed(measure)
    cases: list[tuple[TwoByTwo, Bias]] = [
        (by_exposure, MisclassifiedExposure.model_validate({**both, **exposure})),
        (by_outcome, MisclassifiedOutcome.model_validate({**both, **outcome})),
    ]
    for table, bias in cases:
        recorded = replace(truth, estimate=float(table.measured(measure)), table=table)
        told = simulate(recorded, bias, 100, 1)
        assert told.systematic is not None
        assert told.systematic.estimate == pytest.approx(truth.estimate, rel=1e-9)


@pytest.mark.parametrize("measure", ["odds ratio", "risk ratio", "risk difference"])
def test_known_selection_gives_the_true_measure_of_the_table_back(measure: Measure) -> None:
    chances = (0.9, 0.5, 0.6, 0.7)
    table = TwoByTwo(*(float(cell) * chance for cell, chance in zip(TABLE.cells, chances, strict=True)))
    names = ("exposed_with_outcome", "exposed_without_outcome", "reference_with_outcome", "reference_without_outcome")
    bias = Selection.model_validate({"name": "reply", **dict(zip(names, chances, strict=True))})
    truth = observed(measure)
    told = simulate(replace(truth, estimate=float(table.measured(measure)), table=table), bias, 100, 1)
    assert told.systematic is not None
    assert told.systematic.estimate == pytest.approx(truth.estimate)
    if measure == "odds ratio":
        factor = Selection.model_validate({"name": "reply", "factor": 0.9 * 0.7 / (0.5 * 0.6)})
        same = simulate(replace(truth, estimate=float(table.measured(measure)), table=None), factor, 100, 1)
        assert same.systematic is not None
        assert same.systematic.estimate == pytest.approx(truth.estimate)


def test_a_confounder_of_a_difference_is_taken_off_it() -> None:
    mean = Observed("mean difference", 5.0, 3.0, 7.0, 1.0)
    told = simulate(mean, confounder(among_exposed=0.6, among_reference=0.1, outcome_difference=4.0), 100, 1)
    assert told.systematic is not None
    assert told.systematic.estimate == pytest.approx(3.0)
    # no effect: p0 = 0.1 × (1 + 0.2) = 0.12, p1 = 0.1 × (1 + 0.6) = 0.16, all of it from the confounder
    risk = Observed("risk difference", 0.04, 0.02, 0.06, 0.01, risks=(0.16, 0.12))
    told = simulate(risk, confounder(among_exposed=0.6, among_reference=0.2, outcome_ratio=2.0), 100, 1)
    assert told.systematic is not None
    assert told.systematic.estimate == pytest.approx(0.0, abs=1e-12)


def test_a_uniform_prevalence_gives_the_percentiles_of_its_quantiles() -> None:
    told = simulate(RATIO, confounder(**UNSURE), 200_000, 4)
    assert told.systematic is not None

    def left(probability: float) -> float:  # the bias rises with the prevalence, so quantiles go over
        return 1.4 * 1.2 / (1 + 0.3 + 0.4 * probability)

    assert told.systematic.estimate == pytest.approx(left(0.5), rel=0.003)
    assert told.systematic.lower == pytest.approx(left(0.975), rel=0.003)
    assert told.systematic.upper == pytest.approx(left(0.025), rel=0.003)


def test_random_error_is_added_as_numeric_integration_says() -> None:
    told = simulate(RATIO, confounder(**UNSURE), 200_000, 5)
    assert told.total is not None

    def below(logarithm: float) -> float:
        """The share of draws below, over the uniform prevalence."""

        def given(share: float) -> float:
            centre = math.log(1.4 * 1.2 / (1 + share))
            return float(stats.norm.cdf((logarithm - centre) / RATIO.standard_error)) / 0.4

        return integrate.quad(given, 0.3, 0.7)[0]

    for percentile, number in ((0.025, told.total.lower), (0.5, told.total.estimate), (0.975, told.total.upper)):
        exactly = optimize.brentq(lambda tried, aim=percentile: below(tried) - aim, -3, 3)
        assert math.log(number) == pytest.approx(exactly, abs=0.005)


def test_random_error_alone_gives_the_interval_of_the_estimate() -> None:
    told = simulate(RATIO, Selection.model_validate({"name": "none", "factor": 1.0}), 200_000, 1)
    assert told.total is not None
    assert [told.total.estimate, told.total.lower, told.total.upper] == pytest.approx([1.4, 1.0, 1.96], rel=0.01)


def test_the_same_seed_gives_the_same_draws_and_another_gives_others() -> None:
    first, again, other = (simulate(RATIO, confounder(**UNSURE), 1000, seed) for seed in (1, 1, 2))
    assert first == again
    assert first.systematic != other.systematic


def test_impossible_draws_are_counted_as_numeric_integration_says() -> None:
    # a corrected cell is negative where (1 − specificity) × 883 > 215: exactly below a specificity of 0.7565
    bias = MisclassifiedExposure.model_validate(
        {
            "name": "diary",
            "sensitivity": 0.99,
            "specificity": 0.9,
            "specificity_with_outcome": {"low": 0.7, "high": 0.8},
        }
    )
    told = simulate(RATIO, bias, 100_000, 3)
    exactly = (1 - 215 / 883 - 0.7) / 0.1
    assert told.share_impossible == pytest.approx(exactly, abs=0.006)
    assert told.systematic is not None
    assert told.systematic.lower > 0


def test_where_no_draw_is_possible_there_is_no_number() -> None:
    bias = MisclassifiedExposure.model_validate({"name": "diary", "sensitivity": 0.9, "specificity": 0.3})
    told = simulate(RATIO, bias, 1000, 1)
    assert (told.impossible, told.systematic, told.total) == (1000, None, None)


def test_correlated_sensitivities_stay_nearer_to_errors_alike_in_both_groups() -> None:
    keys = {
        "name": "diary",
        "sensitivity": {"low": 0.7, "high": 0.95},
        "specificity": 0.99,
        "sensitivity_with_outcome": {"low": 0.7, "high": 0.95},
    }
    free = simulate(RATIO, MisclassifiedExposure.model_validate(keys), 20_000, 1).systematic
    tied = simulate(RATIO, MisclassifiedExposure.model_validate({**keys, "correlation": 1.0}), 20_000, 1).systematic
    alike = {key: value for key, value in keys.items() if key != "sensitivity_with_outcome"}
    same = simulate(RATIO, MisclassifiedExposure.model_validate(alike), 20_000, 1).systematic
    assert free is not None
    assert tied is not None
    assert same is not None
    assert tied.upper - tied.lower < 0.5 * (free.upper - free.lower)
    assert tied.estimate == pytest.approx(same.estimate)


def test_an_absurd_standard_error_gives_no_infinite_interval() -> None:
    bias = Selection.model_validate({"name": "none", "factor": 1.0})
    with pytest.raises(NotEstimableError, match="too large"):
        simulate(replace(RATIO, standard_error=1e4), bias, 1000, 1)


@pytest.mark.parametrize(
    ("measure", "bias"),
    [
        ("hazard ratio", MisclassifiedExposure.model_validate({"name": "a", "sensitivity": 0.9, "specificity": 0.9})),
        ("mean difference", Selection.model_validate({"name": "a", "factor": 1.2})),
        ("mean difference", confounder(among_exposed=0.5, among_reference=0.1, outcome_ratio=2.0)),
        ("odds ratio", confounder(among_exposed=0.5, among_reference=0.1, outcome_difference=2.0)),
    ],
)
def test_a_bias_that_does_not_fit_the_measure_is_refused_in_a_sentence(measure: Measure, bias: Bias) -> None:
    with pytest.raises(NotEstimableError) as caught:
        simulate(Observed(measure, 1.4, 1.0, 1.96, 0.17), bias, 100, 1)
    assert caught.value.finding.code == "stress-unfit"
    assert caught.value.finding.remedy
