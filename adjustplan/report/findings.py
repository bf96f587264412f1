"""What a check found, written out: as text for people, as JSON for programs, as JUnit XML and SARIF for CI services.

All four say the same, and the same report always gives the same bytes. Text has one line for a finding, beginning with
``file:line:`` as editors and terminals know it, under the plan that it belongs to.
"""

from __future__ import annotations

import json
import re
from collections import Counter
from collections.abc import Callable, Iterator, Mapping
from types import MappingProxyType
from typing import Literal

from adjustplan.check import CheckReport, PlanReport
from adjustplan.errors import Finding

CheckForm = Literal["text", "json", "junit", "sarif"]
Paint = Callable[[str, str], str]
"""Gives a text in the colour of a severity, or as it is."""

_NOT_TEXT = re.compile(r"[^\t\n\r\x20-\x7e\xa0-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def write_report(report: CheckReport, form: CheckForm) -> str:
    """The report in one of its forms, ending in a line break; JSON holds the crosswalk too."""
    from adjustplan.report.junit import as_junit
    from adjustplan.report.sarif import as_sarif

    forms: Mapping[str, Callable[[CheckReport], str]] = MappingProxyType(
        {"text": as_text, "json": as_json, "junit": as_junit, "sarif": as_sarif}
    )
    return forms[form](report)


def as_json(report: CheckReport) -> str:
    """The report as JSON."""
    return visible(json.dumps(report.to_dict(), ensure_ascii=False, indent=2, allow_nan=False)) + "\n"


def as_text(report: CheckReport, paint: Paint = lambda text, _severity: text) -> str:
    """The report as text: each plan with its findings, what is waived and why, the counts, and whether it passed."""
    lines = [line for plan in report.plans for line in (*_plan_lines(plan, paint), "")]
    verdict = "passed" if report.passed else "failed"
    painted = paint(verdict, "passed" if report.passed else "error")
    return "\n".join([*lines, f"{painted}: {summary(report)}"]) + "\n"


def crosswalk_as_text(report: CheckReport) -> str:
    """The published recommendations held against each plan: met, not met or not checkable, and where."""
    lines = []
    for plan in report.plans:
        lines.append(f"{one_line(str(plan.path))}: published recommendations")
        for item in plan.crosswalk:
            place = f" (line {item.line})" if item.line else ""
            lines.append(
                f"  {item.status}: {item.source}, {item.number}. {one_line(f'{item.words} {item.remark}')}{place}"
            )
        lines.append("")
    return "\n".join(lines) + "\n"


def summary(report: CheckReport) -> str:
    """How many plans, and how many findings of each severity, in a sentence."""
    found = Counter(finding.severity for finding in report.findings)
    waived = sum(len(plan.waived) for plan in report.plans)
    counts = [
        _number(found["error"], "error"),
        _number(found["warning"], "warning"),
        _number(found["note"], "note"),
        *([f"{waived} waived"] if waived else []),
    ]
    strict = " Warnings fail a strict check." if report.strict and found["warning"] else ""
    return f"{_number(len(report.plans), 'plan')}, {', '.join(counts)}.{strict}"


def finding_line(finding: Finding) -> str:
    """A finding on one line: ``file:line: severity: message remedy [code]``."""
    place = f"{one_line(finding.place)}: " if finding.place else ""
    return f"{place}{finding.severity}: {said(finding)} [{finding.code}]"


def said(finding: Finding) -> str:
    """What a finding says, message and remedy, on one line."""
    return one_line(f"{finding.message} {finding.remedy}")


def one_line(text: str) -> str:
    """A text without line breaks, tabs and signs that are none."""
    return visible(" ".join(text.split()))


def visible(text: str) -> str:
    """A text in which every sign that no XML 1.0 file may hold, or that steers a terminal, is a replacement sign.

    Such signs come in through quoted names in a graph and through names of files.
    """
    return _NOT_TEXT.sub("\N{REPLACEMENT CHARACTER}", text)


def _plan_lines(plan: PlanReport, paint: Paint) -> Iterator[str]:
    yield one_line(f"{plan.path.as_posix()}: {plan.title}" if plan.read else f"{plan.path.as_posix()} cannot be read")
    for finding in plan.findings:
        word = f"{finding.severity}: "
        before, _, after = finding_line(finding).partition(word)
        yield f"{before}{paint(word, finding.severity)}{after}"
        yield from _excerpt(finding)
    for waived in plan.waived:
        yield f"{finding_line(waived.finding)} waived: {one_line(waived.reason)}"
    if not plan.findings and not plan.waived:
        yield "nothing found"


def _excerpt(finding: Finding) -> Iterator[str]:
    """The line of the file, with a mark under the column."""
    if finding.excerpt is None:
        return
    yield f"    {visible(finding.excerpt)}"
    if finding.column is not None:
        before = finding.excerpt[: finding.column - 1]
        yield "    " + "".join("\t" if letter == "\t" else " " for letter in before) + "^"


def _number(count: int, word: str) -> str:
    return f"{count} {word}" if count == 1 else f"{count} {word}s"
