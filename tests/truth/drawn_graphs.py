"""Graphs to test on: all of the smallest, and drawn ones beyond.

Every directed acyclic graph on four labelled variables is worth trying because a mistake about paths,
colliders or descendants nearly always shows on so few; larger graphs are drawn at random by hypothesis,
which also shrinks what fails to the smallest graph that still does.
"""

from __future__ import annotations

import random
from collections.abc import Iterator
from dataclasses import replace
from itertools import combinations, permutations, product

import networkx as nx
from hypothesis import strategies as st

from adjustplan.graph import CausalGraph, Variable
from truth.brute_force import Question


def every_graph(size: int) -> Iterator[CausalGraph]:
    """Every directed acyclic graph on the variables a, b, c, ...: 1, 3, 25, 543 for sizes 1 to 4."""
    names = "abcdefgh"[:size]
    pairs = list(combinations(names, 2))
    for directions in product(("none", "forth", "back"), repeat=len(pairs)):
        arrows = [
            (a, b) if direction == "forth" else (b, a)
            for (a, b), direction in zip(pairs, directions, strict=True)
            if direction != "none"
        ]
        if nx.is_directed_acyclic_graph(nx.DiGraph(arrows)):
            yield CausalGraph(arrows, [Variable(name) for name in names])


def every_pair(graph: CausalGraph) -> Iterator[tuple[str, str]]:
    """Every exposure and outcome."""
    yield from permutations((variable.name for variable in graph), 2)


def every_status(graph: CausalGraph, exposure: str, outcome: str) -> Iterator[CausalGraph]:
    """The graph with every choice of which covariates are measured, unmeasured and restricted."""
    ends = [variable for variable in graph if variable.name in (exposure, outcome)]
    others = [variable for variable in graph if variable.name not in (exposure, outcome)]
    for statuses in product(("measured", "unmeasured", "restricted"), repeat=len(others)):
        told = [
            replace(variable, unmeasured=status == "unmeasured", restricted=status == "restricted")
            for variable, status in zip(others, statuses, strict=True)
        ]
        yield CausalGraph(graph.arrows, [*ends, *told])


@st.composite
def questions(
    draw: st.DrawFn,
    smallest: int = 5,
    largest: int = 8,
    statuses: bool = True,
    effects: tuple[str, ...] = ("total", "direct"),
    several_sets: bool = False,
) -> Question:
    """A random graph with an exposure and an outcome, now sparse, now dense; see :func:`random_question`.

    Size and density are hypothesis's, so that it can shrink them; everything else comes from a seed, because
    hypothesis by itself likes graphs too plain to have more than one minimal set. Most random graphs have none or
    one; with ``several_sets`` those are passed over.
    """
    size = draw(st.integers(smallest, largest))
    density = draw(st.sampled_from((0.25, 0.35, 0.5, 0.7)))
    effect = draw(st.sampled_from(effects))
    chance = random.Random(draw(st.integers(0, 2**32 - 1)))
    while True:
        question = random_question(size, density, effect, statuses, chance)
        if not several_sets or len(question.minimal_sets) > 1:
            return question


def random_question(size: int, density: float, effect: str, statuses: bool, chance: random.Random) -> Question:
    """A question about a random graph, in which an arrow joins two variables with probability ``density``.

    The names say nothing about the order of causation. One question in eight asks for the effect of a later
    variable on an earlier one. With ``statuses``, half the graphs have unmeasured variables, a third restricted
    ones.
    """
    names = chance.sample("abcdefgh"[:size], size)
    arrows = [pair for pair in combinations(names, 2) if chance.random() < density]
    # Half the time exposure and outcome come last, where most sets are possible; else they stand anywhere.
    places = [size - 2, size - 1] if chance.random() < 1 / 2 else chance.sample(range(size), 2)
    first, second = sorted(places, reverse=chance.random() < 1 / 8)
    ends = {names[first], names[second]}
    unmeasured = statuses and chance.random() < 1 / 2
    restricted = statuses and chance.random() < 1 / 3
    variables = []
    for name in sorted(names):
        status = "measured" if name in ends else chance.choice(("unmeasured", "restricted", *["measured"] * 5))
        variables.append(
            Variable(
                name,
                unmeasured=unmeasured and status == "unmeasured",
                restricted=restricted and status == "restricted",
                cost=chance.choice((0, 0.1, 0.3, 1, 1.5, 2.5, 4)),
            )
        )
    return Question(CausalGraph(arrows, variables), names[first], names[second], effect)


def random_graph(size: int, arrows_per_variable: float, seed: int) -> CausalGraph:
    """A random graph of some size, a tenth of it unmeasured, whose names hide the order of causation."""
    draw = random.Random(seed)
    names = [f"v{number}" for number in range(size)]
    draw.shuffle(names)
    chance = min(1.0, 2 * arrows_per_variable / (size - 1))
    arrows = [pair for pair in combinations(names, 2) if draw.random() < chance]
    return CausalGraph(arrows, [Variable(name, unmeasured=draw.random() < 0.1) for name in sorted(names)])
