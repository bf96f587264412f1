"""Why: sentences that say what stands against a variable, or against every set, each naming a path that shows it."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.graph import CausalGraph
from adjustplan.identify.paths import Path, ancestors, directed_path, stream_paths
from adjustplan.identify.query import Effect, Query, query
from adjustplan.identify.sets import one_minimal_set
from adjustplan.identify.showing import list_text
from adjustplan.identify.tracing import open_paths


def causal_path_through(asked: Query[int], place: int) -> Path | None:
    """A shortest causal path from exposure to outcome through a variable."""
    before = directed_path(asked.graph, asked.exposure, place)
    after = directed_path(asked.graph, place, asked.outcome)
    if before is None or after is None:
        return None
    return Path(before.variables + after.variables[1:], before.forward + after.forward)


def mediators(asked: Query[int]) -> list[int]:
    """What lies on a causal path between exposure and outcome, the ends left out."""
    return asked.kernel.members(asked.on_causal_paths & ~asked.ends)


def why_forbidden(asked: Query[int], name: str) -> str:
    """Why an unmeasured or forbidden variable can be in no sufficient set."""
    graph = asked.graph
    place = graph.number(name)
    if graph.variables[place].unmeasured:
        return "It is unmeasured, so it cannot be adjusted for."
    if path := directed_path(graph, asked.outcome, place):
        return f"The outcome affects it ({path}); holding it fixed distorts the effect."
    if path := causal_path_through(asked, place):
        return f"It lies on the causal path {path}; holding it fixed takes part of the effect away."
    for mediator in mediators(asked):
        if path := directed_path(graph, mediator, place):
            between = graph.variables[mediator].name
            return f"The mediator {between} affects it ({path}); holding it fixed distorts the effect."
    raise ValueError(f"{name} is not forbidden")


def why_no_set(graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total") -> str | None:
    """Why no set is sufficient, with a path that nothing measured can block; None where some set is."""
    asked = query(graph, exposure, outcome, effect)
    if names := sorted(asked.names(asked.distorting)):
        said = (f"“{name}” is restricted, whatever is adjusted for. {why_forbidden(asked, name)}" for name in names)
        return " ".join(said)
    if one_minimal_set(asked) is not None:
        return None
    if path := next(_unblockable(asked), None):
        return f"No measured variable can block the open path {path}{_unmeasured_on(graph, path)}."
    return _dilemma(asked)


def _unblockable(asked: Query[int]) -> Iterator[Path]:
    """Open paths that stay open whatever candidates are held fixed in addition."""
    kernel = asked.kernel
    blocking = set(kernel.members(asked.restricted | asked.candidates))
    unlocked = ancestors(asked.graph, set(kernel.members(asked.restricted)))

    def passes(place: int, into: bool, out: bool) -> bool:
        return place in unlocked if into and not out else place not in blocking

    paths = stream_paths(asked.graph, asked.exposure, asked.outcome, passes, causal=asked.effect == "direct")
    return (path for path in paths if not path.carries(asked.effect))


def _unmeasured_on(graph: CausalGraph, path: Path) -> str:
    hidden = [name for name in path.others if graph[name].unmeasured]
    return f"; measuring {list_text(hidden, 'or')} would" if hidden else ""


def _dilemma(asked: Query[int]) -> str:
    """Every open path can be blocked, but blocking one opens another."""
    graph, kernel = asked.graph, asked.kernel
    everything = asked.candidates & asked.ancestry
    opened = next(open_paths(asked, everything))
    colliders = {graph.number(name) for name in opened.colliders}
    openers = [place for place in kernel.members(everything) if colliders & ancestors(graph, {place})]
    left = next(open_paths(asked, everything & ~kernel.set_of(openers)))
    names = list_text(graph.variables[place].name for place in openers)
    return f"Adjusting for {names} opens {opened}; not doing so leaves {left} open. Nothing measured blocks both."
