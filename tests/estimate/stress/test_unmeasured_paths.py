"""Which unmeasured variables leave a path open: by hand, and by writing down every path of random graphs."""

from __future__ import annotations

import random
from dataclasses import replace

import pytest
from truth.drawn_graphs import random_question
from truth.walks import Arrows

from adjustplan.estimate.stress.reaching import Reaching, unmeasured_on_open_paths
from adjustplan.graph import CausalGraph, parse_edge_list


@pytest.mark.parametrize(
    ("edges", "members", "found"),
    [
        ("u -> x -> y\nu -> y\nu: unmeasured", (), ("u",)),
        ("u -> x -> y\nu -> c -> y\nu: unmeasured", (), ("u",)),
        ("u -> x -> y\nu -> c -> y\nu: unmeasured", ("c",), ()),  # the set blocks what it does
        ("u -> x -> y\nu: unmeasured", (), ()),  # a cause of the exposure alone
        ("x -> y\nu -> y\nu: unmeasured", (), ()),
        ("x -> u -> y\nu: unmeasured", (), ()),  # a mediator
        ("x -> u\ny -> u\nx -> y\nu: unmeasured", (), ()),  # a common effect
        ("u -> x -> y\nu, v -> c\nv -> y\nu, v: unmeasured", (), ()),
        ("u -> x -> y\nu, v -> c\nv -> y\nu, v: unmeasured", ("c",), ("u", "v")),  # a collider, opened
        ("u -> x -> y\nu, v -> c\nv -> y\nu, v: unmeasured\nc: restricted", (), ("u", "v")),
    ],
)
def test_unmeasured_variables_are_named_that_leave_a_path_open(
    edges: str, members: tuple[str, ...], found: tuple[str, ...]
) -> None:
    assert unmeasured_on_open_paths(parse_edge_list(edges), "x", "y", "total", members) == Reaching(found, True)


@pytest.mark.parametrize("seed", range(300))
def test_they_are_those_on_an_open_path_of_random_graphs(seed: int) -> None:
    chance = random.Random(seed)
    asked = random_question(chance.randint(4, 7), chance.choice((0.3, 0.5)), "total", True, chance)
    exposure, outcome = asked.exposure, asked.outcome
    graph = CausalGraph(
        asked.graph.arrows,
        [
            replace(v, unmeasured=not v.restricted and v.name not in (exposure, outcome) and chance.random() < 0.5)
            for v in asked.graph
        ],
    )
    names = [variable.name for variable in graph]
    plain = Arrows(names, [(arrow.cause, arrow.effect) for arrow in graph.arrows])
    forbidden = {
        below
        for path in plain.directed_paths(exposure, outcome)
        for name in path[1:]
        for below in plain.descendants[name]
    }
    may = [v.name for v in graph if not (v.unmeasured or v.restricted or v.name in (exposure, outcome))]
    members = [name for name in may if name not in forbidden and chance.random() < 0.5]
    held = {*members, *(v.name for v in graph if v.restricted)}
    if held & forbidden:
        return
    on_open = {
        name
        for path in plain.paths(exposure, outcome)
        if not path.directed and path.is_open(held)
        for name in path.names
    }
    expected = {v.name for v in graph if v.unmeasured and v.name in on_open} - plain.descendants[exposure]
    told = unmeasured_on_open_paths(graph, exposure, outcome, "total", members)
    assert told == Reaching(tuple(sorted(expected)), True)


def test_more_paths_than_are_looked_at_are_said() -> None:
    layers = "\n".join(f"a{i}, b{i} -> a{i + 1}, b{i + 1}" for i in range(1, 8))
    graph = parse_edge_list(f"u -> x, a1, b1\n{layers}\na8, b8 -> y\nx -> y\nfar -> x\nfar -> a8\nu, far: unmeasured")
    assert unmeasured_on_open_paths(graph, "x", "y", "total", ()) == Reaching(("far", "u"), True)
    assert not unmeasured_on_open_paths(graph, "x", "y", "total", (), most_paths=1).complete
