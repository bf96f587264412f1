"""The roles of every variable towards an exposure and an outcome, each with a path that shows it.

A role is a place in the graph: what lies between, before, after or beside exposure and outcome. A variable may have
several: a confounder on one path can be a collider on another. What follows for adjustment is ``advice``.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from itertools import islice
from typing import Any

from adjustplan.graph import CausalGraph
from adjustplan.identify.kernel import kernel_of
from adjustplan.identify.paths import Path, directed_path, open_passes, path_along, stream_paths
from adjustplan.identify.query import Query
from adjustplan.identify.reasons import causal_path_through, mediators
from adjustplan.identify.separators import minimal_sets
from adjustplan.identify.tracing import open_paths

MOST_SETS = 5_000
"""How many minimal sets are looked at to tell in which of them a variable is."""


@dataclass(frozen=True)
class Standing:
    """Everything about a query that roles and advice need, worked out once."""

    asked: Query[int]

    @property
    def graph(self) -> CausalGraph:
        """The graph asked of."""
        return self.asked.graph

    @cached_property
    def sets(self) -> list[int]:
        """The minimal sufficient sets, up to a limit."""
        return list(islice(minimal_sets(self.asked), MOST_SETS))

    @cached_property
    def complete(self) -> bool:
        """Whether ``sets`` holds them all."""
        return len(self.sets) < MOST_SETS

    @cached_property
    def set_with(self) -> dict[int, int]:
        """For each member of some minimal set, one that holds it."""
        found: dict[int, int] = {}
        for members in reversed(self.sets):
            found.update(dict.fromkeys(self.asked.kernel.members(members), members))
        return found

    @cached_property
    def without_effects_of_exposure(self) -> CausalGraph:
        """The graph with the arrows out of the exposure taken away."""
        exposure = self.graph.variables[self.asked.exposure].name
        return CausalGraph([a for a in self.graph.arrows if a.cause != exposure], self.graph.variables)

    @cached_property
    def causes_of_exposure(self) -> int:
        """What has a directed path to the exposure."""
        exposure = self.asked.kernel.set_of((self.asked.exposure,))
        return self.asked.kernel.ancestors(exposure) & ~exposure

    @cached_property
    def causes_of_outcome(self) -> int:
        """What has a directed path to the outcome."""
        outcome = self.asked.kernel.set_of((self.asked.outcome,))
        return self.asked.kernel.ancestors(outcome) & ~outcome

    @cached_property
    def causes_of_outcome_beside(self) -> int:
        """What has a directed path to the outcome that avoids the exposure."""
        kernel = kernel_of(self.without_effects_of_exposure)
        outcome = kernel.set_of((self.asked.outcome,))
        return kernel.ancestors(outcome) & ~outcome & ~kernel.set_of((self.asked.exposure,))

    @cached_property
    def affected_by_exposure(self) -> int:
        """What has a directed path from the exposure."""
        exposure = self.asked.kernel.set_of((self.asked.exposure,))
        return self.asked.kernel.descendants(exposure) & ~exposure

    @cached_property
    def affected_by_mediators(self) -> int:
        """What has a directed path from a variable between exposure and outcome, those variables included."""
        return self.asked.kernel.descendants(self.asked.on_causal_paths & ~self.asked.ends)

    def is_instrument(self, place: int) -> bool:
        """Whether a variable is related to the exposure, and to the outcome only through it.

        That is: not affected by the exposure, and once the arrows out of the exposure are gone, connected to it and
        not to the outcome, given what is restricted.
        """
        if self.asked.kernel.holds(self.affected_by_exposure | self.asked.ends, place):
            return False
        return self._connected_beside(place, self.asked.exposure) and not self._connected_beside(
            place, self.asked.outcome
        )

    def _connected_beside(self, first: int, second: int) -> bool:
        graph = self.without_effects_of_exposure
        kernel = kernel_of(graph)
        ends = kernel.set_of((first, second))
        within = kernel.ancestors(ends | self.asked.restricted)
        families = kernel.set_of((first, *graph.effects[first]))
        return kernel.holds(kernel.spread(families, ends | self.asked.restricted, within), second)


def roles_of(standing: Standing, place: int) -> dict[str, str]:
    """The roles of a variable, each with a path that shows it (empty for exposure, outcome and unrelated ones)."""
    asked = standing.asked
    if place == asked.exposure:
        return {"exposure": ""}
    if place == asked.outcome:
        return {"outcome": ""}
    return dict(_roles(standing, place)) or {"unrelated": ""}


def _roles(standing: Standing, place: int) -> Iterator[tuple[str, str]]:
    asked, graph, holds = standing.asked, standing.graph, standing.asked.kernel.holds
    exposure, outcome = asked.exposure, asked.outcome
    if place in standing.set_with:
        yield "confounder", str(path_left_open(asked, standing.set_with[place], place))
    causes_exposure = holds(standing.causes_of_exposure, place)
    if causes_exposure and holds(standing.causes_of_outcome_beside, place):
        to_exposure = directed_path(graph, place, exposure)
        to_outcome = directed_path(graph, place, outcome, avoid={exposure})
        yield "common cause", f"{to_exposure}; {to_outcome}"
    between = holds(asked.on_causal_paths, place)
    if between:
        yield "mediator", str(causal_path_through(asked, place))
    if path := collider_path(graph, place, exposure, outcome):
        yield "collider", str(path)
    if standing.is_instrument(place):
        yield "instrument", _evidence_of_relation(standing, place)
    affected = holds(standing.affected_by_exposure, place)
    if holds(standing.causes_of_outcome, place) and not causes_exposure and not affected:
        yield "outcome predictor", str(directed_path(graph, place, outcome))
    if affected and not between:
        yield "affected by exposure", str(directed_path(graph, exposure, place))
    if not between and holds(standing.affected_by_mediators, place):
        paths = (directed_path(graph, mediator, place) for mediator in mediators(asked))
        if path := next(filter(None, paths), None):
            yield "affected by mediator", str(path)
    if path := directed_path(graph, outcome, place):
        yield "affected by outcome", str(path)


def path_left_open(asked: Query[int], members: int, place: int) -> Path:
    """A path that a set leaves open once a variable is taken out of it."""
    return next(open_paths(asked, members & ~asked.kernel.set_of((place,))))


def collider_path(graph: CausalGraph, place: int, exposure: int, outcome: int) -> Path | None:
    """A path between exposure and outcome on which two arrows meet at a variable, or None where there is none.

    There is one exactly when two ways that share no variable lead from causes of the variable to exposure and to
    outcome, which is a flow of two units (Menger's theorem).
    """
    if len(graph.causes[place]) < 2 or place in (exposure, outcome):
        return None
    import networkx as nx

    skeleton: nx.Graph[Any] = nx.Graph()
    skeleton.add_nodes_from(range(len(graph)))
    for effect, causes in enumerate(graph.causes):
        skeleton.add_edges_from((cause, effect) for cause in causes if place not in (cause, effect))
    skeleton.add_edges_from((place, cause) for cause in graph.causes[place])
    skeleton.add_edges_from(("both ends", end) for end in (exposure, outcome))
    try:
        ways = list(nx.node_disjoint_paths(skeleton, place, "both ends", cutoff=2))
    except nx.NetworkXNoPath:
        return None
    if len(ways) < 2:
        return None
    by_end: dict[Any, list[int]] = {way[-2]: way[:-1] for way in ways}
    return path_along(graph, [*reversed(by_end[exposure]), *by_end[outcome][1:]])


def _evidence_of_relation(standing: Standing, place: int) -> str:
    """A path from a variable to the exposure that is open given what is restricted."""
    graph = standing.without_effects_of_exposure
    held = set(standing.asked.kernel.members(standing.asked.restricted))
    return str(next(stream_paths(graph, place, standing.asked.exposure, open_passes(graph, held))))
