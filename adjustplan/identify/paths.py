"""Paths between exposure and outcome, and what opens or blocks each.

A path goes from variable to variable along arrows, with or against them, and visits none twice. It is *causal* when it
follows every arrow. At a variable where two arrows of the path meet (a *collider* on it) it is blocked, unless that
variable or something it affects is conditioned on. At every other variable it is open, unless that variable is
conditioned on. One block is enough to block the path (Pearl 1988, Probabilistic Reasoning in Intelligent Systems).

Paths are exponential in number, so they are streamed, the shortest first.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence, Set
from dataclasses import dataclass
from itertools import pairwise

from adjustplan.graph import CausalGraph

Step = tuple[int, bool, bool]
"""A variable, whether the arrow by which the path came to it points into it, and whether all arrows so far did."""

Passes = Callable[[int, bool, bool], bool]
"""Whether a path may go through a variable, given whether the arrow it comes by points into it, and whether the
arrow it leaves by points out of it."""


@dataclass(frozen=True, slots=True)
class Path:
    """A path: its variables from exposure to outcome, and for each step whether its arrow points forward.

    ``Path(("night_work", "age", "diabetes"), (False, True))`` is ``night_work <- age -> diabetes``.
    """

    variables: tuple[str, ...]
    forward: tuple[bool, ...]

    @property
    def causal(self) -> bool:
        """Whether every arrow points from exposure towards outcome."""
        return all(self.forward)

    def carries(self, effect: str) -> bool:
        """Whether it carries the effect asked for: the total one along causal paths, the direct one along an arrow.

        Every other path must be blocked.
        """
        return self.causal and (effect == "total" or len(self.forward) == 1)

    @property
    def colliders(self) -> tuple[str, ...]:
        """The variables at which two arrows of the path meet."""
        steps = enumerate(pairwise(self.forward), start=1)
        return tuple(self.variables[i] for i, (into, out) in steps if into and not out)

    @property
    def others(self) -> tuple[str, ...]:
        """The variables between the ends that are no colliders on it."""
        return tuple(name for name in self.variables[1:-1] if name not in self.colliders)

    @property
    def text(self) -> str:
        """The path as ``a <- b -> c``."""
        steps = zip(self.forward, self.variables[1:], strict=True)
        return self.variables[0] + "".join(f" {'->' if points else '<-'} {name}" for points, name in steps)

    def __str__(self) -> str:
        return self.text


def stream_paths(
    graph: CausalGraph, start: int, end: int, passes: Passes | None = None, *, causal: bool = True
) -> Iterator[Path]:
    """All paths between two variables that go only where ``passes`` lets them, the shortest first.

    Paths of one length come in the order of the graph's variables; with ``causal`` False, causal ones are left out. The
    search goes one length at a time and leaves a path as soon as no way of the steps that remain leads to the end past
    the variables already visited.
    """
    may_pass = passes or (lambda _place, _into, _out: True)
    remaining = _steps_to(graph, end, may_pass, causal)
    for length in range(1, len(graph)):
        cut_short = [False]
        yield from _paths_of_length(graph, start, end, may_pass, remaining, length, cut_short)
        if not cut_short[0]:
            return


def open_passes(graph: CausalGraph, held: Set[int]) -> Passes:
    """The rule by which a path is open while ``held`` is conditioned on."""
    unlocked = ancestors(graph, held)

    def passes(place: int, into: bool, out: bool) -> bool:
        return place in unlocked if into and not out else place not in held

    return passes


def ancestors(graph: CausalGraph, places: Set[int]) -> set[int]:
    """The variables and everything from which arrows lead to them."""
    reached, waiting = set(places), list(places)
    while waiting:
        new = [cause for cause in graph.causes[waiting.pop()] if cause not in reached]
        reached.update(new)
        waiting += new
    return reached


def directed_path(graph: CausalGraph, start: int, end: int, avoid: Set[int] = frozenset()) -> Path | None:
    """A shortest path along the arrows from one variable to another, through none of ``avoid``."""
    came_from: dict[int, int] = {start: start}
    layer = [start]
    while layer and end not in came_from:
        following = []
        for place in layer:
            for effect in graph.effects[place]:
                if effect not in came_from and effect not in avoid:
                    came_from[effect] = place
                    following.append(effect)
        layer = following
    if end not in came_from or start == end:
        return None
    route = [end]
    while route[-1] != start:
        route.append(came_from[route[-1]])
    return path_along(graph, route[::-1])


def path_along(graph: CausalGraph, places: Sequence[int]) -> Path:
    """The path that visits these variables, each joined to the next by an arrow one way or the other."""
    names = tuple(graph.variables[place].name for place in places)
    return Path(names, tuple(graph.arrow(*step) is not None for step in pairwise(names)))


def _moves(graph: CausalGraph, place: int, straight: bool) -> Iterator[Step]:
    yield from ((effect, True, straight) for effect in graph.effects[place])
    yield from ((cause, False, False) for cause in graph.causes[place])


def _steps_to(graph: CausalGraph, end: int, passes: Passes, causal: bool) -> dict[Step, int]:
    """The fewest steps that lead from each step to the end, where the rule lets them."""
    layer: list[Step] = [(end, True, False), (end, False, False)] + ([(end, True, True)] if causal else [])
    fewest = dict.fromkeys(layer, 0)
    distance = 0
    while layer:
        distance += 1
        following = []
        for place, into, straight in layer:
            # the arrow by which the path came here points into here exactly when the step before was a cause
            ways = [(True, True)] if straight else [(True, False), (False, False)] + [(True, True)] * (not into)
            for before in graph.causes[place] if into else graph.effects[place]:
                for came_into, came_straight in ways:
                    step = (before, came_into, came_straight)
                    if step not in fewest and passes(before, came_into, into):
                        fewest[step] = distance
                        following.append(step)
        layer = following
    return fewest


def _leads_on(
    graph: CausalGraph,
    step: Step,
    end: int,
    passes: Passes,
    remaining: dict[Step, int],
    route: Sequence[int],
    most: int,
) -> bool:
    """Whether a way of at most so many steps leads from a step to the end past what is on the route already.

    Without this, a part of the graph that hangs on one variable would be searched in full, path by path, before it is
    found that none comes back. ``remaining`` keeps the search on its course, so that it seldom looks far.
    """
    if remaining.get(step, math.inf) > most:
        return False
    layer, seen = [step], {step}
    while layer and most > 0:
        most -= 1
        following = []
        for place, into, straight in layer:
            for further in _moves(graph, place, straight):
                if (
                    further not in seen
                    and remaining.get(further, math.inf) <= most
                    and further[0] not in route
                    and passes(place, into, further[1])
                ):
                    if further[0] == end:
                        return True
                    seen.add(further)
                    following.append(further)
        layer = following
    return False


def _paths_of_length(
    graph: CausalGraph, start: int, end: int, passes: Passes, remaining: dict[Step, int], length: int, cut: list[bool]
) -> Iterator[Path]:
    """The paths of exactly ``length`` steps; ``cut[0]`` is set where a longer one might exist."""
    route = [start]
    forward: list[bool] = []
    untried = [_moves(graph, start, True)]
    while untried:
        step = next(untried[-1], None)
        if step is None:
            untried.pop()
            route.pop()
            if forward:
                forward.pop()
            continue
        place, into, straight = step
        if place in route or (forward and not passes(route[-1], forward[-1], into)):
            continue
        left = length - len(route)
        if place == end:
            if left == 0 and step in remaining:
                yield path_along(graph, (*route, end))
        elif not _leads_on(graph, step, end, passes, remaining, route, left):
            cut[0] = cut[0] or _leads_on(graph, step, end, passes, remaining, route, len(graph))
        else:
            route.append(place)
            forward.append(into)
            untried.append(_moves(graph, place, straight))
