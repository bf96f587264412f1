"""A question put to a graph: what must not be adjusted for, what may be, and where the search for open paths starts.

*Total effect.* Causal paths run along the arrows from exposure to outcome; what lies on one, or is affected by
what lies on one, must not be held fixed (Shpitser, VanderWeele and Robins 2010, UAI 26:527). All other paths must be
blocked. So long as nothing of the first kind is held fixed, this comes to separating exposure from outcome in the graph
without the arrows that start causal paths (van der Zander, Liśkiewicz and Textor 2019, Artif Intell 270:1).

*Direct effect.* Every path but the arrow itself must be blocked, and nothing that the outcome affects held fixed
(Pearl 2009, Causality, theorem 5.3.1: the single-door criterion).

Restricted variables are held fixed whether one likes it or not, so both criteria are applied to the set together with
them. In particular no set mends a study that is restricted by something the exposure affects on its way to the outcome.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import Generic, Literal, cast

from adjustplan.errors import Finding, QuestionError
from adjustplan.graph import CausalGraph
from adjustplan.identify.kernel import Engine, Kernel, S, kernel_of

Effect = Literal["total", "direct"]


@dataclass(frozen=True)
class Query(Generic[S]):
    """Exposure, outcome and effect, and the sets of variables that follow from them; see :func:`query`."""

    graph: CausalGraph
    kernel: Kernel[S]
    exposure: int
    outcome: int
    effect: Effect

    @cached_property
    def nothing(self) -> S:
        """The empty set."""
        return self.kernel.set_of(())

    @cached_property
    def ends(self) -> S:
        """Exposure and outcome."""
        return self.kernel.set_of((self.exposure, self.outcome))

    @cached_property
    def on_causal_paths(self) -> S:
        """What lies on a directed path from exposure to outcome, the outcome included, the exposure not."""
        affected = self.kernel.descendants(self.kernel.set_of((self.exposure,)))
        before = self.kernel.ancestors(self.kernel.set_of((self.outcome,)))
        return affected & before & ~self.kernel.set_of((self.exposure,))

    @cached_property
    def forbidden(self) -> S:
        """What no sufficient set may hold because the effect itself would be changed."""
        if self.effect == "direct":
            outcome = self.kernel.set_of((self.outcome,))
            return self.kernel.descendants(outcome) & ~outcome
        return self.kernel.descendants(self.on_causal_paths)

    @cached_property
    def restricted(self) -> S:
        """What is always conditioned on."""
        return self.kernel.set_of(place for place, v in enumerate(self.graph.variables) if v.restricted)

    @cached_property
    def unmeasured(self) -> S:
        """What can never be adjusted for."""
        return self.kernel.set_of(place for place, v in enumerate(self.graph.variables) if v.unmeasured)

    @cached_property
    def distorting(self) -> S:
        """Restricted variables that are forbidden too: while there is one, no set is sufficient."""
        return self.restricted & self.forbidden

    @cached_property
    def candidates(self) -> S:
        """What a sufficient set may hold."""
        everything = self.kernel.set_of(range(len(self.graph)))
        return everything & ~(self.ends | self.restricted | self.unmeasured | self.forbidden)

    @cached_property
    def ancestry(self) -> S:
        """Exposure, outcome, what is restricted, and all their ancestors; every minimal set lies in here."""
        return self.kernel.ancestors(self.ends | self.restricted)

    @cached_property
    def cut_effects(self) -> S:
        """The direct effects of the exposure whose arrows from it are taken away before paths are looked at."""
        effects = self.kernel.set_of(self.graph.effects[self.exposure])
        return effects & (self.on_causal_paths if self.effect == "total" else self.kernel.set_of((self.outcome,)))

    @cached_property
    def _families(self) -> tuple[S, S]:
        """The families of exposure and of outcome, by the variables that they are named by."""
        effects: list[list[int]] = self.graph.effects
        of_exposure = self.kernel.set_of((self.exposure, *effects[self.exposure])) & ~self.cut_effects
        return of_exposure, self.kernel.set_of((self.outcome, *effects[self.outcome]))

    def from_exposure(self, held: S, within: S) -> S:
        """What influence gets to from the exposure, other than along the effect, while ``held`` is held fixed."""
        return self.kernel.spread(self._families[0], held | self.ends, within)

    def from_outcome(self, held: S, within: S) -> S:
        """What influence gets to from the outcome while ``held`` is held fixed."""
        return self.kernel.spread(self._families[1], held | self.ends, within)

    def blocks(self, members: S) -> bool:
        """Whether the set, with what is restricted, blocks every path that must be blocked."""
        held = members | self.restricted
        reached = self.from_exposure(held, self.kernel.ancestors(self.ends | held))
        return not self.kernel.holds(reached, self.outcome)

    def is_sufficient(self, members: S) -> bool:
        """Whether the set meets the criterion; time is linear in the arrows."""
        if not self.kernel.is_empty((members | self.restricted) & self.forbidden | members & self.unmeasured):
            return False
        return self.blocks(members)

    def names(self, variables: S) -> frozenset[str]:
        """The names of the members of a set."""
        known = self.graph.variables
        return frozenset(known[place].name for place in self.kernel.members(variables))

    def set_of(self, names: Iterable[str]) -> S:
        """A proposed set, restricted variables left out since they are held fixed anyway.

        Raises
        ------
        QuestionError
            If a name is not in the graph, or is the exposure or the outcome.
        """
        places = {self.graph.number(name) for name in names}
        if bad := places & {self.exposure, self.outcome}:
            name = self.graph.variables[min(bad)].name
            role = "exposure" if self.exposure in bad else "outcome"
            message = f"“{name}” is the {role}; it cannot be adjusted for."
            raise QuestionError(Finding("adjustment-member-is-end", message, "Take it out of the set."))
        return self.kernel.set_of(places) & ~self.restricted


def query(
    graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total", engine: Engine | None = None
) -> Query[int]:
    """The question of the effect of ``exposure`` on ``outcome``, checked and kept with the graph.

    Raises
    ------
    QuestionError
        If a variable is not in the graph, the two are the same, one is restricted, or the effect is unknown.
    """
    first, second = graph.number(exposure), graph.number(outcome)
    if effect not in ("total", "direct"):
        raise QuestionError(Finding("question-effect", f"The effect is “{effect}”.", "Write total or direct."))
    if first == second:
        message = f"Exposure and outcome are both “{exposure}”."
        raise QuestionError(Finding("question-same", message, "Name two variables."))
    for name in (exposure, outcome):
        if graph[name].restricted:
            message = f"“{name}” is restricted: it does not vary in the data, so no effect of or on it can be seen."
            remedy = "Take “restricted” off it, or ask another question."
            raise QuestionError(Finding("question-restricted", message, remedy))
    kernel = kernel_of(graph, engine)
    key = f"query.{effect}.{first}.{second}.{type(kernel).__name__}"
    if key not in graph.derived:
        graph.derived[key] = Query(graph, kernel, first, second, effect)
    return cast("Query[int]", graph.derived[key])
