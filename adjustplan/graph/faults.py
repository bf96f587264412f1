"""The rules that make variables and arrows a causal graph, checked once, whichever format a graph came from.

Arrows never run in a circle, so nothing causes itself, and never point back in time; there is one arrow at most from a
cause to an effect, and a variable is described once.
"""

from __future__ import annotations

import graphlib
import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

from adjustplan.errors import Finding, did_you_mean
from adjustplan.graph.elements import Arrow, Variable


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
    numbers = {name: number for number, name in enumerate(by_name)}
    timed = any(variable.wave is not None for variable in by_name.values())
    drawn: set[int] = set()
    effects: list[list[int]] = [[] for _ in numbers]
    for arrow in arrows:
        cause, effect = numbers[arrow.cause], numbers[arrow.effect]
        both = cause * len(numbers) + effect
        if cause == effect:
            message = f"“{arrow.cause}” has an arrow to itself."
            remedy = "A variable does not cause itself; give its earlier and its later value each a name."
            yield Fault("graph-self-arrow", message, remedy, arrow)
        elif both in drawn:
            yield Fault("graph-arrow-twice", f"The arrow {arrow} is there twice.", "Delete one.", arrow)
        else:
            drawn.add(both)
            effects[cause].append(effect)
            if timed:
                yield from _time_fault(arrow, by_name[arrow.cause].wave, by_name[arrow.effect].wave)
    yield from _cycle_fault(list(by_name), effects)


def _time_fault(arrow: Arrow, first: int | None, second: int | None) -> Iterator[Fault]:
    if first is not None and second is not None and first > second:
        waves = f"“{arrow.cause}” is of wave {first}, “{arrow.effect}” of wave {second}"
        message = f"The arrow {arrow} points back in time: {waves}."
        yield Fault("graph-back-in-time", message, "Turn the arrow round or mend the waves.", arrow)


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


def _cycle_fault(names: list[str], effects: list[list[int]]) -> Iterator[Fault]:
    """A circle of arrows, if there is one: what is left when causes are taken away before their effects (Kahn 1962)."""
    awaited = [0] * len(names)
    for ends in effects:
        for effect in ends:
            awaited[effect] += 1
    free = [number for number, count in enumerate(awaited) if not count]
    for number in free:  # grows while it is walked through
        for effect in effects[number]:
            awaited[effect] -= 1
            if not awaited[effect]:
                free.append(effect)
    if len(free) == len(names):
        return
    left: dict[int, list[int]] = {}
    for number, ends in enumerate(effects):
        for effect in ends if awaited[number] else ():
            left.setdefault(effect, []).append(number)
    try:
        graphlib.TopologicalSorter(left).prepare()
    except graphlib.CycleError as error:
        circle: list[int] = error.args[1][:-1]
        first = circle.index(min(circle))
        cycle = [names[number] for number in (*circle[first:], *circle[: first + 1])]
        remedy = "Delete or turn one of its arrows, or split a variable by time (two waves, two names)."
        message = f"The arrows run in a circle: {' -> '.join(cycle)}."
        yield Fault("graph-cycle", message, remedy, Arrow(cycle[0], cycle[1]))
