"""What in ``[stress]`` does not fit the rest of the plan."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator

from adjustplan.errors import Finding, did_you_mean
from adjustplan.plan import Plan
from adjustplan.plan.stress_schema import Stress
from adjustplan.study import Measure

_CONFOUNDERS = ("confounder", "binary_confounder", "linear_confounder")
_LISTS = (*_CONFOUNDERS, "misclassified_exposure", "misclassified_outcome", "selection")


def faults(plan: Plan, assumed: Stress, measure: Measure, *, is_ratio: bool) -> Iterator[Finding]:
    """Everything that has to be mended before the estimate can be stressed."""
    members = plan.adjustment.members
    for name in assumed.yardsticks or ():
        if name not in members:
            message = f"The yardstick “{name}” is not in the planned set, so it cannot be left out of it."
            remedy = did_you_mean(name, members, "Name members of [adjustment] set.")
            yield _at(plan, "stress-yardstick", message, remedy, "yardsticks")
    value = assumed.target
    if value is not None and is_ratio and value <= 0:
        message = f"A {measure} cannot truly be {value:g}."
        yield _at(plan, "stress-target", message, "Give a ratio above 0.", "target")
    if value is not None and measure in ("risk difference", "prevalence difference") and not -1 < value < 1:
        message = f"A {measure} cannot truly be {value:g}."
        yield _at(plan, "stress-target", message, "Give a difference between -1 and 1.", "target")
    for kind in _LISTS:
        yield from _of_list(plan, assumed, kind)


def _of_list(plan: Plan, assumed: Stress, kind: str) -> Iterator[Finding]:
    names = [each.name for each in getattr(assumed, kind)]
    for name, times in Counter(names).items():
        if times > 1:
            message = f"stress.{kind} has “{name}” {times} times, and their results could not be told apart."
            again = names.index(name, names.index(name) + 1)
            yield _at(plan, "stress-name-twice", message, "Give each its own name.", kind, again, "name")
    if kind not in _CONFOUNDERS:
        return
    question = plan.question
    measured = {variable.name for variable in plan.graph if not variable.unmeasured}
    for place, name in enumerate(names):
        key = (kind, place, "name")
        if name in (question.exposure, question.outcome):
            message = f"“{name}” is the {'exposure' if name == question.exposure else 'outcome'} and confounds nothing."
            yield _at(plan, "stress-confounder", message, "Name an unmeasured variable.", *key)
        elif name in plan.adjustment.members:
            message = f"“{name}” is in the planned set, so it is no unmeasured confounder."
            yield _at(plan, "stress-confounder", message, "Take it out here, or use it in yardsticks.", *key)
        elif name in measured:
            message = f"“{name}” is measured according to the graph, so it need not be assumed."
            remedy = "Adjust for it, write “unmeasured” at it in the graph, or take it out here."
            yield _at(plan, "stress-confounder", message, remedy, *key)


def _at(plan: Plan, code: str, message: str, remedy: str, *key: str | int) -> Finding:
    return Finding(code, message, remedy, file=str(plan.path), line=plan.line("stress", *key))
