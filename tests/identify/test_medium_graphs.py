"""Graphs of 50 to 200 variables, too large to enumerate: both engines against networkx's d-separation.

A set is sufficient for the total effect when it holds nothing forbidden and separates exposure from outcome
in the *back-door graph*, the graph without the first arrow of every causal path; for the direct effect, in
the graph without the arrow from exposure to outcome. networkx has its own algorithm for separation.
"""

from __future__ import annotations

import random
from itertools import combinations, islice

import networkx as nx
import pytest
from truth.drawn_graphs import random_graph

from adjustplan import identify
from adjustplan.graph import CausalGraph

ENGINES = ("small", "large")
CASES = [
    (size, density, effect, seed)
    for size, density in ((50, 1.0), (50, 2.0), (100, 1.5), (200, 1.2), (200, 4.0))
    for effect in ("total", "direct")
    for seed in range(4)
]


class Separation:
    """A question about a large graph, answered by networkx."""

    def __init__(self, size: int, density: float, effect: str, seed: int) -> None:
        self.graph = random_graph(size, density, seed)
        self.effect = effect
        self.draw = random.Random(1000 + seed)
        directed = self.graph.to_networkx()
        order = list(nx.topological_sort(directed))
        measured = [name for name in order if not self.graph[name].unmeasured]
        # An exposure in the middle that does something, so that there are causes, effects and bystanders.
        self.exposure = next(
            name for name in measured[len(measured) // 2 :] if self._measured(nx.descendants(directed, name))
        )
        self.outcome = self.draw.choice(sorted(self._measured(nx.descendants(directed, self.exposure))))
        self.forbidden, self.separation = self._back_door(directed)
        self.allowed = sorted(self._measured(set(order)) - self.forbidden - {self.exposure, self.outcome})

    def _measured(self, names: set[str]) -> set[str]:
        return {name for name in names if not self.graph[name].unmeasured}

    def _back_door(self, directed: nx.DiGraph) -> tuple[set[str], nx.DiGraph]:
        cut = directed.copy()
        if self.effect == "direct":
            cut.remove_edges_from([(self.exposure, self.outcome)])
            return nx.descendants(directed, self.outcome), cut
        leads_there = nx.ancestors(directed, self.outcome) | {self.outcome}
        causal = nx.descendants(directed, self.exposure) & leads_there
        cut.remove_edges_from([(self.exposure, name) for name in causal])
        return causal.union(*(nx.descendants(directed, name) for name in causal)), cut

    def is_sufficient(self, members: set[str]) -> bool:
        if members & self.forbidden:
            return False
        return nx.is_d_separator(self.separation, {self.exposure}, {self.outcome}, members)

    def sets_to_try(self) -> list[set[str]]:
        """The exposure's measured causes, what the paths need, and random sets of every size."""
        causes = self._measured(set(self.separation.predecessors(self.exposure))) - {self.outcome}
        tried = [set(), causes, causes | set(self.draw.sample(self.allowed, 5))]
        for share in (0.1, 0.3, 0.6, 0.9):
            tried.append({name for name in self.allowed if self.draw.random() < share})
            tried.append({name for name in self.graph.numbers if self.draw.random() < share / 20} & self._usable())
        minimal = nx.find_minimal_d_separator(
            self.separation, self.exposure, self.outcome, restricted=set(self.allowed)
        )
        if minimal is not None:
            tried += [set(minimal), *(minimal - {name} for name in minimal)]
        return tried

    def _usable(self) -> set[str]:
        return self._measured(set(self.graph.numbers)) - {self.exposure, self.outcome}


@pytest.fixture(scope="module", params=CASES, ids=lambda case: "-".join(map(str, case)))
def case(request: pytest.FixtureRequest) -> Separation:
    return Separation(*request.param)


@pytest.mark.parametrize("engine", ENGINES)
def test_networkx_calls_the_same_sets_separating(case, engine):
    for members in case.sets_to_try():
        answer = identify.is_sufficient(
            case.graph, case.exposure, case.outcome, members, effect=case.effect, engine=engine
        )
        assert answer == case.is_sufficient(members), members


@pytest.mark.parametrize("engine", ENGINES)
def test_one_set_is_found_exactly_where_networkx_finds_one_and_no_member_can_go(case, engine):
    found = identify.one_sufficient_set(case.graph, case.exposure, case.outcome, effect=case.effect, engine=engine)
    rival = nx.find_minimal_d_separator(case.separation, case.exposure, case.outcome, restricted=set(case.allowed))
    assert (found is None) == (rival is None)
    if found is not None:
        assert case.is_sufficient(set(found))
        assert not any(case.is_sufficient(set(found) - {name}) for name in found)


def test_the_smallest_set_is_no_larger_than_networkx_finds(case):
    found = identify.smallest_sufficient_set(case.graph, case.exposure, case.outcome, effect=case.effect)
    rival = nx.find_minimal_d_separator(case.separation, case.exposure, case.outcome, restricted=set(case.allowed))
    assert (found is None) == (rival is None)
    if found is not None:
        assert case.is_sufficient(set(found))
        assert len(found) <= len(rival)


@pytest.mark.parametrize("engine", ENGINES)
def test_the_sets_of_a_long_ladder_are_counted_right(engine):
    # Five separate back-door paths of four variables each: one variable from each path, so 4 to the 5th sets.
    arrows = [("exposure", "outcome")]
    for path in range(5):
        names = [f"p{path}_{step}" for step in range(4)]
        arrows += [(names[1], names[0]), (names[0], "exposure"), (names[1], names[2]), (names[2], names[3])]
        arrows.append((names[3], "outcome"))
    stream = identify.iterate_sufficient_sets(CausalGraph(arrows), "exposure", "outcome", engine=engine)
    found = list(stream)
    assert len(set(found)) == len(found) == 4**5
    assert all({name.split("_")[0] for name in members} == {f"p{path}" for path in range(5)} for members in found)


@pytest.mark.parametrize("seed", range(6))
def test_the_list_is_what_networkx_leaves_of_all_subsets(seed):
    case = Separation(13, 1.6, "total" if seed % 2 else "direct", seed)
    sufficient: list[set[str]] = []
    for size in range(len(case.allowed) + 1):
        for members in map(set, combinations(case.allowed, size)):
            if not any(smaller <= members for smaller in sufficient) and case.is_sufficient(members):
                sufficient.append(members)
    for engine in ENGINES:
        stream = identify.iterate_sufficient_sets(
            case.graph, case.exposure, case.outcome, effect=case.effect, engine=engine
        )
        assert sorted(map(sorted, stream)) == sorted(map(sorted, sufficient))


@pytest.mark.parametrize("seed", range(6))
def test_both_engines_stream_the_same_sets_and_networkx_finds_each_minimal(seed):
    case = Separation(30, 1.4, "total" if seed % 2 else "direct", seed)
    streams = [
        identify.iterate_sufficient_sets(case.graph, case.exposure, case.outcome, effect=case.effect, engine=engine)
        for engine in ENGINES
    ]
    small, large = (set(islice(stream, 2_000)) for stream in streams)
    if len(small) < 2_000:
        assert small == large
    for members in list(small)[:50]:
        assert not members & case.forbidden
        assert nx.is_minimal_d_separator(case.separation, case.exposure, case.outcome, set(members))
