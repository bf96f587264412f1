"""A check as SARIF 2.1.0 (OASIS), which code hosts show beside the lines it speaks of.

Every rule is listed with its explanation, whether it found something or not. Files are named relative to the folder the
check runs in, which in CI is the repository. A waiver is a suppression with its reason. Each result has a fingerprint
of rule, file and message but not of the line, so that a service knows it again after lines above it have moved.
"""

from __future__ import annotations

import hashlib
import json
import os
from pathlib import Path
from typing import Any
from urllib.parse import quote

from adjustplan import __version__
from adjustplan.check import RULES, CheckReport, Rule
from adjustplan.check.explaining import explain
from adjustplan.check.reader_codes import READER_CODES
from adjustplan.errors import Finding
from adjustplan.report.findings import one_line, said, visible

SCHEMA = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json"


def as_sarif(report: CheckReport) -> str:
    """The report as a SARIF log of one run."""
    found = [(finding, None) for finding in report.findings]
    waived = [(waived.finding, waived.reason) for plan in report.plans for waived in plan.waived]
    every: list[tuple[Finding, str | None]] = [*found, *waived]
    others = sorted({finding.code for finding, _ in every} - RULES.keys())
    places = {code: place for place, code in enumerate([*RULES, *others])}
    driver = {
        "name": "adjustplan",
        "semanticVersion": __version__,
        "rules": [*map(_rule, RULES.values()), *map(_other_code, others)],
    }
    run = {
        "tool": {"driver": driver},
        "columnKind": "unicodeCodePoints",
        "invocations": [{"executionSuccessful": report.readable}],
        "results": [_result(finding, places[finding.code], reason) for finding, reason in every],
        "properties": {"passed": report.passed, "strict": report.strict},
    }
    log = {"$schema": SCHEMA, "version": "2.1.0", "runs": [run]}
    return visible(json.dumps(log, ensure_ascii=False, indent=2, allow_nan=False)) + "\n"


def _rule(rule: Rule) -> dict[str, Any]:
    return {
        "id": rule.code,
        "shortDescription": {"text": rule.finds},
        "fullDescription": {"text": f"{rule.finds} {rule.matters}"},
        "help": {"text": rule.explanation()},
        "defaultConfiguration": {"level": rule.severity},
        "properties": {"tags": [rule.family], "source": rule.source},
    }


def _other_code(code: str) -> dict[str, Any]:
    """What a reader finds, which no rule has."""
    if code not in READER_CODES:
        return {"id": code}
    told = explain(code)
    return {
        "id": code,
        "shortDescription": {"text": told.summary},
        "fullDescription": {"text": told.text},
        "help": {"text": told.text},
        "defaultConfiguration": {"level": "error"},
        "properties": {"tags": [told.family]},
    }


def _result(finding: Finding, place: int, reason: str | None) -> dict[str, Any]:
    result: dict[str, Any] = {
        "ruleId": finding.code,
        "ruleIndex": place,
        "level": finding.severity,
        "message": {"text": said(finding)},
        "locations": [_location(finding)] if finding.file is not None else [],
        "partialFingerprints": {"finding/v1": _fingerprint(finding)},
    }
    if reason is not None:
        accepted = {"kind": "inSource", "status": "accepted", "justification": one_line(reason)}
        result["suppressions"] = [accepted]
    return result


def _location(finding: Finding) -> dict[str, Any]:
    physical: dict[str, Any] = {"artifactLocation": {"uri": relative_uri(finding.file or "")}}
    if finding.line is not None:
        region: dict[str, Any] = {"startLine": finding.line}
        if finding.column is not None:
            region["startColumn"] = finding.column
        if finding.excerpt is not None:
            region["snippet"] = {"text": finding.excerpt}
        physical["region"] = region
    return {"physicalLocation": physical}


def relative_uri(file: str) -> str:
    """A file as a URI relative to the current folder; absolute where it is on another drive."""
    try:
        path = os.path.relpath(file)
    except ValueError:
        return Path(file).as_uri()
    name = Path(path).as_posix()
    try:
        return quote(os.fsencode(name))
    except UnicodeEncodeError:  # no file on this system can have such a name
        return quote(name.encode("utf-8", "replace"))


def _fingerprint(finding: Finding) -> str:
    told = "\n".join((finding.code, relative_uri(finding.file or "."), finding.message))
    return hashlib.sha256(told.encode("utf-8", errors="surrogatepass")).hexdigest()[:32]
