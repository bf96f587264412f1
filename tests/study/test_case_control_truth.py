"""The condition for a case-control odds ratio, held against exact probabilities.

Truth: the joint distribution of small binary networks with random probabilities, multiplied out over every state. The
odds ratio of exposure and outcome given a set is computed in the population and among the sampled. By Didelez, Kreiner
and Keiding (2010, Stat Sci 25:368) the two agree when exposure and sampling are separated given outcome and set; for
generic probabilities, and sampling that depends on the outcome, they agree only then.
"""

from __future__ import annotations

import itertools
import random
from dataclasses import dataclass, field

import pytest

from adjustplan.graph import CausalGraph, Variable
from adjustplan.study.consequences import path_to_sampling, sampling_fault, under_design, with_sampling


@dataclass
class Study:
    """What a plan says of a case-control study."""

    design: str = "case-control"
    sampled: str | None = "s"
    matched: list[str] = field(default_factory=list)


def drawn(seed: int) -> CausalGraph:
    """Exposure x, outcome y, covariates a, b, c in random order; sampling s below the outcome and perhaps others."""
    luck = random.Random(seed)
    order = ["x", "y", "a", "b", "c"]
    luck.shuffle(order)
    arrows = [(p, q) for p, q in itertools.combinations(order, 2) if luck.random() < 0.5]
    arrows.append(("y", "s"))
    arrows += [(name, "s") for name in ("x", "a", "b", "c") if luck.random() < 0.2]
    return CausalGraph(arrows, [*map(Variable, order), Variable("s", restricted=True)])


def joint(graph: CausalGraph, seed: int) -> dict[tuple[int, ...], float]:
    """The probability of every state, variables in the graph's order, from random conditional probabilities."""
    luck = random.Random(seed)
    tables: list[dict[tuple[int, ...], float]] = [
        {given: luck.uniform(0.1, 0.9) for given in itertools.product((0, 1), repeat=len(causes))}
        for causes in graph.causes
    ]
    states = {}
    for state in itertools.product((0, 1), repeat=len(graph)):
        chance = 1.0
        for place, causes in enumerate(graph.causes):
            p = tables[place][tuple(state[cause] for cause in causes)]
            chance *= p if state[place] else 1 - p
        states[state] = chance
    return states


def odds_ratios(
    graph: CausalGraph, states: dict[tuple[int, ...], float], members: tuple[str, ...], sampled: bool
) -> list[float]:
    """The odds ratio of x and y at every value of the set, in everybody or among the sampled."""
    x, y, s = (graph.number(name) for name in "xys")
    ratios = []
    for values in itertools.product((0, 1), repeat=len(members)):
        cells = {(i, j): 0.0 for i in (0, 1) for j in (0, 1)}
        for state, chance in states.items():
            here = all(state[graph.number(name)] == value for name, value in zip(members, values, strict=True))
            if here and (state[s] or not sampled):
                cells[state[x], state[y]] += chance
        ratios.append(cells[1, 1] * cells[0, 0] / (cells[1, 0] * cells[0, 1]))
    return ratios


@pytest.mark.parametrize("seed", range(60))
def test_the_odds_ratio_survives_sampling_exactly_when_the_condition_holds(seed: int) -> None:
    graph = drawn(seed)
    states = joint(graph, seed + 1000)
    for size in range(4):
        for members in itertools.combinations("abc", size):
            survives = odds_ratios(graph, states, members, True) == pytest.approx(
                odds_ratios(graph, states, members, False), rel=1e-9
            )
            linked = path_to_sampling(graph, "x", "y", members, Study())
            assert survives == (linked is None), (members, linked)


def test_both_answers_occur_among_the_graphs_tried() -> None:
    answers = {path_to_sampling(drawn(seed), "x", "y", (), Study()) is None for seed in range(60)}
    assert answers == {True, False}


def test_an_unadjusted_matching_variable_links_exposure_and_sampling() -> None:
    graph = CausalGraph([("age", "x"), ("x", "y")])
    study = Study(sampled=None, matched=["age"])
    fault = sampling_fault(graph, "x", "y", (), study)
    assert fault is not None
    assert "x <- age -> being sampled" in fault
    assert sampling_fault(graph, "x", "y", ("age",), study) is None


def test_sampling_is_drawn_below_outcome_and_matching() -> None:
    sampled, name = with_sampling(CausalGraph([("x", "y"), ("age", "y")]), "y", Study(sampled=None, matched=["age"]))
    assert {arrow.cause for arrow in sampled.arrows if arrow.effect == name} == {"y", "age"}
    assert sampled[name].restricted


def test_only_the_sampling_variable_of_a_case_control_study_is_freed() -> None:
    graph = CausalGraph([("x", "y"), ("y", "s")], [Variable("s", restricted=True), Variable("r", restricted=True)])
    freed = under_design(graph, "y", Study())
    assert not freed["s"].restricted
    assert freed["r"].restricted
    assert under_design(graph, "y", Study(design="cohort")) == graph
    assert under_design(graph, "y", None) == graph
