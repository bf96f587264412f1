"""The graphs that are timed, each with a question, candidate sets, and the rival's back-door graph.

The back-door graph is the graph without the first arrow of every causal path; a set without forbidden
members is sufficient for the total effect exactly when it separates exposure and outcome there. The rival
is given that graph, and the list of allowed covariates, ready made and free of charge.
"""

from __future__ import annotations

import random
from dataclasses import dataclass, field

import networkx as nx

from adjustplan.graph import CausalGraph


@dataclass
class Problem:
    """A question about one large graph."""

    name: str
    arrows: list[tuple[str, str]]
    exposure: str
    outcome: str
    graph: CausalGraph = field(init=False)
    back_door: nx.DiGraph = field(init=False)
    forbidden: set[str] = field(init=False)
    allowed: set[str] = field(init=False)
    candidates: dict[str, frozenset[str]] = field(init=False)

    def __post_init__(self) -> None:
        self.graph = self.fresh_graph()
        directed = nx.DiGraph(self.arrows)
        causal = nx.descendants(directed, self.exposure) & (nx.ancestors(directed, self.outcome) | {self.outcome})
        self.forbidden = {name for layer in nx.bfs_layers(directed, causal) for name in layer}
        self.back_door = directed.copy()
        self.back_door.remove_edges_from([(self.exposure, name) for name in causal])
        self.allowed = set(directed) - self.forbidden - {self.exposure, self.outcome}
        self.candidates = self._candidates(directed, causal)

    def _candidates(self, directed: nx.DiGraph, causal: set[str]) -> dict[str, frozenset[str]]:
        around_outcome = {cause for name in causal for cause in directed.predecessors(name)}
        draw = random.Random(7)
        allowed = sorted(self.allowed)
        return {
            "causes of the exposure": frozenset(directed.predecessors(self.exposure)),
            "other causes of the causal paths": frozenset(around_outcome - self.forbidden - {self.exposure}),
            "a random fifth of the covariates": frozenset(draw.sample(allowed, len(allowed) // 5)),
        }

    def fresh_graph(self) -> CausalGraph:
        """The graph, with nothing worked out about it yet."""
        return CausalGraph(self.arrows)

    def separates(self, members: frozenset[str]) -> bool:
        """The rival's answer to whether a set is sufficient."""
        return nx.is_d_separator(self.back_door, {self.exposure}, {self.outcome}, set(members))

    def minimal(self) -> set[str] | None:
        """The rival's minimal sufficient set."""
        return nx.find_minimal_d_separator(self.back_door, self.exposure, self.outcome, restricted=self.allowed)


def random_graph(arrows: int) -> Problem:
    """A random graph, ten arrows at the average variable: five causes each, from anything before it.

    The exposure stands half-way down the order and the outcome is the last thing it affects, so a good part of
    the graph lies upstream of the two and offers ways round.
    """
    draw = random.Random(arrows)
    size = max(arrows // 5, 12)
    pairs = [(f"v{cause}", f"v{v}") for v in range(1, size) for cause in draw.sample(range(v), min(5, v))]
    directed = nx.DiGraph(pairs)
    place = size // 2
    while not (affected := nx.descendants(directed, f"v{place}")):
        place += 1
    outcome = max(affected, key=lambda name: int(name[1:]))
    draw.shuffle(pairs)
    return Problem("random", pairs, f"v{place}", outcome)


def deep_graph(arrows: int) -> Problem:
    """A long chain with short cuts past one to three variables: half as deep as it has arrows.

    networkx (3.6) queues a variable again each time it is met before its turn, and so takes a time that can
    double with every few steps of such a chain; the figures of the two are of different kinds here.
    """
    draw = random.Random(arrows)
    size = arrows // 2
    pairs = {(v - 1, v) for v in range(1, size)} | {(v - draw.randint(2, 4), v) for v in range(4, size)}
    named = [(f"v{cause}", f"v{effect}") for cause, effect in sorted(pairs)]
    draw.shuffle(named)
    return Problem("deep", named, f"v{size // 2}", f"v{size * 9 // 10}")


def ladder(paths: int, rungs: int = 10) -> CausalGraph:
    """Separate back-door paths, each blocked by any one of its variables: rungs ** paths minimal sets."""
    arrows = [("exposure", "outcome")]
    for path in range(paths):
        names = [f"p{path}_{rung}" for rung in range(rungs)]
        arrows += [(names[0], "exposure"), (names[-1], "outcome")]
        middle = rungs // 2  # the common cause; from it the arrows run down both sides
        arrows += [(names[rung + 1], names[rung]) for rung in range(middle)]
        arrows += [(names[rung], names[rung + 1]) for rung in range(middle, rungs - 1)]
    return CausalGraph(arrows)
