"""E-values against the figures in print, and against the theory they rest on."""

from __future__ import annotations

import math

import pytest
from scipy import stats

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.stress.bounding import bounding_factor
from adjustplan.estimate.stress.differences import difference_position
from adjustplan.estimate.stress.evalues import EValue, evalue, evalues
from adjustplan.estimate.stress.scales import ratio_position
from adjustplan.study import MEASURES, Measure

DIFFERENCES = ("risk difference", "prevalence difference", "rate difference")
RATIOS: tuple[Measure, ...] = tuple(measure for measure in MEASURES if not measure.endswith("difference"))


def of_ratio(measure: Measure, *numbers: float, target: float = 1, common: bool = False) -> EValue:
    return evalues(ratio_position(measure, *numbers, common=common), target)


@pytest.mark.parametrize(
    ("numbers", "point", "limit"),
    [
        # VanderWeele and Ding 2017, Ann Intern Med 167:268, worked examples
        ((10.73, 8.02, 14.36), 20.95, 15.52),
        ((3.9, 1.8, 8.7), 7.26, 3.0),
        ((0.80, 0.71, 0.91), 1.81, 1.43),
    ],
)
def test_risk_ratios_have_the_evalues_of_the_paper(numbers: tuple[float, ...], point: float, limit: float) -> None:
    told = of_ratio("risk ratio", *numbers)
    assert told.estimate == pytest.approx(point, abs=0.006)
    assert told.limit == pytest.approx(limit, abs=0.006)


def test_protective_ratios_are_inverted() -> None:
    up, down = of_ratio("risk ratio", 2.5, 1.25, 5.0), of_ratio("risk ratio", 0.4, 0.2, 0.8)
    assert (up.estimate, up.limit) == pytest.approx((down.estimate, down.limit))
    assert (up.side, down.side) == ("lower", "upper")


@pytest.mark.parametrize("measure", RATIOS)
def test_an_interval_that_holds_no_effect_has_a_limit_evalue_of_1(measure: Measure) -> None:
    for common in (False, True):
        assert of_ratio(measure, 1.4, 0.9, 2.2, common=common).limit == 1
        assert of_ratio(measure, 0.7, 0.4, 1.2, common=common).limit == 1


@pytest.mark.parametrize("ratio", [1.0001, 1.3, 2.0, 17.0, 300.0])
def test_two_strengths_of_the_evalue_bias_by_exactly_the_ratio(ratio: float) -> None:
    # the definition: the equal strengths whose bounding factor is the ratio (Ding and VanderWeele 2016)
    assert bounding_factor(evalue(ratio), evalue(ratio)) == pytest.approx(ratio, rel=1e-12)
    assert evalue(1 / ratio) == pytest.approx(evalue(ratio))


def test_an_estimate_can_be_asked_to_move_to_another_value_than_no_effect() -> None:
    # the bias that is needed is then the ratio of the two (VanderWeele and Ding 2017)
    told = of_ratio("risk ratio", 3.0, 2.0, 4.5, target=1.5)
    assert told.estimate == pytest.approx(2 + math.sqrt(2))
    assert told.limit == pytest.approx(4 / 3 + math.sqrt(4 / 9))
    up = of_ratio("risk ratio", 0.8, 0.6, 1.1, target=1.6)
    assert (up.estimate, up.side) == (pytest.approx(2 + math.sqrt(2)), "upper")
    assert of_ratio("risk ratio", 3.0, 2.0, 4.5, target=2.5).limit == 1


def test_a_common_odds_ratio_enters_by_its_square_root_and_a_rare_one_as_it_is() -> None:
    assert of_ratio("odds ratio", 4.0, 2.25, 7.0, common=True).estimate == pytest.approx(evalue(2.0))
    assert of_ratio("odds ratio", 4.0, 2.25, 7.0, common=True).limit == pytest.approx(evalue(1.5))
    assert of_ratio("odds ratio", 4.0, 2.25, 7.0).estimate == pytest.approx(evalue(4.0))


def test_a_common_hazard_ratio_enters_by_the_formula_of_the_paper() -> None:
    # RR ≈ (1 − 0.5^√HR) / (1 − 0.5^√(1/HR)); at 4 that is (1 − 0.25) / (1 − 0.5^0.5)
    told = of_ratio("hazard ratio", 4.0, 1.0, 9.0, common=True)
    assert told.estimate == pytest.approx(evalue(0.75 / (1 - 0.5**0.5)))
    assert told.limit == 1
    assert of_ratio("hazard ratio", 4.0, 2.0, 9.0).estimate == pytest.approx(evalue(4.0))


@pytest.mark.parametrize("hazard", [1e-6, 0.02, 0.5, 1.0, 1.7, 40.0, 1e6])
def test_the_hazard_ratio_comes_back_from_the_risk_ratio(hazard: float) -> None:
    position = ratio_position("hazard ratio", hazard, hazard, hazard, common=True)
    assert position.from_ratio(position.to_ratio(hazard)) == pytest.approx(hazard, rel=1e-9)


def test_a_mean_difference_enters_by_its_size_in_standard_deviations() -> None:
    # RR ≈ exp(0.91 d), limits exp(0.91 d ± 1.78 s): VanderWeele and Ding 2017, table 2
    difference, error, sd = 6.0, 1.5, 12.0
    reach = stats.norm.ppf(0.975) * error
    position = ratio_position("mean difference", difference, difference - reach, difference + reach, outcome_sd=sd)
    told = evalues(position, 0)
    assert told.factor == pytest.approx(math.exp(0.91 * 0.5))
    assert told.limit_factor == pytest.approx(math.exp(0.91 * 0.5 - 1.78 * 0.125), rel=1e-3)
    negative = ratio_position("mean difference", -difference, -difference - reach, -difference + reach, outcome_sd=sd)
    assert evalues(negative, 0).estimate == pytest.approx(told.estimate)
    assert evalues(position, 3.0).factor == pytest.approx(math.exp(0.91 * 0.25))


@pytest.mark.parametrize("measure", ["risk difference", "prevalence difference", "rate difference"])
@pytest.mark.parametrize("sizes", [None, (100.0, 400.0), (400.0, 100.0)])
def test_a_difference_is_explained_away_by_the_ratio_of_its_two_values(
    measure: Measure, sizes: tuple[float, float] | None
) -> None:
    # whatever share is exposed: Ding and VanderWeele 2016
    up = evalues(difference_position(measure, 0.30, 0.12, 0.10, 0.26, sizes=sizes), 0)
    assert up.factor == pytest.approx(2.5)
    down = evalues(difference_position(measure, 0.12, 0.30, -0.26, -0.10, sizes=sizes), 0)
    assert down.factor == pytest.approx(2.5)
    assert evalues(difference_position(measure, 0.3, 0.12, -0.01, 0.37, sizes=sizes), 0).limit == 1


def test_the_limit_of_a_risk_difference_is_that_of_fieller_for_the_ratio() -> None:
    # Fieller 1954, J R Stat Soc B 16:175: the ratios B with (p1 − B p0)² ≤ z² (v1 + B² v0)
    p1, p0, n1, n0, z = 0.30, 0.12, 500, 900, stats.norm.ppf(0.975)
    v1, v0 = p1 * (1 - p1) / n1, p0 * (1 - p0) / n0
    reach = z * math.sqrt(v1 + v0)
    told = evalues(difference_position("risk difference", p1, p0, p1 - p0 - reach, p1 - p0 + reach, sizes=(n1, n0)), 0)
    square, linear, constant = p0**2 - z**2 * v0, -2 * p1 * p0, p1**2 - z**2 * v1
    fieller = (-linear - math.sqrt(linear**2 - 4 * square * constant)) / (2 * square)
    assert told.limit_factor == pytest.approx(fieller)
    mirrored = difference_position("risk difference", p0, p1, p0 - p1 - reach, p0 - p1 + reach, sizes=(n0, n1))
    assert evalues(mirrored, 0).limit_factor == pytest.approx(fieller)


@pytest.mark.parametrize("target", [-0.1, -0.02, 0.0, 0.05, 0.15, 0.25])
@pytest.mark.parametrize("sizes", [None, (100.0, 400.0), (400.0, 100.0)])
def test_the_factor_that_a_difference_needs_moves_it_there(target: float, sizes: tuple[float, float] | None) -> None:
    position = difference_position("risk difference", 0.30, 0.12, 0.10, 0.26, sizes=sizes)
    needed = position.needed(target)
    down = position.estimate >= target
    assert needed.estimate is not None
    assert position.moved(needed.estimate, down).estimate == pytest.approx(target, abs=1e-12)
    assert needed.limit is not None
    if needed.limit > 1:
        moved = position.moved(needed.limit, down)
        assert (moved.lower if down else moved.upper) == pytest.approx(target, abs=1e-9)
    assert position.moved(1, down).lower == pytest.approx(0.10)
    assert position.moved(1, down).upper == pytest.approx(0.26)


def test_what_no_confounding_could_do_has_no_evalue() -> None:
    # in the reference group, the risk without confounding is at least 0 − 0.12
    told = evalues(difference_position("risk difference", 0.30, 0.12, 0.10, 0.26), -0.2)
    assert (told.estimate, told.limit) == (None, None)


@pytest.mark.parametrize(
    ("measure", "numbers"),
    [("risk ratio", (0.0, 0.0, 1.0)), ("odds ratio", (2.0, 1.0, math.inf)), ("mean difference", (1.0, 0.0, 2.0))],
)
def test_what_has_no_bridge_to_a_risk_ratio_says_so(measure: Measure, numbers: tuple[float, ...]) -> None:
    with pytest.raises(NotEstimableError) as caught:
        ratio_position(measure, *numbers)
    assert caught.value.finding.code == "stress-no-conversion"


@pytest.mark.parametrize("risks", [(0.2, 0.0), (1.0, 0.2), (-0.1, 0.2)])
def test_risks_outside_0_and_1_are_refused(risks: tuple[float, float]) -> None:
    with pytest.raises(NotEstimableError, match="between 0 and 1"):
        difference_position("risk difference", *risks, -0.5, 0.5)


def test_every_measure_says_how_it_became_a_risk_ratio() -> None:
    for measure in MEASURES:
        if measure in DIFFERENCES:
            words = difference_position(measure, 0.3, 0.2, 0.05, 0.15).words
        else:
            words = ratio_position(measure, 1.5, 1.2, 1.9, outcome_sd=2.0).words
        assert len(words) > 20
