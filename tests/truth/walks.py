"""Descendants and paths, by walking the arrows, the slow way.

A *path* between two variables goes from arrow to arrow, whichever way the arrows point, and meets no
variable twice. A variable in its interior is a *collider* on it when both arrows beside it point into it. A
set of variables *blocks* the path when

* some interior variable that is not a collider is in the set, or
* some collider is neither in the set nor the cause, however remote, of anything in it.

Otherwise the path is *open*. Two variables are *d-separated* by a set when it blocks every path between
them (Pearl, Causality, 2nd edition 2009, section 1.2.3). That is the whole theory, and this file spells it
out by writing down every path. It is the yardstick for the quick algorithms of ``adjustplan.identify``, so
it shares no code with them.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Set
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

Name = str


class Arrows:
    """A set of arrows, each a pair (cause, effect), among the variables named."""

    def __init__(self, variables: Iterable[Name], arrows: Iterable[tuple[Name, Name]]) -> None:
        self.variables = tuple(variables)
        self.arrows = frozenset(arrows)

    def without(self, arrows: Iterable[tuple[Name, Name]]) -> Arrows:
        """The same variables with some arrows taken away."""
        return Arrows(self.variables, self.arrows - set(arrows))

    @cached_property
    def effects(self) -> dict[Name, frozenset[Name]]:
        """What each variable points to."""
        return {v: frozenset(b for a, b in self.arrows if a == v) for v in self.variables}

    @cached_property
    def causes(self) -> dict[Name, frozenset[Name]]:
        """What points to each variable."""
        return {v: frozenset(a for a, b in self.arrows if b == v) for v in self.variables}

    @cached_property
    def descendants(self) -> dict[Name, frozenset[Name]]:
        """For each variable itself and everything that a directed path leads to from it."""
        return {v: frozenset(self._downstream(v)) for v in self.variables}

    def _downstream(self, variable: Name) -> set[Name]:
        found = {variable}
        for effect in self.effects[variable]:
            found |= self._downstream(effect)
        return found

    def directed_paths(self, start: Name, end: Name) -> Iterator[tuple[Name, ...]]:
        """Every directed path from ``start`` to ``end``."""
        if start == end:
            yield (end,)
            return
        for effect in sorted(self.effects[start]):
            for rest in self.directed_paths(effect, end):
                yield (start, *rest)

    def paths(self, start: Name, end: Name) -> list[Walk]:
        """Every path between ``start`` and ``end``."""
        return [self._walk(names) for names in self._simple(end, (start,))]

    def _simple(self, end: Name, so_far: tuple[Name, ...]) -> Iterator[tuple[Name, ...]]:
        here = so_far[-1]
        if here == end:
            yield so_far
            return
        for following in sorted(self.causes[here] | self.effects[here]):
            if following not in so_far:
                yield from self._simple(end, (*so_far, following))

    def _walk(self, names: tuple[Name, ...]) -> Walk:
        triples = list(zip(names, names[1:], names[2:], strict=False))
        is_collider = {m: (a, m) in self.arrows and (b, m) in self.arrows for a, m, b in triples}
        return Walk(
            names=names,
            directed=all(pair in self.arrows for pair in pairwise(names)),
            colliders=tuple(v for v in names[1:-1] if is_collider[v]),
            others=frozenset(v for v in names[1:-1] if not is_collider[v]),
            downstream=tuple(self.descendants[v] for v in names[1:-1] if is_collider[v]),
            text=" ".join(self._signs(names)),
        )

    def _signs(self, names: tuple[Name, ...]) -> Iterator[str]:
        yield names[0]
        for a, b in pairwise(names):
            yield "->" if (a, b) in self.arrows else "<-"
            yield b

    def separated(self, one: Name, other: Name, given: Set[Name]) -> bool:
        """Whether ``given`` blocks every path between the two."""
        return not any(path.is_open(given) for path in self.paths(one, other))


@dataclass(frozen=True)
class Walk:
    """One path: its variables in order, which of the interior ones are colliders, and what those lead to."""

    names: tuple[Name, ...]
    directed: bool
    colliders: tuple[Name, ...]
    others: frozenset[Name]
    downstream: tuple[frozenset[Name], ...]
    text: str

    def is_open(self, given: Set[Name]) -> bool:
        """Whether the path is open when ``given`` is conditioned on."""
        if not self.others.isdisjoint(given):
            return False
        return not any(below.isdisjoint(given) for below in self.downstream)
