"""The causal graph: variables, and arrows from causes to their effects.

An arrow from A to B says: were A set to another value, with everything else that causes B held where it is, B could
change. Just as much is said by every arrow that is *not* drawn. Arrows never run in a circle, so nothing causes
itself, and never point back in time. A variable may be

* ``unmeasured``: it is part of the story but not of the data, so it can never be adjusted for;
* ``restricted``: how people came into the data holds it fixed (selection, restriction, loss to follow-up), so it is
  conditioned on whether one likes it or not.

The rules above are checked once, here, whichever format a graph came from: :func:`faults` lists what breaks them.
"""

from __future__ import annotations

import graphlib
import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

from adjustplan.errors import Finding, GraphError, QuestionError, did_you_mean

if TYPE_CHECKING:
    import networkx as nx


@dataclass(frozen=True, slots=True)
class Variable:
    """One variable of a causal graph.

    Attributes
    ----------
    name : str
        The word the graph, the plan and the commands know it by.
    label : str
        How documents and pictures call it; empty: by its name.
    unmeasured, restricted : bool
        See the head of this module; not both.
    wave : int, optional
        When it is measured; an arrow never points to an earlier wave.
    cost : float
        What measuring it costs, in any unit that is the same for all; finite, 0 or more.
    proxy_of : str
        The variable that it is an imperfect measurement of; empty where it is none.
    """

    name: str
    label: str = ""
    unmeasured: bool = False
    restricted: bool = False
    wave: int | None = None
    cost: float = 1.0
    proxy_of: str = ""

    @property
    def title(self) -> str:
        """The label, or the name where there is none."""
        return self.label or self.name


@dataclass(frozen=True, slots=True)
class Arrow:
    """A direct cause and its effect, with the reason the team gives for it (empty: none given)."""

    cause: str
    effect: str
    reason: str = ""

    def __str__(self) -> str:
        return f"{self.cause} -> {self.effect}"


@dataclass(frozen=True, slots=True)
class Fault:
    """A broken rule of the model and what broke it, so that a reader of files can say where it stands."""

    code: str
    message: str
    remedy: str
    subject: Arrow | Variable | None = None

    def finding(self) -> Finding:
        """The fault as a finding without a place."""
        return Finding(self.code, self.message, self.remedy)


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


def attributes(variable: Variable) -> dict[str, str | bool | int | float]:
    """What is said of a variable beyond its name, by attribute, defaults left out."""
    told: dict[str, str | bool | int | float] = {}
    if variable.label:
        told["label"] = variable.label
    if variable.unmeasured:
        told["unmeasured"] = True
    if variable.restricted:
        told["restricted"] = True
    if variable.wave is not None:
        told["wave"] = variable.wave
    if variable.cost != 1.0:
        told["cost"] = variable.cost
    if variable.proxy_of:
        told["proxy_of"] = variable.proxy_of
    return told


def faults(variables: Iterable[Variable], arrows: Iterable[Arrow]) -> Iterator[Fault]:
    """Everything in which these variables and arrows fail to be a causal graph. Time is linear in their number."""
    by_name: dict[str, Variable] = {}
    for variable in variables:
        yield from _variable_faults(variable)
        if variable.name in by_name:
            yield Fault("graph-variable-twice", f"“{variable.name}” is described twice.", "Keep one.", variable)
        by_name.setdefault(variable.name, variable)
    yield from _proxy_faults(by_name)
    if not by_name:
        yield Fault("graph-empty", "The graph has no variables.", "Write at least one arrow: cause -> effect.")
    drawn: set[tuple[str, str]] = set()
    causes: dict[str, list[str]] = {}
    for arrow in arrows:
        ends = (arrow.cause, arrow.effect)
        if arrow.cause == arrow.effect:
            message = f"“{arrow.cause}” has an arrow to itself."
            remedy = "A variable does not cause itself; give its earlier and its later value each a name."
            yield Fault("graph-self-arrow", message, remedy, arrow)
            continue
        if ends in drawn:
            yield Fault("graph-arrow-twice", f"The arrow {arrow} is there twice.", "Delete one.", arrow)
            continue
        drawn.add(ends)
        causes.setdefault(arrow.effect, []).append(arrow.cause)
        first, second = by_name[arrow.cause].wave, by_name[arrow.effect].wave
        if first is not None and second is not None and first > second:
            message = (
                f"The arrow {arrow} points back in time: “{arrow.cause}” is of wave {first}, "
                f"“{arrow.effect}” of wave {second}."
            )
            yield Fault("graph-back-in-time", message, "Turn the arrow round or mend the waves.", arrow)
    yield from _cycle_fault(list(by_name), causes)


def _variable_faults(variable: Variable) -> Iterator[Fault]:
    if not variable.name.strip():
        yield Fault("graph-empty-name", "A variable has an empty name.", "Give it a name.", variable)
    if variable.unmeasured and variable.restricted:
        message = f"“{variable.name}” is both unmeasured and restricted."
        remedy = "Restricted means held fixed in the data; keep the one that is true."
        yield Fault("graph-unmeasured-restricted", message, remedy, variable)
    if not math.isfinite(variable.cost) or variable.cost < 0:
        message = f"The cost of “{variable.name}” is {variable.cost}."
        yield Fault("graph-bad-cost", message, "A cost is a finite number, 0 or more.", variable)


def _proxy_faults(by_name: Mapping[str, Variable]) -> Iterator[Fault]:
    for variable in by_name.values():
        true = variable.proxy_of
        if true and true == variable.name:
            yield Fault("graph-bad-proxy", f"“{true}” is a proxy of itself.", "Name what it measures.", variable)
        elif true and true not in by_name:
            message = f"“{variable.name}” is a proxy of “{true}”, which is not in the graph."
            yield Fault("graph-bad-proxy", message, did_you_mean(true, by_name, f"Draw “{true}”."), variable)


def _cycle_fault(names: list[str], causes: Mapping[str, list[str]]) -> Iterator[Fault]:
    try:
        graphlib.TopologicalSorter(causes).prepare()
    except graphlib.CycleError as error:
        circle: list[str] = error.args[1][:-1]
        first = min(range(len(circle)), key=lambda place: names.index(circle[place]))
        cycle = circle[first:] + circle[: first + 1]
        shown = " -> ".join(cycle)
        remedy = "Delete or turn one of its arrows, or split a variable by time (two waves, two names)."
        yield Fault("graph-cycle", f"The arrows run in a circle: {shown}.", remedy, Arrow(cycle[0], cycle[1]))
