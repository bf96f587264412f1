"""Sufficient sets: all minimal ones, one of them, and whether a given set is one."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from adjustplan.graph import CausalGraph
from adjustplan.identify.kernel import Engine, S
from adjustplan.identify.query import Effect, Query, query
from adjustplan.identify.separators import minimal_sets


def is_sufficient(
    graph: CausalGraph,
    exposure: str,
    outcome: str,
    members: Iterable[str],
    effect: Effect = "total",
    *,
    engine: Engine | None = None,
) -> bool:
    """Whether adjusting for ``members`` identifies the effect, if the graph is right.

    Time is linear in the arrows of the graph.

    Parameters
    ----------
    graph : CausalGraph
    exposure, outcome : str
    members : iterable of str
        The proposed set; restricted variables are conditioned on anyway and need not be in it.
    effect : {"total", "direct"}
    engine : {"small", "large"}, optional
        Which kernel works; by default the size of the graph decides. The answer is the same.

    Raises
    ------
    QuestionError
        If a variable is not in the graph, or the set holds the exposure or the outcome.
    """
    asked = query(graph, exposure, outcome, effect, engine)
    return asked.is_sufficient(asked.set_of(members))


def iterate_sufficient_sets(
    graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total", *, engine: Engine | None = None
) -> Iterator[frozenset[str]]:
    """Every minimal sufficient set, one at a time, in a fixed order; memory does not grow with their number."""
    asked = query(graph, exposure, outcome, effect, engine)
    return map(asked.names, minimal_sets(asked))


def sufficient_sets(
    graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total", *, engine: Engine | None = None
) -> list[frozenset[str]]:
    """Every minimal sufficient set, sorted by size, then by names. Their number can be exponential in the graph."""
    return sorted(iterate_sufficient_sets(graph, exposure, outcome, effect, engine=engine), key=by_size_then_names)


def one_sufficient_set(
    graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total", *, engine: Engine | None = None
) -> frozenset[str] | None:
    """One minimal sufficient set, or None where there is none, in time linear in the arrows."""
    asked = query(graph, exposure, outcome, effect, engine)
    found = one_minimal_set(asked)
    return None if found is None else asked.names(found)


def one_minimal_set(asked: Query[S], without: S | None = None) -> S | None:
    """As :func:`one_sufficient_set`, on the query's own sets, and using none of ``without``.

    All candidates among the ancestors block whatever can be blocked. Keep those that influence from the exposure gets
    to, and of these the ones that influence from the outcome gets to (van der Zander and Liśkiewicz 2020, UAI 36:637).
    """
    if not asked.kernel.is_empty(asked.distorting):
        return None
    members = asked.candidates & asked.ancestry & ~(asked.nothing if without is None else without)
    reached = asked.from_exposure(members | asked.restricted, asked.ancestry)
    if asked.kernel.holds(reached, asked.outcome):
        return None
    members = members & reached
    return members & asked.from_outcome(members | asked.restricted, asked.ancestry)


def by_size_then_names(members: Iterable[str]) -> tuple[int, list[str]]:
    """The sorting key of lists of sets."""
    names = sorted(members)
    return len(names), names
