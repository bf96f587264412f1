"""Which sets are sufficient, by trying every set against every path.

*Total effect.* A causal path is a directed one from exposure to outcome. A set of covariates is sufficient
when, together with what is restricted, it (1) holds nothing that a causal path's variables (the exposure
aside) are or lead to, and (2) blocks every path between exposure and outcome that is not causal. This is
the back-door criterion of Pearl (1993, Statistical Science 8:266-269) in the complete form of Shpitser,
VanderWeele and Robins (2010, UAI).

*Direct effect.* A set is sufficient when, together with what is restricted, it (1) holds nothing that the
outcome leads to, and (2) blocks every path between exposure and outcome but the arrow from the one to the
other. This is the single-door criterion (Pearl, Causality, 2nd edition 2009, theorem 5.3.1).

A set is *minimal* when no proper subset is sufficient. Nothing here is clever, and nothing comes from
``adjustplan.identify``: every sentence above is one line below.
"""

from __future__ import annotations

from collections.abc import Iterable
from functools import cached_property
from itertools import combinations

from adjustplan.graph import CausalGraph
from truth.walks import Arrows, Name, Walk


class Question:
    """A graph, an exposure, an outcome and the effect asked for: answers by enumeration."""

    def __init__(self, graph: CausalGraph, exposure: Name, outcome: Name, effect: str = "total") -> None:
        self.graph, self.exposure, self.outcome, self.effect = graph, exposure, outcome, effect
        self.arrows = Arrows((v.name for v in graph), ((a.cause, a.effect) for a in graph.arrows))
        self.restricted = frozenset(v.name for v in graph if v.restricted)
        self.unmeasured = frozenset(v.name for v in graph if v.unmeasured)
        self.covariates = frozenset(v.name for v in graph) - {exposure, outcome}
        self.candidates = self.covariates - self.restricted - self.unmeasured

    def other_effect(self) -> Question:
        """The same question about the other effect, with the paths found already."""
        other = Question(self.graph, self.exposure, self.outcome, "direct" if self.effect == "total" else "total")
        other.arrows = self.arrows
        other.__dict__["paths"] = self.paths
        return other

    @cached_property
    def paths(self) -> list[Walk]:
        """Every path between exposure and outcome."""
        return self.arrows.paths(self.exposure, self.outcome)

    @cached_property
    def on_causal_paths(self) -> frozenset[Name]:
        """The variables on directed paths from exposure to outcome, both ends included where there is one."""
        return frozenset(name for path in self.paths if path.directed for name in path.names)

    @cached_property
    def forbidden(self) -> frozenset[Name]:
        """What distorts the effect when it is conditioned on."""
        if self.effect == "direct":
            return self.arrows.descendants[self.outcome] - {self.outcome}
        causal = self.on_causal_paths - {self.exposure}
        return frozenset(below for name in causal for below in self.arrows.descendants[name])

    @cached_property
    def to_block(self) -> list[Walk]:
        """The paths that carry something other than the effect asked for."""
        if self.effect == "direct":
            return [path for path in self.paths if not (path.directed and len(path.names) == 2)]
        return [path for path in self.paths if not path.directed]

    def conditioned(self, members: Iterable[Name]) -> frozenset[Name]:
        """What is conditioned on when ``members`` are adjusted for."""
        return frozenset(members) | self.restricted

    def open_paths(self, members: Iterable[Name] = ()) -> set[tuple[Name, ...]]:
        """The paths that should be blocked and are not."""
        given = self.conditioned(members)
        return {path.names for path in self.to_block if path.is_open(given)}

    def is_sufficient(self, members: Iterable[Name]) -> bool:
        """Whether adjusting for ``members`` gives the effect; what is unmeasured cannot be adjusted for."""
        given = self.conditioned(members)
        if given & self.forbidden or given & self.unmeasured:
            return False
        return not any(path.is_open(given) for path in self.to_block)

    @cached_property
    def subsets(self) -> list[frozenset[Name]]:
        """Every set of covariates that could be adjusted for, by size, then names."""
        names = sorted(self.candidates)
        return [frozenset(chosen) for size in range(len(names) + 1) for chosen in combinations(names, size)]

    @cached_property
    def sufficient_sets(self) -> list[frozenset[Name]]:
        """Every sufficient set, minimal or not, by size, then names."""
        return [members for members in self.subsets if self.is_sufficient(members)]

    @cached_property
    def minimal_sets(self) -> list[frozenset[Name]]:
        """Every minimal sufficient set, by size, then names."""
        return [s for s in self.sufficient_sets if not any(smaller < s for smaller in self.sufficient_sets)]

    def __repr__(self) -> str:
        arrows = ", ".join(map(str, self.graph.arrows))
        hidden, fixed = sorted(self.unmeasured), sorted(self.restricted)
        return (
            f"the {self.effect} effect of {self.exposure} on {self.outcome} in {arrows}; "
            f"unmeasured {hidden}, restricted {fixed}"
        )

    def cost(self, members: Iterable[Name]) -> float:
        """What it costs to measure ``members``."""
        return sum(self.graph[name].cost for name in members)
