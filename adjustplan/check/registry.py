"""The rules: each a small function from a plan to findings, registered under its code with what it finds and why.

A code's first word is the rule's subject. What ``adjustplan explain`` prints stands beside the rule, so that a rule is
one place: its code, its severity, its explanation, its source, and the function that decides.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Literal, get_args

from adjustplan.check.subject import Subject
from adjustplan.errors import Finding, PlanError, Severity, did_you_mean

Family = Literal["graph", "study", "adjustment", "model", "data", "registration", "reporting"]
Decide = Callable[[Subject], Iterator[Finding]]


@dataclass(frozen=True, slots=True)
class Rule:
    """A rule and its explanation.

    Attributes
    ----------
    code : str
        Stable name; its first word is the family.
    severity : {"error", "warning", "note"}
        Of its findings.
    finds, matters, mend : str
        What it finds, why that matters, how to mend it: a sentence or two each.
    source : str
        A publication, or "Common practice." where there is none.
    decide : callable
        From a subject to findings of this code.
    """

    code: str
    severity: Severity
    finds: str
    matters: str
    mend: str
    source: str
    decide: Decide

    @property
    def family(self) -> str:
        """The subject, which is the first word of the code."""
        return self.code.split("-")[0]

    def explanation(self) -> str:
        """One paragraph: what it finds, why it matters, how to mend it, and the source."""
        return f"{self.finds} {self.matters} {self.mend} Source: {self.source}"


RULES: dict[str, Rule] = {}


def rule(
    code: str, severity: Severity, *, finds: str, matters: str, mend: str, source: str = "Common practice."
) -> Callable[[Decide], Decide]:
    """Register the function below as the rule ``code``. It makes its findings with ``subject.finding``."""
    if code in RULES or code.split("-")[0] not in get_args(Family):
        raise ValueError(f"{code} is no code for a new rule")

    def register(decide: Decide) -> Decide:
        RULES[code] = Rule(code, severity, finds, matters, mend, source, decide)
        return decide

    return register


def rule_named(code: str) -> Rule:
    """The rule of a code; PlanError with the nearest code where there is none."""
    if code not in RULES:
        remedy = did_you_mean(code, RULES, "“adjustplan explain” without a code lists them all.")
        raise PlanError(Finding("check-unknown-rule", f"There is no rule “{code}”.", remedy))
    return RULES[code]
