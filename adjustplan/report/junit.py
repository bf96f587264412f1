"""A check as JUnit XML, which CI services show as a table of tests.

A plan is a test suite and a rule is a test, so that the table shows which rules a plan keeps and not only which it
breaks. A rule whose findings fail the check is a failed test: one failure, with all its findings in it, for some
services read no more than the first. Findings that do not fail it (notes, and warnings unless the check is strict) are
the output of a test that passed. A waived rule is a skipped test with the waiver's reason. A plan that cannot be read
is an error of the test ``reading``, and its rules are skipped.

What is written keeps to the schema that Jenkins publishes for JUnit XML.
"""

from __future__ import annotations

from collections.abc import Sequence
from xml.etree import ElementTree as ET

from adjustplan.check import RULES, CheckReport, PlanReport
from adjustplan.errors import Finding
from adjustplan.report.findings import finding_line, said, visible

READING = "reading"


def as_junit(report: CheckReport) -> str:
    """The report as JUnit XML."""
    root = ET.Element("testsuites", name="adjustplan")
    root.extend(_suite(plan, strict=report.strict) for plan in report.plans)
    for count in ("tests", "failures", "errors"):
        root.set(count, str(sum(int(suite.get(count, "0")) for suite in root)))
    ET.indent(root)
    return f'<?xml version="1.0" encoding="UTF-8"?>\n{ET.tostring(root, encoding="unicode")}\n'


def _suite(plan: PlanReport, *, strict: bool) -> ET.Element:
    name = visible(plan.path.as_posix())
    suite = ET.Element("testsuite", name=name)
    if plan.read:
        suite.append(_case(name, READING))
        suite.extend(_rule_case(plan, name, code, strict=strict) for code in _codes(plan))
    else:
        case = _case(name, READING, plan.findings)
        _add(case, "error", said(plan.findings[0]), plan.findings)
        suite.append(case)
        for code in RULES:
            skipped = _case(name, code)
            ET.SubElement(skipped, "skipped", message="The plan cannot be read.")
            suite.append(skipped)
    suite.set("tests", str(len(suite)))
    for count, tag in (("failures", "failure"), ("errors", "error"), ("skipped", "skipped")):
        suite.set(count, str(len(suite.findall(f"testcase/{tag}"))))
    return suite


def _codes(plan: PlanReport) -> list[str]:
    """The tests of a plan: every rule, and what was found besides."""
    return list(dict.fromkeys([*RULES, *(finding.code for finding in plan.findings)]))


def _rule_case(plan: PlanReport, name: str, code: str, *, strict: bool) -> ET.Element:
    found = [finding for finding in plan.findings if finding.code == code]
    waived = [waived for waived in plan.waived if waived.finding.code == code]
    failing = [finding for finding in found if finding.severity in (("error", "warning") if strict else ("error",))]
    told = [finding for finding in found if finding not in failing]
    case = _case(name, code, found or [waived.finding for waived in waived])
    if failing:
        more = f" ({len(failing)} findings)" if len(failing) > 1 else ""
        _add(case, "failure", said(failing[0]) + more, failing)
    elif waived:
        ET.SubElement(case, "skipped", message=visible(f"Waived: {waived[0].reason}"))
        told += [waived.finding for waived in waived]
    if told:
        ET.SubElement(case, "system-out").text = _lines(told)
    return case


def _case(suite: str, name: str, findings: Sequence[Finding] = ()) -> ET.Element:
    """A test, placed where the first of its findings stands."""
    case = ET.Element("testcase", classname=suite, name=name)
    if findings and findings[0].file is not None:
        case.set("file", visible(findings[0].file))
        if findings[0].line is not None:
            case.set("line", str(findings[0].line))
    return case


def _add(case: ET.Element, tag: str, message: str, findings: Sequence[Finding]) -> None:
    outcome = ET.SubElement(case, tag, message=message, type=findings[0].code)
    outcome.text = _lines(findings)


def _lines(findings: Sequence[Finding]) -> str:
    return "\n".join(map(finding_line, findings))
