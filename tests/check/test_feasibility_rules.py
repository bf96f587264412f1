"""The rules on the size of a study: they speak where the plan states the numbers, with the numbers, and only there."""

from __future__ import annotations

from pathlib import Path

import pytest
from scipy.stats import binom

from adjustplan.check import check_plan
from adjustplan.errors import Finding

GRAPH = "income, age -> damp : a\nincome, age -> asthma : b\ndamp -> asthma : c\n"
PLAN = """\
title = "Damp homes and asthma"
graph = "damp.edges"

[question]
exposure = "damp"
outcome = "asthma"

[study]
design = "{design}"
{numbers}

[adjustment]
set = ["income", "age"]
rationale = "Both decide who lives where."

[analysis]
measure = "{measure}"
"""
RULES = {"study-few-outcomes", "model-few-outcomes", "study-detectable", "study-efficiency"}


@pytest.fixture
def found(tmp_path: Path):  # type: ignore[no-untyped-def]
    """What the rules on feasibility find in a plan with these numbers."""
    (tmp_path / "damp.edges").write_text(GRAPH)

    def find(numbers: str, design: str = "cohort", measure: str = "risk ratio", forms: str = "") -> dict[str, Finding]:
        path = tmp_path / "plan.toml"
        path.write_text(PLAN.format(design=design, numbers=numbers, measure=measure) + forms)
        report = check_plan(path)
        assert report.read, report.findings
        return {finding.code: finding for finding in report.findings if finding.code in RULES}

    return find


def test_no_numbers_no_findings(found) -> None:  # type: ignore[no-untyped-def]
    assert found("") == {}
    assert found("size = 100") == {}
    assert found("assumed_risk = 0.0001\nexposed_share = 0.5") == {}


def test_two_cases_in_a_cohort_of_10000_are_few(found) -> None:  # type: ignore[no-untyped-def]
    # Common practice: a disease of 1 in 5,000 gives about two cases in a cohort of 10,000, and often none.
    told = found("size = 10000\nassumed_risk = 0.0002")
    few = told["study-few-outcomes"]
    assert few.severity == "warning"
    assert "The number of outcomes to expect among 10,000 people is 2;" in few.message
    assert f"{100 * binom.pmf(0, 10_000, 0.0002):.2g} %" in few.message  # scipy
    assert few.line == 10
    assert "case-control" in told["study-efficiency"].message
    assert told["study-efficiency"].severity == "note"


def test_many_outcomes_are_not_few(found) -> None:  # type: ignore[no-untyped-def]
    assert set(found("size = 1000\nassumed_risk = 0.1")) == set()
    assert set(found("size = 1000\nassumed_risk = 0.1\nexposed_share = 0.5")) == {"study-detectable"}


@pytest.mark.parametrize(("size", "warned"), [(290, True), (310, False)])
def test_ten_outcomes_for_each_parameter(found, size: int, warned: bool) -> None:  # type: ignore[no-untyped-def]
    # Peduzzi et al. 1996: ten for each; exposure and two linear covariates are three parameters, so 300 people at 0.1.
    forms = '[analysis.forms]\nincome = "linear"\nage = "linear"\n'
    told = found(f"size = {size}\nassumed_risk = 0.1", forms=forms)
    assert ("model-few-outcomes" in told) is warned
    if warned:
        assert "(3) that is 9.67" in told["model-few-outcomes"].message
        assert told["model-few-outcomes"].line == 14


def test_a_category_counts_at_least_once_and_that_is_said(found) -> None:  # type: ignore[no-untyped-def]
    forms = '[analysis.forms]\nincome = "category"\nage = "spline(4)"\n'
    assert (
        "(at least 6) that is at most"
        in found("size = 500\nassumed_risk = 0.1", forms=forms)["model-few-outcomes"].message
    )


def test_the_smallest_detectable_ratio_is_a_note(found) -> None:  # type: ignore[no-untyped-def]
    cohort = found("size = 1000\nassumed_risk = 0.1\nexposed_share = 0.4")["study-detectable"]
    assert cohort.severity == "note"
    assert "A risk ratio above" in cohort.message
    numbers = "size = 73\nexposed_share = 0.3\ncontrols_per_case = 1"
    sampled = found(numbers, "case-control", "odds ratio")
    assert "An odds ratio above" in sampled["study-detectable"].message
    assert "study-few-outcomes" not in sampled


def test_a_case_control_study_of_five_cases_has_few(found) -> None:  # type: ignore[no-untyped-def]
    told = found("size = 5", "case-control", "odds ratio")
    assert told["study-few-outcomes"].message == "The number of cases is 5."


def test_a_rare_exposure_suggests_a_cohort(found) -> None:  # type: ignore[no-untyped-def]
    told = found("size = 200\nexposed_share = 0.01\ncontrols_per_case = 2", "case-control", "odds ratio")
    assert "cohort" in told["study-efficiency"].message


def test_a_continuous_outcome_has_no_outcomes_to_count(found) -> None:  # type: ignore[no-untyped-def]
    assert found("size = 20\nassumed_risk = 0.01\nexposed_share = 0.5", measure="mean difference") == {}
