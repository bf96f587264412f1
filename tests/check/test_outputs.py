"""A report as text, JSON, JUnit XML and SARIF: each says the same, and keeps to the published schema of its format."""

from __future__ import annotations

import json
from collections import Counter
from pathlib import Path
from typing import Any, get_args

import jsonschema
import pytest
import xmlschema
from hypothesis import given, settings
from hypothesis import strategies as st
from junitparser import Error, Failure, JUnitXml, Skipped

from adjustplan.check import RULES, CheckReport, PlanReport, Waived, check
from adjustplan.errors import Finding
from adjustplan.report.findings import CheckForm, one_line, write_report
from adjustplan.report.sarif import relative_uri

SCHEMAS = Path(__file__).parent / "schemas"
SARIF = json.loads((SCHEMAS / "sarif-schema-2.1.0.json").read_text(encoding="utf-8"))
JUNIT = xmlschema.XMLSchema(SCHEMAS / "junit-10.xsd")

GRAPH = """\
income -> damp
income -> asthma : the poor are iller
damp -> asthma : moulds
damp, asthma -> doctor
"""
SOUND = """\
title = "Damp homes and asthma"
graph = "damp.edges"

[question]
exposure = "damp"
outcome = "asthma"

[study]
design = "cohort"

[adjustment]
set = ["income"]
rationale = "Income decides who lives where."
"""
FAILING = SOUND.replace('["income"]', '["income", "doctor"]')
WAIVING = SOUND + '\n[[waiver]]\nrule = "graph-reason"\nreason = "Draft <1>, & not final."\n'
BROKEN = SOUND.replace("title =", "titel =").replace("[study]", "[sturdy]")
PLANS = {"sound.toml": SOUND, "failing.toml": FAILING, "waiving.toml": WAIVING, "broken.toml": BROKEN}


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    Path("plans").mkdir()
    Path("plans/damp.edges").write_text(GRAPH, encoding="utf-8")
    for name, text in PLANS.items():
        Path("plans", name).write_text(text, encoding="utf-8")
    return tmp_path


def report_on(*names: str, strict: bool = False) -> CheckReport:
    return check([Path("plans", name) for name in names], strict=strict)


@pytest.fixture
def whole(folder: Path) -> CheckReport:
    """All four plans, checked."""
    assert folder.exists()
    return report_on(*PLANS)


def log_of(report: CheckReport) -> Any:
    log = json.loads(write_report(report, "sarif"))
    jsonschema.Draft4Validator(SARIF).validate(log)
    return log["runs"][0]


def suites_of(report: CheckReport) -> dict[str, Any]:
    text = write_report(report, "junit")
    JUNIT.validate(text)
    return {suite.name: suite for suite in JUnitXml.fromstring(text.encode())}


def case_of(suite: Any, name: str) -> Any:
    return next(case for case in suite if case.name == name)


@pytest.mark.parametrize("form", get_args(CheckForm))
def test_the_same_report_gives_the_same_text(folder: Path, form: CheckForm) -> None:
    assert folder.exists()
    assert write_report(report_on(*PLANS), form) == write_report(report_on(*PLANS), form)


@pytest.mark.parametrize("form", get_args(CheckForm))
def test_every_form_names_every_finding(whole: CheckReport, form: CheckForm) -> None:
    text = write_report(whole, form)
    assert len(whole.findings) > 5
    for finding in whole.findings:
        assert finding.code in text


def test_json_is_the_report(whole: CheckReport) -> None:
    assert json.loads(write_report(whole, "json")) == json.loads(json.dumps(whole.to_dict()))


def test_text_has_place_severity_message_remedy_and_code_on_a_line(whole: CheckReport) -> None:
    lines = write_report(whole, "text").splitlines()
    for finding in whole.findings:
        said = f"{finding.place}: {finding.severity}: {finding.message} {finding.remedy} [{finding.code}]"
        assert said in lines
    assert any(line.startswith("plans/failing.toml:12: error: ") for line in lines)


def test_text_groups_findings_by_plan_and_counts_them(whole: CheckReport) -> None:
    text = write_report(whole, "text")
    blocks = text.split("\n\n")
    assert len(blocks) == len(PLANS) + 1
    for block, plan in zip(blocks, whole.plans, strict=False):
        assert block.startswith(str(plan.path))
    counts = Counter(finding.severity for finding in whole.findings)
    assert blocks[-1].startswith("failed: 4 plans, ")
    assert f"{counts['error']} errors" in blocks[-1]
    assert f"{counts['warning']} warnings" in blocks[-1]
    assert "1 waived" in blocks[-1]


def test_text_gives_the_reason_of_a_waiver_and_says_passed(folder: Path) -> None:
    assert folder.exists()
    text = write_report(report_on("waiving.toml", strict=True), "text")
    assert "waived: Draft <1>, & not final." in text
    assert text.splitlines()[-1].startswith("passed: 1 plan, 0 errors, 0 warnings")


def test_text_shows_the_line_and_marks_the_column(folder: Path) -> None:
    (folder / "plans" / "damp.edges").write_text("income -> damp\ndamp => asthma\n", encoding="utf-8")
    lines = write_report(report_on("sound.toml"), "text").splitlines()
    place = next(number for number, line in enumerate(lines) if line.startswith("plans/damp.edges:2:6: error: "))
    assert lines[place + 1 : place + 3] == ["    damp => asthma", "         ^"]


def test_a_strict_check_fails_on_warnings_and_says_so(folder: Path) -> None:
    assert folder.exists()
    assert write_report(report_on("sound.toml"), "text").splitlines()[-1].startswith("passed")
    last = write_report(report_on("sound.toml", strict=True), "text").splitlines()[-1]
    assert last.startswith("failed")
    assert "Warnings fail a strict check." in last


# JUnit XML


def test_junit_has_a_suite_for_each_plan_and_a_case_for_each_rule(whole: CheckReport) -> None:
    suites = suites_of(whole)
    assert list(suites) == [f"plans/{name}" for name in PLANS]
    for suite in suites.values():
        names = [case.name for case in suite]
        assert names[0] == "reading"
        assert set(RULES) <= set(names)
        assert len(names) == len(set(names)) == suite.tests


@pytest.mark.parametrize("strict", [False, True])
def test_junit_fails_exactly_when_the_check_does(folder: Path, strict: bool) -> None:
    assert folder.exists()
    for name in PLANS:
        report = report_on(name, strict=strict)
        suite = suites_of(report)[f"plans/{name}"]
        assert (suite.failures + suite.errors == 0) == report.passed
        worst = [type(result) for case in suite for result in case.result]
        assert suite.failures == worst.count(Failure)
        assert suite.errors == worst.count(Error)
        assert suite.skipped == worst.count(Skipped)


def test_junit_fails_the_rule_that_the_plan_breaks_and_passes_the_others(whole: CheckReport) -> None:
    suite = suites_of(whole)["plans/failing.toml"]
    broken = {finding.code for finding in whole.plans[1].findings if finding.severity == "error"}
    assert broken
    assert {case.name for case in suite if any(isinstance(result, Failure) for result in case.result)} == broken
    case = case_of(suite, min(broken))
    finding = next(finding for finding in whole.plans[1].findings if finding.code == case.name)
    assert finding.message in case.result[0].message
    assert case.result[0].type == finding.code
    assert f"{finding.file}:{finding.line}" in case.result[0].text


def test_junit_shows_a_warning_without_failing_unless_strict(folder: Path) -> None:
    assert folder.exists()
    lenient = case_of(suites_of(report_on("sound.toml"))["plans/sound.toml"], "graph-reason")
    strict = case_of(suites_of(report_on("sound.toml", strict=True))["plans/sound.toml"], "graph-reason")
    assert lenient.is_passed
    assert "warning: " in lenient.system_out
    assert not strict.is_passed


def test_junit_skips_what_is_waived_with_the_reason(whole: CheckReport) -> None:
    case = case_of(suites_of(whole)["plans/waiving.toml"], "graph-reason")
    assert isinstance(case.result[0], Skipped)
    assert case.result[0].message == "Waived: Draft <1>, & not final."


def test_junit_says_that_a_plan_cannot_be_read(whole: CheckReport) -> None:
    suite = suites_of(whole)["plans/broken.toml"]
    case = case_of(suite, "reading")
    assert isinstance(case.result[0], Error)
    assert "sturdy" in case.result[0].text
    assert suite.errors == 1
    assert suite.skipped == len(RULES)


def test_the_schema_of_junit_refuses_what_is_none() -> None:
    assert not JUNIT.is_valid("<testsuites><testsuite name='a'><testcase/></testsuite></testsuites>")


# SARIF


def test_sarif_lists_every_rule_with_its_explanation(whole: CheckReport) -> None:
    rules = {rule["id"]: rule for rule in log_of(whole)["tool"]["driver"]["rules"]}
    for code, rule in RULES.items():
        assert rules[code]["help"]["text"] == rule.explanation()
        assert rules[code]["defaultConfiguration"]["level"] == rule.severity


def test_sarif_results_point_to_rules_files_and_lines(whole: CheckReport) -> None:
    run = log_of(whole)
    ids = [rule["id"] for rule in run["tool"]["driver"]["rules"]]
    told = [result for result in run["results"] if "suppressions" not in result]
    assert len(told) == len(whole.findings)
    for result, finding in zip(told, whole.findings, strict=True):
        assert ids[result["ruleIndex"]] == result["ruleId"] == finding.code
        assert result["level"] == finding.severity
        place = result["locations"][0]["physicalLocation"]
        assert place["artifactLocation"]["uri"] == finding.file
        assert place.get("region", {}).get("startLine") == finding.line
        assert finding.message in result["message"]["text"]


def test_sarif_suppresses_what_is_waived_with_the_reason(whole: CheckReport) -> None:
    waived = [result for result in log_of(whole)["results"] if "suppressions" in result]
    assert [result["ruleId"] for result in waived] == ["graph-reason"]
    assert waived[0]["suppressions"][0]["justification"] == "Draft <1>, & not final."


def test_sarif_says_whether_every_plan_could_be_read(folder: Path) -> None:
    assert folder.exists()
    assert log_of(report_on("failing.toml"))["invocations"][0]["executionSuccessful"] is True
    assert log_of(report_on("broken.toml"))["invocations"][0]["executionSuccessful"] is False


def test_a_fingerprint_stays_when_lines_move_and_changes_with_the_finding(folder: Path) -> None:
    def prints() -> list[str]:
        return [result["partialFingerprints"]["finding/v1"] for result in log_of(report_on("failing.toml"))["results"]]

    before = prints()
    plan = folder / "plans" / "failing.toml"
    plan.write_text(f"# a comment\n\n{FAILING}", encoding="utf-8")
    assert prints() == before
    assert len(set(before)) == len(before)


def test_files_are_named_relative_to_the_current_folder(folder: Path) -> None:
    assert relative_uri(str(folder / "plans" / "a.toml")) == "plans/a.toml"
    assert relative_uri("plans/../graphs/ä b#.edges") == "graphs/%C3%A4%20b%23.edges"  # RFC 3986, UTF-8
    assert relative_uri("a:b.toml") == "a%3Ab.toml"


def test_the_schema_of_sarif_refuses_what_is_none(folder: Path) -> None:
    assert folder.exists()
    log = json.loads(write_report(report_on("failing.toml"), "sarif"))
    log["runs"][0]["results"][0]["level"] = "fatal"
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.Draft4Validator(SARIF).validate(log)


# whatever a finding holds

ODD = st.text(st.characters(codec=None), max_size=20)
FINDINGS = st.builds(
    Finding,
    code=st.sampled_from([*RULES, "plan-bad-value", "never-heard-of"]),
    message=ODD.map(lambda text: f"It is {text}"),
    remedy=ODD,
    severity=st.sampled_from(["error", "warning", "note"]),
    file=st.none() | ODD.filter(lambda text: "\0" not in text).map(lambda text: f"plans/{text}.toml"),
    line=st.none() | st.integers(1, 99),
    column=st.none(),
    excerpt=st.none() | ODD,
)


@settings(max_examples=60)
@given(st.lists(FINDINGS, min_size=1, max_size=3), st.lists(FINDINGS, max_size=2), ODD, st.booleans(), st.booleans())
def test_no_text_in_a_finding_breaks_a_format(
    found: list[Finding], waived: list[Finding], reason: str, read: bool, strict: bool
) -> None:
    plan = PlanReport(Path("plan.toml"), reason, tuple(found), tuple(Waived(f, reason) for f in waived), read=read)
    report = CheckReport((plan,), strict)
    assert len(log_of(report)["results"]) == len(found) + len(waived)
    suite = suites_of(report)["plan.toml"]
    if read:
        assert (suite.failures == 0) == report.passed
    text = write_report(report, "text")
    json.loads(write_report(report, "json"))
    assert text.encode("utf-8")
    assert "\x1b" not in text
    assert all(one_line(finding.message) in text for finding in found)
