"""The causal graph itself: its variables and arrows, and who is next to whom."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

from adjustplan.errors import Finding, GraphError, QuestionError, did_you_mean
from adjustplan.graph.elements import Arrow, Variable, attributes
from adjustplan.graph.faults import faults

if TYPE_CHECKING:
    import networkx as nx


@dataclass(frozen=True, eq=False)
class CausalGraph:
    """A directed acyclic graph of causes and effects.

    Parameters
    ----------
    arrows : iterable of Arrow or (cause, effect) or (cause, effect, reason)
    variables : iterable of Variable
        Needed only for variables with something to say about them, or on no arrow; the others are added in the
        order in which the arrows name them.

    Raises
    ------
    GraphError
        If a rule of the model is broken; every broken rule is among its findings.

    Two graphs are equal when they have the same variables and arrows, in whatever order.
    """

    arrows: tuple[Arrow, ...] = ()
    variables: tuple[Variable, ...] = field(default=())

    def __init__(
        self,
        arrows: Iterable[Arrow | tuple[str, str] | tuple[str, str, str]] = (),
        variables: Iterable[Variable] = (),
    ) -> None:
        told = tuple(arrow if isinstance(arrow, Arrow) else Arrow(*arrow) for arrow in arrows)
        known = tuple(variables)
        named = {variable.name for variable in known}
        on_arrows = dict.fromkeys(end for arrow in told for end in (arrow.cause, arrow.effect))
        object.__setattr__(self, "arrows", told)
        object.__setattr__(self, "variables", known + tuple(Variable(n) for n in on_arrows if n not in named))
        if broken := list(faults(self.variables, self.arrows)):
            raise GraphError(fault.finding() for fault in broken)

    @classmethod
    def from_networkx(cls, graph: nx.DiGraph[Any]) -> CausalGraph:
        """The causal graph that a networkx digraph spells out.

        Node attributes ``label``, ``unmeasured``, ``restricted``, ``wave``, ``cost`` and ``proxy_of`` and the edge
        attribute ``reason`` are taken over; node keys become names through ``str``. Others are ignored.
        """
        variables = [
            Variable(
                str(node),
                label=str(data.get("label", "")),
                unmeasured=bool(data.get("unmeasured", False)),
                restricted=bool(data.get("restricted", False)),
                wave=data.get("wave"),
                cost=float(data.get("cost", 1.0)),
                proxy_of=str(data.get("proxy_of", "")),
            )
            for node, data in graph.nodes(data=True)
        ]
        arrows = [Arrow(str(a), str(b), str(data.get("reason", ""))) for a, b, data in graph.edges(data=True)]
        return cls(arrows, variables)

    def to_networkx(self) -> nx.DiGraph[str]:
        """A networkx digraph with the attributes that :meth:`from_networkx` reads; defaults are left out."""
        import networkx as nx

        graph: nx.DiGraph[str] = nx.DiGraph()
        for variable in self.variables:
            graph.add_node(variable.name, **attributes(variable))
        for arrow in self.arrows:
            graph.add_edge(arrow.cause, arrow.effect, **({"reason": arrow.reason} if arrow.reason else {}))
        return graph

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, CausalGraph):
            return NotImplemented
        return set(self.variables) == set(other.variables) and set(self.arrows) == set(other.arrows)

    def __hash__(self) -> int:
        return hash((frozenset(self.variables), frozenset(self.arrows)))

    def __contains__(self, name: object) -> bool:
        return name in self.numbers

    def __iter__(self) -> Iterator[Variable]:
        return iter(self.variables)

    def __len__(self) -> int:
        return len(self.variables)

    def __getitem__(self, name: str) -> Variable:
        return self.variables[self.number(name)]

    def __repr__(self) -> str:
        return f"CausalGraph({len(self.variables)} variables, {len(self.arrows)} arrows)"

    @cached_property
    def numbers(self) -> Mapping[str, int]:
        """The place of each variable, by name, in ``variables``."""
        return {variable.name: place for place, variable in enumerate(self.variables)}

    def number(self, name: str) -> int:
        """The place of a variable in ``variables``; QuestionError with the nearest name where there is none."""
        try:
            return self.numbers[name]
        except KeyError:
            known = ", ".join(list(self.numbers)[:12]) + (", …" if len(self) > 12 else "")
            remedy = did_you_mean(name, self.numbers, f"The graph has: {known}.")
            message = f"The graph has no variable “{name}”."
            raise QuestionError(Finding("graph-unknown-variable", message, remedy)) from None

    @cached_property
    def _neighbours(self) -> tuple[list[list[int]], list[list[int]]]:
        causes: list[list[int]] = [[] for _ in self.variables]
        effects: list[list[int]] = [[] for _ in self.variables]
        for arrow in self.arrows:
            cause, effect = self.numbers[arrow.cause], self.numbers[arrow.effect]
            causes[effect].append(cause)
            effects[cause].append(effect)
        return causes, effects

    @property
    def causes(self) -> list[list[int]]:
        """For each variable, by place, the places of its direct causes."""
        return self._neighbours[0]

    @property
    def effects(self) -> list[list[int]]:
        """For each variable, by place, the places of its direct effects."""
        return self._neighbours[1]

    @cached_property
    def derived(self) -> dict[str, object]:
        """What floors above have worked out from this graph and keep with it, by a name of theirs."""
        return {}

    def arrow(self, cause: str, effect: str) -> Arrow | None:
        """The arrow from ``cause`` to ``effect``, if there is one."""
        return self._arrows_by_ends.get((cause, effect))

    @cached_property
    def _arrows_by_ends(self) -> dict[tuple[str, str], Arrow]:
        return {(arrow.cause, arrow.effect): arrow for arrow in self.arrows}
