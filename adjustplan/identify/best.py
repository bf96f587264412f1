"""Of all sufficient sets, the smallest, the cheapest, and the one that gives the most precise estimate.

The first two are minimum cuts: give every candidate a capacity, none to the rest, and ask for the least capacity that
parts exposure from outcome (Ford and Fulkerson 1956; for sufficient sets van der Zander, Liśkiewicz and Textor 2019).
The third is known in closed form: the causes of everything on the causal paths (Henckel, Perković and Maathuis 2022,
J R Stat Soc B 84:579). It is seldom minimal, for causes of the outcome alone take away noise.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from adjustplan.graph import CausalGraph, Variable
from adjustplan.identify.query import Effect, Query, query
from adjustplan.identify.sets import one_minimal_set


@dataclass(frozen=True, slots=True)
class PreciseSet:
    """The most precise sufficient set (None where it is not known), and in one sentence why it is, or is not known."""

    members: frozenset[str] | None
    reason: str


def smallest_sufficient_set(
    graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total"
) -> frozenset[str] | None:
    """A sufficient set with as few members as any, or None where no set is sufficient."""
    return _minimum_cut(query(graph, exposure, outcome, effect), lambda _: Fraction(1))


def cheapest_sufficient_set(
    graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total"
) -> frozenset[str] | None:
    """A sufficient set whose ``cost`` adds up to as little as any, of these the smallest; None where none exists.

    A variable without a stated cost costs 1.
    """
    return _minimum_cut(query(graph, exposure, outcome, effect), lambda variable: Fraction(str(float(variable.cost))))


def most_precise_set(graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total") -> PreciseSet:
    """The sufficient set with the smallest asymptotic variance in a linear model, where it is known.

    It is known for total effects along at least one causal path, when all its variables are measured and no variable
    outside it is restricted.
    """
    asked = query(graph, exposure, outcome, effect)
    kernel = asked.kernel
    if effect == "direct":
        return PreciseSet(None, "The result holds for total effects.")
    if kernel.is_empty(asked.on_causal_paths):
        return PreciseSet(None, f"No causal path leads from {exposure} to {outcome}; by the graph the effect is null.")
    causes = kernel.set_of(cause for place in kernel.members(asked.on_causal_paths) for cause in graph.causes[place])
    best = causes & ~(asked.forbidden | kernel.set_of((asked.exposure,)))
    if not kernel.is_empty(best & asked.unmeasured):
        names = ", ".join(sorted(asked.names(best & asked.unmeasured)))
        return PreciseSet(None, f"It would need what is unmeasured: {names}.")
    if not kernel.is_empty(asked.restricted & ~best):
        names = ", ".join(sorted(asked.names(asked.restricted & ~best)))
        return PreciseSet(None, f"The result does not cover a study in which other variables are held fixed: {names}.")
    best = best & ~asked.restricted
    if not asked.is_sufficient(best):
        return PreciseSet(None, "No set is sufficient.")
    return PreciseSet(asked.names(best), "It holds every cause of what lies on the causal paths.")


def _minimum_cut(asked: Query[int], cost: Callable[[Variable], Fraction]) -> frozenset[str] | None:
    """The sufficient set of least cost, ties going to the smaller set.

    Costs are made whole numbers, so that the cut is exact however they are scaled, and each is put above a unit of its
    own, which settles ties and keeps variables that cost nothing out of the set where they are not needed.
    """
    import networkx as nx

    if one_minimal_set(asked) is None:
        return None
    kernel, graph = asked.kernel, asked.graph
    removable = kernel.members(asked.candidates & asked.ancestry)
    costs = {place: cost(graph.variables[place]) for place in removable}
    scale = math.lcm(*(value.denominator for value in costs.values())) * (len(removable) + 1)
    network: nx.DiGraph[Any] = nx.DiGraph()
    closed = set(kernel.members(asked.restricted)) | {asked.exposure, asked.outcome}
    for place in kernel.members(asked.ancestry):
        if place in costs:
            network.add_edge(("in", place), ("out", place), capacity=int(costs[place] * scale) + 1)
        elif place not in closed:
            network.add_edge(("in", place), ("out", place))
        for member in (place, *graph.causes[place]):
            if member not in closed:
                network.add_edge(("out", member), ("family", place))
                network.add_edge(("family", place), ("in", member))
        if place == asked.outcome or asked.outcome in graph.causes[place]:
            network.add_edge(("family", place), "outcome")
    cut_off = set(kernel.members(asked.cut_effects))
    for place in (asked.exposure, *graph.effects[asked.exposure]):
        if place not in cut_off and kernel.holds(asked.ancestry, place):
            network.add_edge("exposure", ("family", place))
    network.add_nodes_from(("exposure", "outcome"))
    _, (near, _) = nx.minimum_cut(network, "exposure", "outcome")
    cut = [place for place in removable if ("in", place) in near and ("out", place) not in near]
    return asked.names(kernel.set_of(cut))
