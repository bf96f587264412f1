"""Which unmeasured variables of the graph lie on a path that the set leaves open.

An unmeasured variable need not confound: the set may block what it does, and what causes only the outcome does no harm.
The question how strong it is arises where it lies on a path between exposure and outcome, other than the effect itself,
that is open while the set and what is restricted are held fixed. What the exposure affects is left out, for that is no
confounder.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from itertools import islice

from adjustplan.graph import CausalGraph
from adjustplan.identify import Effect
from adjustplan.identify.query import query
from adjustplan.identify.tracing import open_paths

MOST_PATHS = 10_000


@dataclass(frozen=True, slots=True)
class Reaching:
    """The unmeasured variables by name, and whether every open path was looked at (the shortest are first)."""

    names: tuple[str, ...]
    complete: bool


def unmeasured_on_open_paths(
    graph: CausalGraph,
    exposure: str,
    outcome: str,
    effect: Effect,
    members: Iterable[str],
    most_paths: int = MOST_PATHS,
) -> Reaching:
    """The unmeasured variables on paths that a set leaves open.

    Parameters
    ----------
    graph : CausalGraph
        The graph to which sufficiency is put.
    exposure, outcome : str
    effect : {"total", "direct"}
    members : iterable of str
        The planned set.
    most_paths : int
        How many open paths are looked at; there can be exponentially many.
    """
    asked = query(graph, exposure, outcome, effect)
    held = asked.set_of(members)
    before = asked.kernel.ancestors(asked.ends | held | asked.restricted)
    affected = asked.kernel.descendants(asked.kernel.set_of((asked.exposure,)))
    possible = asked.names(asked.unmeasured & before & ~affected)
    found: set[str] = set()
    paths = open_paths(asked, held)
    for path in islice(paths, most_paths):
        if found == possible:
            break
        found |= possible.intersection(path.variables)
    complete = found == possible or next(paths, None) is None
    return Reaching(tuple(sorted(found)), complete)
