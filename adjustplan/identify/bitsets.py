"""The kernel for small graphs: a set of variables is one integer, bit *i* for the variable at place *i*.

Up to a few thousand variables the machine handles hundreds of members at a time this way, and nothing is imported.
"""

from __future__ import annotations

from collections.abc import Iterable

from adjustplan.graph import CausalGraph


class BitKernel:
    """The three sweeps on integers; see :class:`adjustplan.identify.kernel.Kernel`."""

    def __init__(self, graph: CausalGraph) -> None:
        self.causes = [self.set_of(causes) for causes in graph.causes]
        self.effects = [self.set_of(effects) for effects in graph.effects]

    def set_of(self, places: Iterable[int]) -> int:
        variables = 0
        for place in places:
            variables |= 1 << place
        return variables

    def members(self, variables: int) -> list[int]:
        places = []
        while variables:
            lowest = variables & -variables
            places.append(lowest.bit_length() - 1)
            variables ^= lowest
        return places

    def is_empty(self, variables: int) -> bool:
        return not variables

    def holds(self, variables: int, place: int) -> bool:
        return bool(variables >> place & 1)

    def ancestors(self, variables: int) -> int:
        return _closure(variables, self.causes)

    def descendants(self, variables: int) -> int:
        return _closure(variables, self.effects)

    def spread(self, families: int, stops: int, within: int) -> int:
        causes, effects = self.causes, self.effects
        entered = families & within
        waiting, reached = entered, 0
        while waiting:
            lowest = waiting & -waiting
            waiting ^= lowest
            new = (causes[lowest.bit_length() - 1] | lowest) & ~reached
            reached |= new
            passing = new & ~stops
            while passing:
                one = passing & -passing
                passing ^= one
                fresh = (effects[one.bit_length() - 1] | one) & within & ~entered
                entered |= fresh
                waiting |= fresh
        return reached


def _closure(variables: int, steps: list[int]) -> int:
    reached = waiting = variables
    while waiting:
        lowest = waiting & -waiting
        new = steps[lowest.bit_length() - 1] & ~reached
        reached |= new
        waiting = (waiting ^ lowest) | new
    return reached
