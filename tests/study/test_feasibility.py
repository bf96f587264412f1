"""Feasibility before data, against statsmodels, scipy, exact sums, closed forms and a published sample size."""

from __future__ import annotations

import json
from dataclasses import dataclass
from math import exp, inf, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import binom, norm
from statsmodels.stats.proportion import power_proportions_2indep, samplesize_proportions_2indep_onetail

from adjustplan.study.feasibility import count_parameters, feasibility, percent, smallest_detectable

SHARES = st.floats(0.01, 0.99)
SIZES = st.integers(20, 100_000)


@dataclass(frozen=True)
class Numbers:
    """A study table with nothing in it but what feasibility asks for."""

    design: str = "cohort"
    size: int | None = None
    assumed_risk: float | None = None
    exposed_share: float | None = None
    controls_per_case: float | None = None


def test_a_disease_of_one_in_5000_gives_two_cases_in_a_cohort_of_10000() -> None:
    found = feasibility(Numbers(size=10_000, assumed_risk=1 / 5000))
    assert found is not None
    assert found.expected == pytest.approx(2)  # 10,000 / 5,000
    assert found.chance_of_none == pytest.approx(binom.pmf(0, 10_000, 1 / 5000), rel=1e-9)  # scipy
    assert found.chance_of_none == pytest.approx(exp(-2), rel=3e-4)  # its Poisson limit
    assert "expect among 10,000 people is 2;" in str(found)
    assert "14 %" in str(found)
    assert "case-control" in found.alternative


@given(SIZES, SHARES)
def test_the_chance_of_none_is_binomial(size: int, risk: float) -> None:
    found = feasibility(Numbers(size=size, assumed_risk=risk))
    assert found is not None
    assert found.chance_of_none == pytest.approx(float(binom.pmf(0, size, risk)), rel=1e-6, abs=1e-300)


@given(SIZES, SHARES, SHARES, st.booleans())
def test_the_size_that_statsmodels_asks_for_to_detect_our_ratio_is_the_size_we_have(
    size: int, risk: float, share: float, above: bool
) -> None:
    exposed, others = size * share, size * (1 - share)
    ratio = smallest_detectable(exposed, others, risk, "risk ratio", above=above)
    if ratio is None:
        return
    needed = samplesize_proportions_2indep_onetail(
        risk * (ratio - 1), risk, 0.8, ratio=others / exposed, alpha=0.05, alternative="two-sided"
    )
    assert needed == pytest.approx(exposed, rel=1e-6)


@given(SIZES, SHARES, st.floats(0.2, 10))
def test_statsmodels_gives_our_odds_ratio_80_percent_power(cases: int, share: float, controls: float) -> None:
    found = feasibility(Numbers("case-control", cases, exposed_share=share, controls_per_case=controls))
    assert found is not None
    assert found.ratio == "odds ratio"
    if found.detectable is None:
        return
    odds = found.detectable * share / (1 - share)
    among_cases = odds / (1 + odds)
    power = power_proportions_2indep(
        among_cases - share, share, cases, ratio=controls, alpha=0.05, return_results=False
    )
    assert 0.8 - 1e-6 < power < 0.825  # it counts rejections in the wrong direction too, which are below 2.5 %


def test_a_published_sample_size_of_a_case_control_study() -> None:
    # Schlesselman 1982, Case-Control Studies, chapter 6 (from memory): 30 % of controls exposed, odds ratio 3,
    # one control for each case, two-sided 5 %, power 90 %: 73 cases.
    with_73 = smallest_detectable(73, 73, 0.3, "odds ratio", power=0.9)
    with_72 = smallest_detectable(72, 72, 0.3, "odds ratio", power=0.9)
    assert with_73 is not None
    assert with_72 is not None
    assert with_73 < 3 < with_72


def test_an_exact_sum_over_all_results_gives_the_ratio_about_80_percent_power() -> None:
    exposed, others, risk = 400, 600, 0.1
    ratio = smallest_detectable(exposed, others, risk, "risk ratio")
    assert ratio is not None
    first, second = np.arange(exposed + 1)[:, None], np.arange(others + 1)[None, :]
    chance = binom.pmf(first, exposed, risk * ratio) * binom.pmf(second, others, risk)
    pooled = (first + second) / (exposed + others)
    error = np.sqrt(pooled * (1 - pooled) * (1 / exposed + 1 / others))
    with np.errstate(invalid="ignore", divide="ignore"):
        noticed = np.abs(first / exposed - second / others) / error > norm.ppf(0.975)
    assert float(chance[noticed].sum()) == pytest.approx(0.8, abs=0.02)  # the normal approximation, no more


@given(SIZES, SHARES, SHARES)
def test_more_people_see_weaker_effects(size: int, risk: float, share: float) -> None:
    few = feasibility(Numbers(size=size, assumed_risk=risk, exposed_share=share))
    many = feasibility(Numbers(size=2 * size, assumed_risk=risk, exposed_share=share))
    assert few is not None
    assert many is not None
    if few.detectable is not None:
        assert many.detectable is not None
        assert 1 < many.detectable < few.detectable <= 1 / risk
    if few.detectable_below is not None:
        assert many.detectable_below is not None
        assert 0 <= few.detectable_below < many.detectable_below < 1


@pytest.mark.parametrize(
    ("study", "words"),
    [
        (Numbers(size=20, assumed_risk=0.9, exposed_share=0.5), "Even if every exposed person had the outcome"),
        (Numbers("case-control", 6, exposed_share=0.8, controls_per_case=1), "Even if every case were exposed"),
        (Numbers(size=20, assumed_risk=0.2, exposed_share=0.01), "Fewer than one person"),
    ],
)
def test_where_no_ratio_is_detectable_the_reason_is_said(study: Numbers, words: str) -> None:
    found = feasibility(study)
    assert found is not None
    assert found.detectable is None
    assert words in found.undetectable
    assert words in str(found)


def test_the_power_for_the_most_extreme_effect_is_that_of_statsmodels() -> None:
    found = feasibility(Numbers(size=20, assumed_risk=0.9, exposed_share=0.5))
    assert found is not None
    power = power_proportions_2indep(0.1, 0.9, 10, ratio=1, alpha=0.05, return_results=False)
    assert f"{100 * power:.2g} %" in found.undetectable


def test_without_exposed_share_only_outcomes_are_counted() -> None:
    found = feasibility(Numbers(size=1000, assumed_risk=0.1))
    assert found is not None
    assert (found.expected, found.ratio, found.detectable) == (pytest.approx(100), None, None)
    assert found.detection() == ""


@pytest.mark.parametrize(
    "study",
    [
        Numbers(),
        Numbers(assumed_risk=0.1),
        Numbers(size=100),
        Numbers("ecological", 100, 0.1, 0.5),
        Numbers("case-series", 100, 0.1, 0.5),
        Numbers(size=10**400, assumed_risk=0.1),
    ],
)
def test_nothing_is_said_where_the_plan_states_too_little(study: Numbers) -> None:
    assert feasibility(study) is None


def test_infinitely_many_controls_are_not_reckoned_with() -> None:
    found = feasibility(Numbers("case-control", 50, exposed_share=0.3, controls_per_case=inf))
    assert found is not None
    assert found.ratio is None


def test_the_ratio_is_named_after_the_design() -> None:
    named = {}
    for design in ("cohort", "trial", "cross-sectional", "case-control"):
        found = feasibility(Numbers(design, 500, 0.2, 0.4, 2))
        assert found is not None
        named[design] = found.ratio
    assert named == {
        "cohort": "risk ratio",
        "trial": "risk ratio",
        "cross-sectional": "prevalence ratio",
        "case-control": "odds ratio",
    }


def test_parameters_are_counted_by_their_forms() -> None:
    forms = {"age": "linear", "bmi": "spline(4)", "site": "category"}
    assert count_parameters(["age", "bmi"], forms) == (1 + 1 + 4, True)  # the exposure, a line, a curve of four
    assert count_parameters(["age", "site"], forms) == (3, False)  # a category has at least one
    assert count_parameters(["income"], forms) == (2, False)  # no form stated
    assert count_parameters([], forms) == (1, True)


def test_outcomes_for_each_parameter_count_the_rarer_side() -> None:
    common = feasibility(Numbers(size=200, assumed_risk=0.9), 4)
    assert common is not None
    assert common.per_parameter == pytest.approx(5)  # 20 people without the outcome, 4 parameters
    sampled = feasibility(Numbers("case-control", 100, exposed_share=0.3, controls_per_case=0.5), 5)
    assert sampled is not None
    assert sampled.per_parameter == pytest.approx(10)  # 50 controls, 5 parameters
    unsure = feasibility(Numbers(size=200, assumed_risk=0.1), 4, parameters_known=False)
    assert unsure is not None
    assert "(at least 4) that is at most 5." in unsure.burden()


def test_four_controls_keep_four_fifths_of_the_precision() -> None:
    # Closed form: with equal exposure the variance of a difference is proportional to 1 / cases + 1 / controls; a rare
    # outcome has a cohort's worth of controls. Ury 1975 (Biometrics 31:643) gives c / (c + 1).
    cases, people = 1000, 10**9
    kept = (1 / cases + 1 / people) / (1 / cases + 1 / (4 * cases))
    found = feasibility(Numbers(size=200_000, assumed_risk=0.005))
    assert found is not None
    assert kept == pytest.approx(0.8, abs=1e-5)
    assert "80 % of the precision" in found.alternative
    assert "1,000 cases with 4 controls each are 5,000 people in place of 200,000" in found.alternative


@pytest.mark.parametrize(
    ("study", "better"),
    [  # the thresholds, 1 % and 5 %, are common practice
        (Numbers(size=1000, assumed_risk=0.009), "case-control"),
        (Numbers(size=1000, assumed_risk=0.02), ""),
        (Numbers("cross-sectional", 1000, 0.001), "case-control"),
        (Numbers("trial", 1000, 0.001), ""),
        (Numbers("case-control", 100, exposed_share=0.02), "cohort"),
        (Numbers("case-control", 100, exposed_share=0.2), ""),
    ],
)
def test_another_design_is_named_where_it_is_more_efficient(study: Numbers, better: str) -> None:
    found = feasibility(study)
    assert found is not None
    assert better in found.alternative
    assert bool(better) == bool(found.alternative)


@pytest.mark.parametrize(("size", "rough"), [(160, True), (180, False)])
def test_a_poor_approximation_is_said(size: int, rough: bool) -> None:
    # Common practice: five expected in each cell. A share of 0.3 of the people at a risk of 0.1: 4.8 and 5.4.
    found = feasibility(Numbers(size=size, assumed_risk=0.1, exposed_share=0.3))
    assert found is not None
    assert found.rough is rough
    assert ("roughly" in found.detection()) is rough


def test_it_turns_into_json() -> None:
    found = feasibility(Numbers(size=400, assumed_risk=0.2, exposed_share=0.5), 3)
    assert found is not None
    told = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert told["expected"] == pytest.approx(80)
    assert told["detectable"] == found.detectable


@pytest.mark.parametrize(
    ("share", "words"),
    [(0.0, "0 %"), (1e-9, "less than 0.01 %"), (0.1353, "14 %"), (0.999, "99.9 %"), (1 - 1e-9, "more than 99.99 %")],
)
def test_a_share_is_never_rounded_to_never_or_always(share: float, words: str) -> None:
    assert percent(share) == words


def test_the_standard_error_behind_it_is_that_of_two_proportions() -> None:
    # At the ratio found, the gap between the proportions is the two quantiles times their standard errors.
    first, second, base = 300.0, 500.0, 0.2
    ratio = smallest_detectable(first, second, base, "risk ratio")
    assert ratio is not None
    found, pooled = ratio * base, (first * ratio * base + second * base) / (first + second)
    equal = sqrt(pooled * (1 - pooled) * (1 / first + 1 / second))
    apart = sqrt(found * (1 - found) / first + base * (1 - base) / second)
    assert found - base == pytest.approx(norm.ppf(0.975) * equal + norm.ppf(0.8) * apart, rel=1e-9)
