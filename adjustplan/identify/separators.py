"""Every minimal sufficient set, one after the other, without repeats and without waiting long for the next.

Minimal sufficient sets are the minimal walls between exposure and outcome. A wall leaves, on the side of the exposure,
the variables that influence still gets to: its *near side*. Growing the near side pushes the wall outwards, and of all
walls that enclose a given near side there is one closest to it. So the walls form a tree: take the closest wall of all;
for each of its members in turn, push the wall out over that member, and forbid to push over it from then on. Every
minimal wall is met exactly once, and each step costs a few sweeps, so the delay between two sets is polynomial (Takata
2010, Discrete Appl Math 158:1660; the reduction from sufficient sets to walls: van der Zander, Liśkiewicz and Textor
2019, Artif Intell 270:1). Memory holds one branch of the tree, whatever the number of sets.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Generic, Protocol

from adjustplan.identify.bitsets import BitKernel
from adjustplan.identify.kernel import S
from adjustplan.identify.query import Query


@dataclass(frozen=True, slots=True)
class Wall(Generic[S]):
    """A minimal sufficient set (``members``), the removable variables on its near side, and on its far side."""

    members: S
    near: S
    far: S


class Walls(Protocol[S]):
    """How walls are found: the closest of all, and the closest one that lies beyond one of a wall's members."""

    def first(self) -> Wall[S] | None:
        """The wall closest to the exposure, or None where no set is sufficient."""

    def beyond(self, wall: Wall[S], place: int, banned: S) -> Wall[S] | None:
        """The closest wall whose near side takes in a member of ``wall``, but nothing banned; None: there is none."""


def minimal_sets(query: Query[S]) -> Iterator[S]:
    """All minimal sufficient sets, lazily, in a fixed order."""
    kernel = query.kernel
    if not kernel.is_empty(query.distorting):
        return
    walls = walls_of(query)
    wall = walls.first()
    if wall is None:
        return
    branch = [(wall, query.nothing, iter(kernel.members(wall.members)))]
    while branch:
        wall, banned, untried = branch[-1]
        place = next(untried, None)
        if place is None:
            branch.pop()
            yield wall.members
            continue
        branch[-1] = (wall, banned | kernel.set_of((place,)), untried)
        if (further := walls.beyond(wall, place, banned)) is not None:
            branch.append((further, banned, iter(kernel.members(further.members & ~banned))))


def walls_of(query: Query[S]) -> Walls[S]:
    """The finder of walls that suits the query's kernel."""
    return _BitWalls(query) if isinstance(query.kernel, BitKernel) else _SweptWalls(query)


class _SweptWalls(Generic[S]):
    """Walls found by sweeps over the graph, for any kernel; three sweeps a wall."""

    def __init__(self, query: Query[S]) -> None:
        self.query: Query[S] = query
        self.removable: S = query.candidates & query.ancestry

    def first(self) -> Wall[S] | None:
        return self._closest(self.query.nothing)

    def beyond(self, wall: Wall[S], place: int, banned: S) -> Wall[S] | None:
        further = self._closest(wall.near | self.query.kernel.set_of((place,)))
        if further is None or not self.query.kernel.is_empty(further.near & banned):
            return None
        return further

    def _closest(self, near: S) -> Wall[S] | None:
        query, within = self.query, self.query.ancestry
        outside = self.removable & ~near
        reached = query.from_exposure(outside | query.restricted, within)
        if query.kernel.holds(reached, query.outcome):
            return None
        members = query.from_outcome((reached & outside) | query.restricted, within) & reached & outside
        near = query.from_exposure(members | query.restricted, within) & self.removable & ~members
        return Wall(members, near, query.nothing)


class _BitWalls:
    """Walls on bit sets: which removable variables touch which is worked out once, and walls are pushed in place."""

    def __init__(self, query: Query[int]) -> None:
        kernel = query.kernel
        self.removable = query.candidates & query.ancestry
        held = self.removable | query.restricted
        from_exposure = query.from_exposure(held, query.ancestry)
        self.is_open = kernel.holds(from_exposure, query.outcome)
        self.near_exposure = from_exposure & self.removable
        self.near_outcome = query.from_outcome(held, query.ancestry) & self.removable
        self.touching: dict[int, int] = {}
        for place in kernel.members(self.removable):
            families = kernel.set_of((place, *query.graph.effects[place]))
            reached = kernel.spread(families, held | query.ends, query.ancestry)
            self.touching[1 << place] = reached & self.removable & ~(1 << place)

    def first(self) -> Wall[int] | None:
        return None if self.is_open else self._wall(0, self.near_exposure, self.removable, 0)

    def beyond(self, wall: Wall[int], place: int, banned: int) -> Wall[int] | None:
        one = 1 << place
        if one & self.near_outcome:
            return None
        near = wall.near | one
        return self._wall(near, (wall.members | self.touching[one]) & ~near, wall.far, banned)

    def _wall(self, near: int, around: int, far: int, banned: int) -> Wall[int] | None:
        """The closest wall around a near side that is surrounded by ``around``, where ``far`` holds its far side."""
        touching = self.touching
        inner = far & ~around
        seen = self.near_outcome
        far = waiting = seen & inner
        while waiting:
            lowest = waiting & -waiting
            touched = touching[lowest] & ~seen
            seen |= touched
            touched &= inner
            far |= touched
            waiting = (waiting ^ lowest) | touched
        members = seen & around
        waiting = around & ~members
        if waiting & banned:
            return None
        near |= waiting
        while waiting:
            lowest = waiting & -waiting
            touched = touching[lowest] & ~(near | members)
            if touched & banned:
                return None
            near |= touched
            waiting = (waiting ^ lowest) | touched
        return Wall(members, near, far)
