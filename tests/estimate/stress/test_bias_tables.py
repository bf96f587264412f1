"""Bias formulas against populations in which everything is known, so that the truth is plain arithmetic."""

from __future__ import annotations

import numpy as np
import pytest

from adjustplan.estimate.stress.binary import bias_factor, tipping_prevalence, tipping_prevalence_of_difference
from adjustplan.estimate.stress.tables import TwoByTwo, before_exposure_errors, before_outcome_errors, before_selection
from adjustplan.study import Measure


def test_the_bias_of_a_binary_confounder_is_exact() -> None:
    rng = np.random.default_rng(1)
    for _ in range(500):
        share, among = rng.uniform(0.1, 0.9), rng.uniform(0, 1, 2)  # exposed share; prevalence in exposed, reference
        base, effect, ratio = rng.uniform(0.01, 0.1), rng.uniform(0.3, 3), rng.uniform(0.2, 3)
        risk = np.array([[base * effect, base * effect * ratio], [base, base * ratio]])  # exposure, confounder
        people = np.array([[1 - among[0], among[0]], [1 - among[1], among[1]]]) * [[share], [1 - share]]
        cases = people * risk
        crude = (cases[0].sum() / people[0].sum()) / (cases[1].sum() / people[1].sum())
        # Mantel and Haenszel 1959: within the levels of the confounder
        of_level = people.sum(0)
        stratified = (cases[0] * people[1] / of_level).sum() / (cases[1] * people[0] / of_level).sum()
        assert stratified == pytest.approx(effect)
        assert crude / bias_factor(among[0], among[1], ratio) == pytest.approx(stratified, rel=1e-12)


@pytest.mark.parametrize(("factor", "reference", "ratio"), [(1.3, 0.2, 2.5), (0.7, 0.6, 3.0), (1.2, 0.5, 0.4)])
def test_the_tipping_prevalence_makes_just_that_bias(factor: float, reference: float, ratio: float) -> None:
    share = tipping_prevalence(factor, reference, ratio)
    assert share is not None
    assert bias_factor(share, reference, ratio) == pytest.approx(factor)


def test_no_prevalence_makes_a_bias_beyond_that_of_everybody() -> None:
    largest = bias_factor(1.0, 0.2, 2.0)
    assert tipping_prevalence(largest * 1.001, 0.2, 2.0) is None
    assert tipping_prevalence(largest, 0.2, 2.0) == pytest.approx(1.0)
    assert tipping_prevalence(1.5, 0.2, 1.0) is None


def test_a_difference_tips_where_the_shares_differ_by_bias_over_effect() -> None:
    assert tipping_prevalence_of_difference(3.0, 0.1, 6.0) == pytest.approx(0.6)
    assert tipping_prevalence_of_difference(6.0, 0.1, 6.0) is None
    assert tipping_prevalence_of_difference(1.0, 0.1, 0.0) is None


def random_table(rng: np.random.Generator) -> TwoByTwo:
    return TwoByTwo(*rng.uniform(20, 500, 4))


def test_misclassifying_the_exposure_and_correcting_gives_the_table_back() -> None:
    rng = np.random.default_rng(2)
    for _ in range(300):
        truth = random_table(rng)
        (se1, se0), (sp1, sp0) = rng.uniform(0.55, 1, 2), rng.uniform(0.55, 1, 2)  # with outcome, without
        a, b, c, d = truth.cells
        recorded = TwoByTwo(
            se1 * a + (1 - sp1) * c, se0 * b + (1 - sp0) * d, (1 - se1) * a + sp1 * c, (1 - se0) * b + sp0 * d
        )
        assert before_exposure_errors(recorded, (se1, se0), (sp1, sp0)).cells == pytest.approx(truth.cells)


def test_misclassifying_the_outcome_and_correcting_gives_the_table_back() -> None:
    rng = np.random.default_rng(3)
    for _ in range(300):
        truth = random_table(rng)
        (se1, se0), (sp1, sp0) = rng.uniform(0.55, 1, 2), rng.uniform(0.55, 1, 2)  # exposed, reference
        a, b, c, d = truth.cells
        recorded = TwoByTwo(
            se1 * a + (1 - sp1) * b, (1 - se1) * a + sp1 * b, se0 * c + (1 - sp0) * d, (1 - se0) * c + sp0 * d
        )
        assert before_outcome_errors(recorded, (se1, se0), (sp1, sp0)).cells == pytest.approx(truth.cells)


def test_errors_alike_in_both_groups_pull_the_odds_ratio_towards_1() -> None:
    # Bross 1954, Biometrics 10:478
    recorded = TwoByTwo(120.0, 300.0, 80.0, 500.0)
    corrected = before_exposure_errors(recorded, (0.85, 0.85), (0.95, 0.95))
    assert float(corrected.measured("odds ratio")) > float(recorded.measured("odds ratio")) > 1


def test_selecting_people_and_correcting_gives_the_table_back() -> None:
    rng = np.random.default_rng(4)
    for _ in range(100):
        truth = random_table(rng)
        chances = tuple(rng.uniform(0.05, 1, 4))
        selected = TwoByTwo(*(cell * chance for cell, chance in zip(truth.cells, chances, strict=True)))
        assert before_selection(selected, chances).cells == pytest.approx(truth.cells)
        # the factor of the odds ratio is the odds ratio of the chances (Lash, Fox and Fink 2009, chapter 4)
        factor = float(selected.measured("odds ratio")) / float(truth.measured("odds ratio"))
        assert factor == pytest.approx(chances[0] * chances[3] / (chances[1] * chances[2]))


@pytest.mark.parametrize(
    ("measure", "value"),
    [
        ("odds ratio", (30 * 180) / (70 * 20)),
        ("risk ratio", 0.3 / 0.1),
        ("prevalence ratio", 3.0),
        ("risk difference", 0.2),
        ("prevalence difference", 0.2),
    ],
)
def test_a_table_has_its_measures(measure: Measure, value: float) -> None:
    assert float(TwoByTwo(30, 70, 20, 180).measured(measure)) == pytest.approx(value)


def test_impossible_corrections_are_told_from_possible_ones() -> None:
    recorded = TwoByTwo(5.0, 100.0, 100.0, 100.0)
    # with a specificity of 0.9 among those with the outcome, more than 5 of 105 would be called exposed by mistake
    corrected = before_exposure_errors(recorded, (0.9, 0.9), (np.array([0.9, 0.99]), 0.99))
    assert corrected.possible("odds ratio").tolist() == [False, True]
    # a record that is no better than chance says nothing
    assert not before_exposure_errors(recorded, (0.5, 0.5), (0.5, 0.5)).possible("odds ratio")
    assert not before_exposure_errors(recorded, (0.2, 0.2), (0.3, 0.3)).possible("odds ratio")
