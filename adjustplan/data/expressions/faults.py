"""What is wrong in the plan's ``[data]``, and where: at a key, and within an expression at a character."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from adjustplan.errors import Finding, PlanError, Severity
from adjustplan.files import read_text

if TYPE_CHECKING:
    from adjustplan.plan import Plan
    from adjustplan.plan.places import Key


@dataclass(frozen=True, slots=True)
class Fault:
    """Something wrong in an expression; ``at`` is the place of its character, from 0."""

    code: str
    message: str
    remedy: str
    at: int


@dataclass(frozen=True, slots=True)
class Problem:
    """Something wrong, or worth knowing, about a key of ``[data]``.

    Attributes
    ----------
    code, message, remedy, severity
        As in a finding.
    key : Key
        The key of the plan, such as ``("data", "where", "adult")``.
    expression : str or None
        The expression in which it is wrong, where it is one.
    at : int
        The place in the expression, from 0.
    """

    code: str
    message: str
    remedy: str
    key: Key
    severity: Severity = "error"
    expression: str | None = None
    at: int = 0


Place = Callable[[Problem], Finding]
"""How a problem becomes a finding: with the expression alone, or with its line of the plan."""


def of_expression(fault: Fault, expression: str, key: Key) -> Problem:
    """A fault of the expression that stands at ``key``."""
    return Problem(fault.code, fault.message, fault.remedy, key, expression=expression, at=fault.at)


def alone(problem: Problem) -> Finding:
    """The finding without a plan's file; line and column are those within the expression."""
    told = Finding(problem.code, problem.message, problem.remedy, problem.severity)
    if problem.expression is None:
        return told
    line, column, excerpt = _within(problem.expression, problem.at)
    return Finding(told.code, told.message, told.remedy, told.severity, line=line, column=column, excerpt=excerpt)


def in_plan(plan: Plan) -> Place:
    """Places problems in the plan's file: at the very character, wherever the file has the expression unescaped."""
    lines = read_text(plan.path, PlanError, "plan").splitlines()

    def place(problem: Problem) -> Finding:
        code, message, remedy, severity = problem.code, problem.message, problem.remedy, problem.severity
        file, number = str(plan.path), plan.line(*problem.key)
        if problem.expression is None or number is None:
            return Finding(code, message, remedy, severity, file, number)
        line, column, excerpt = _within(problem.expression, problem.at)
        for further in range(number + line - 2, min(number + line, len(lines))):
            start = lines[further].find("=") + 1 if further == number - 1 else 0
            offset = lines[further].find(excerpt, start)
            if offset >= 0:
                return Finding(code, message, remedy, severity, file, further + 1, offset + column, lines[further])
        return Finding(code, message, remedy, severity, file, number, column, excerpt)

    return place


def _within(expression: str, at: int) -> tuple[int, int, str]:
    """Line and column, from 1, of a character, and the text of that line."""
    before = expression[:at].split("\n")
    return len(before), len(before[-1]) + 1, expression.split("\n")[len(before) - 1]
