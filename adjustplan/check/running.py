"""Running the rules: from plan files to findings, waivers applied.

A plan that cannot be read gives its reader's findings, so that one broken plan does not hide what the others have.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from adjustplan.check.crosswalk import Item, crosswalk
from adjustplan.check.registry import RULES, Rule
from adjustplan.check.subject import Subject
from adjustplan.errors import AdjustplanError, Finding, did_you_mean
from adjustplan.plan import Plan, read_plan


@dataclass(frozen=True, slots=True)
class Waived:
    """A finding that the plan waives, with the plan's reason."""

    finding: Finding
    reason: str


@dataclass(frozen=True)
class PlanReport:
    """What the rules find in one plan.

    Attributes
    ----------
    path : Path
    title : str
        The study's title; the file's name where it could not be read.
    findings : tuple of Finding
        By severity, then place.
    waived : tuple of Waived
    crosswalk : tuple of Item
        Published recommendations held against the plan; empty where it could not be read.
    read : bool
        Whether the plan and its graph could be read.
    """

    path: Path
    title: str
    findings: tuple[Finding, ...]
    waived: tuple[Waived, ...] = ()
    crosswalk: tuple[Item, ...] = ()
    read: bool = True


@dataclass(frozen=True)
class CheckReport:
    """What the rules find in several plans; with ``strict``, warnings count as errors do."""

    plans: tuple[PlanReport, ...]
    strict: bool = False

    @property
    def findings(self) -> tuple[Finding, ...]:
        """All findings."""
        return tuple(finding for plan in self.plans for finding in plan.findings)

    @property
    def passed(self) -> bool:
        """Whether no finding fails the check."""
        failing = {"error", "warning"} if self.strict else {"error"}
        return not any(finding.severity in failing for finding in self.findings)

    @property
    def readable(self) -> bool:
        """Whether every plan could be read."""
        return all(plan.read for plan in self.plans)

    def to_dict(self) -> dict[str, Any]:
        """The report as JSON has it."""
        return {
            "passed": self.passed,
            "strict": self.strict,
            "plans": [str(plan.path) for plan in self.plans],
            "findings": [finding.to_dict() for finding in self.findings],
            "waived": [
                {**waived.finding.to_dict(), "reason": waived.reason} for plan in self.plans for waived in plan.waived
            ],
            "crosswalk": [item.to_dict(plan.path) for plan in self.plans for item in plan.crosswalk],
        }


def check(paths: Iterable[str | Path], *, strict: bool = False) -> CheckReport:
    """Run every rule on plans.

    Parameters
    ----------
    paths : iterable of str or Path
        Plan files.
    strict : bool
        Whether warnings fail the check too.
    """
    return CheckReport(tuple(check_plan(Path(path)) for path in paths), strict)


def check_plan(path: Path) -> PlanReport:
    """Run every rule on one plan."""
    try:
        plan = read_plan(path)
    except AdjustplanError as error:
        return PlanReport(path, path.name, error.findings, read=False)
    subject = Subject(plan)
    found = [finding for rule in RULES.values() for finding in _run(rule, subject)]
    reasons = {waiver.rule: waiver.reason for waiver in plan.file.waiver if not _unwaivable(waiver.rule)}
    found += _bad_waivers(plan)
    kept = [finding for finding in found if finding.code not in reasons]
    waived = [Waived(finding, reasons[finding.code]) for finding in found if finding.code in reasons]
    return PlanReport(path, plan.title, tuple(sorted(kept, key=_order)), tuple(waived), tuple(crosswalk(subject)))


def _run(rule: Rule, subject: Subject) -> Iterator[Finding]:
    for finding in rule.decide(subject):
        yield replace(finding, code=rule.code, severity=rule.severity)


def _unwaivable(code: str) -> bool:
    """Whether a rule guards the record itself, so that a plan cannot talk itself out of it."""
    return code in RULES and RULES[code].family == "registration" and RULES[code].severity == "error"


def _bad_waivers(plan: Plan) -> Iterator[Finding]:
    for place, waiver in enumerate(plan.file.waiver):
        line = plan.line("waiver", place, "rule")
        if waiver.rule not in RULES:
            message = f"There is no rule “{waiver.rule}” to waive."
            remedy = did_you_mean(waiver.rule, RULES, "Name a rule's code.")
            yield Finding("plan-unknown-rule", message, remedy, file=str(plan.path), line=line)
        elif _unwaivable(waiver.rule):
            message = f"“{waiver.rule}” cannot be waived: it guards the record itself."
            remedy = "Record the change with “adjustplan amend”."
            yield Finding("plan-unwaivable", message, remedy, file=str(plan.path), line=line)


def _order(finding: Finding) -> tuple[int, str, int, str]:
    severity = ("error", "warning", "note").index(finding.severity)
    return severity, finding.file or "", finding.line or 0, finding.code
