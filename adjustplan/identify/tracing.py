"""Trace: list the paths between exposure and outcome, and say for each what opens or blocks it, given a set."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Set
from dataclasses import dataclass

from adjustplan.graph import CausalGraph
from adjustplan.identify.paths import Path, ancestors, directed_path, open_passes, stream_paths
from adjustplan.identify.query import Effect, Query, query
from adjustplan.identify.showing import list_text


@dataclass(frozen=True, slots=True)
class TracedPath:
    """A path and its state while certain variables are held fixed.

    Attributes
    ----------
    path : Path
    wanted : bool
        Whether it carries the effect asked for: a causal path for a total effect, the arrow itself for a direct one.
        Every other path should be blocked.
    open : bool
        Whether it carries association now.
    blocked_by : tuple of str
        The variables at which it is blocked: those held fixed, and colliders on it that are not opened.
    opened_by : tuple of str
        What is held fixed and opens a collider on it.
    reason : str
        The same in one sentence.
    """

    path: Path
    wanted: bool
    open: bool
    blocked_by: tuple[str, ...]
    opened_by: tuple[str, ...]
    reason: str

    @property
    def variables(self) -> tuple[str, ...]:
        """The variables, from exposure to outcome."""
        return self.path.variables

    @property
    def text(self) -> str:
        """The path as ``a <- b -> c``."""
        return self.path.text

    @property
    def causal(self) -> bool:
        """Whether every arrow points from exposure towards outcome."""
        return self.path.causal

    def __str__(self) -> str:
        return f"{self.text}  [{'open' if self.open else 'blocked'}] {self.reason}"


def trace(
    graph: CausalGraph, exposure: str, outcome: str, members: Iterable[str] = (), effect: Effect = "total"
) -> Iterator[TracedPath]:
    """Every path between exposure and outcome, the shortest first, with its state given ``members``.

    Restricted variables are conditioned on as well. Their number can be exponential: take as many as are wanted, with
    ``itertools.islice``.

    Raises
    ------
    QuestionError
        If a variable is not in the graph, or the set holds the exposure or the outcome.
    """
    asked = query(graph, exposure, outcome, effect)
    held = set(asked.kernel.members(asked.set_of(members) | asked.restricted))
    reader = PathReader(graph, held, effect)
    return map(reader.read, stream_paths(graph, asked.exposure, asked.outcome))


def open_paths(asked: Query[int], members: int) -> Iterator[Path]:
    """The paths that should be blocked and are open while ``members`` and what is restricted are held fixed."""
    held = set(asked.kernel.members(members | asked.restricted))
    passes = open_passes(asked.graph, held)
    paths = stream_paths(asked.graph, asked.exposure, asked.outcome, passes, causal=asked.effect == "direct")
    return (path for path in paths if not path.carries(asked.effect))


class PathReader:
    """Reads the state of paths while certain variables, given by place, are held fixed."""

    def __init__(self, graph: CausalGraph, held: Set[int], effect: Effect) -> None:
        self.graph, self.held, self.effect = graph, held, effect
        self.names = {graph.variables[place].name for place in held}
        self.unlocked = {graph.variables[place].name for place in ancestors(graph, held)}

    def read(self, path: Path) -> TracedPath:
        """The path with its state, and what makes it so."""
        fixed = [name for name in path.others if name in self.names]
        openers = self.openers(path)
        closed = [name for name in path.colliders if name not in openers]
        wanted = path.carries(self.effect)
        is_open = not fixed and not closed
        reason = _open_reason(path, openers, wanted) if is_open else _blocked_reason(fixed, closed, wanted)
        opened_by = tuple(dict.fromkeys(opener for them in openers.values() for opener in them))
        blocked_by = tuple(name for name in path.variables if name in fixed or name in closed)
        return TracedPath(path, wanted, is_open, blocked_by, opened_by, reason)

    def openers(self, path: Path) -> dict[str, list[str]]:
        """For each collider on the path that is open, what is held fixed at it or below it."""
        return {
            name: [
                self.graph.variables[held].name
                for held in sorted(self.held)
                if self.graph.variables[held].name == name
                or directed_path(self.graph, self.graph.number(name), held) is not None
            ]
            for name in path.colliders
            if name in self.unlocked
        }


def _open_reason(path: Path, openers: dict[str, list[str]], wanted: bool) -> str:
    if wanted:
        return "It carries the effect."
    if openers:
        said = [
            f"by holding the collider {collider} fixed"
            if them == [collider]
            else f"at the collider {collider} by holding {list_text(them)} fixed"
            for collider, them in openers.items()
        ]
        return f"Opened {list_text(said)}."
    if path.causal:
        return f"It runs through {list_text(path.others)}, which is not held fixed."
    if path.others:
        return f"Nothing on it is held fixed; {list_text(path.others, 'or')} would block it."
    return "Nothing lies on it that could block it."


def _blocked_reason(fixed: list[str], closed: list[str], wanted: bool) -> str:
    said = []
    if fixed:
        said.append(f"{list_text(fixed)} {'is' if len(fixed) == 1 else 'are'} held fixed")
    if closed:
        kind = "is a collider" if len(closed) == 1 else "are colliders"
        said.append(f"{list_text(closed)} {kind} on it, left alone")
    loss = "; this takes part of the effect away" if wanted and fixed else ""
    return f"{list_text(said)}{loss}."
