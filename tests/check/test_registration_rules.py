"""The registration rules: each speaks when it should, in words, and is silent otherwise."""

from __future__ import annotations

import datetime
from pathlib import Path

import pytest

from adjustplan.check import check_plan
from adjustplan.errors import Finding
from adjustplan.plan import read_plan
from adjustplan.plan.seal_file import seal_path
from adjustplan.plan.sealing import amend, seal

PLAN = """\
title = "Window seats and neck pain"
graph = "seats.edges"

[question]
exposure = "window_seat"
outcome = "neck_pain"

[adjustment]
set = ["tenure"]
rationale = "The longest-serving choose first."
"""
GRAPH = "tenure -> window_seat, neck_pain\nwindow_seat -> neck_pain\n"
SEALED, LATER = datetime.date(2024, 3, 4), datetime.date(2024, 5, 6)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    (tmp_path / "seats.edges").write_text(GRAPH)
    (tmp_path / "plan.toml").write_text(PLAN)
    return tmp_path / "plan.toml"


def edit(path: Path, old: str, new: str) -> None:
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")


def registration(path: Path) -> list[Finding]:
    """The findings of the registration rules."""
    return [finding for finding in check_plan(path).findings if finding.code.startswith("registration-")]


def test_a_plan_that_is_not_sealed_gets_a_note(path: Path) -> None:
    (found,) = registration(path)
    assert (found.code, found.severity) == ("registration-not-sealed", "note")


def test_a_sealed_plan_that_did_not_change_gets_nothing(path: Path) -> None:
    seal(read_plan(path), date=SEALED)
    assert registration(path) == []
    edit(path, 'graph = "seats.edges"', 'graph = "seats.edges"   # drawn by all of us')
    edit(path.with_name("seats.edges"), "tenure -> window_seat, neck_pain", "tenure->neck_pain\ntenure -> window_seat")
    assert registration(path) == []


def test_a_change_without_an_amendment_is_an_error_said_in_words(path: Path) -> None:
    seal(read_plan(path), date=SEALED)
    edit(path, '["tenure"]', '["tenure", "bmi"]')
    edit(path.with_name("seats.edges"), "window_seat ->", "bmi -> neck_pain : weight bears on the neck\nwindow_seat ->")
    (found,) = registration(path)
    assert (found.code, found.severity, found.file) == ("registration-changed", "error", str(path))
    assert found.message == (
        "Changed since the seal of 2024-03-04: arrow bmi -> neck_pain added; variable bmi added to the graph;"
        " bmi added to the set."
    )
    assert "amend" in found.remedy


def test_many_changes_are_counted_not_all_listed(path: Path) -> None:
    seal(read_plan(path), date=SEALED)
    causes = ", ".join(f"cause_{number}" for number in range(8))
    edit(path.with_name("seats.edges"), "window_seat ->", f"{causes} -> neck_pain\nwindow_seat ->")
    (found,) = registration(path)
    assert found.message.count(" added") == 6
    assert found.message.endswith("; and 10 more.")


def test_an_amendment_settles_the_change(path: Path) -> None:
    seal(read_plan(path), date=SEALED)
    edit(path, '["tenure"]', "[]")
    amend(read_plan(path), "Tenure is not on file", date=LATER, data_seen=False)
    assert registration(path) == []
    edit(path, "[]", '["tenure"]')
    (found,) = registration(path)
    assert found.message == "Changed since the amendment of 2024-05-06: tenure added to the set."


def test_deciding_after_the_data_were_seen_is_a_warning_at_its_entry(path: Path) -> None:
    seal(read_plan(path), date=SEALED)
    edit(path, '["tenure"]', "[]")
    amend(read_plan(path), "It looked better", date=LATER, data_seen=True)
    (found,) = registration(path)
    assert (found.code, found.severity) == ("registration-after-data", "warning")
    assert found.message == "The plan was amended on 2024-05-06, after the data had been seen."
    assert found.file == str(seal_path(path))
    assert found.line is not None
    assert seal_path(path).read_text(encoding="utf-8").splitlines()[found.line - 1] == "data_seen = true"


def test_a_plan_sealed_after_the_data_were_seen_gets_the_warning_too(path: Path) -> None:
    seal(read_plan(path), date=SEALED, data_seen=True)
    assert [found.message for found in registration(path)] == [
        "The plan was sealed on 2024-03-04, after the data had been seen."
    ]


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("date = 2024-03-04", "date = 2023-03-04", "edited after it was written"),
        ("'variable tenure'", "'variable age'", "statements of the graph"),
        ("format = 1", "format = one", "not TOML"),
        ("data_seen", "data_unseen", "Unknown key"),
    ],
)
def test_a_tampered_seal_is_an_error_and_nothing_else_is_read_from_it(
    path: Path, old: str, new: str, words: str
) -> None:
    seal(read_plan(path), date=SEALED, data_seen=True)
    edit(path, '["tenure"]', "[]")
    edit(seal_path(path), old, new)
    found = registration(path)
    assert {finding.code for finding in found} == {"registration-tampered"}
    assert {finding.severity for finding in found} == {"error"}
    assert {finding.file for finding in found} == {str(seal_path(path))}
    assert any(words in finding.message for finding in found)


def test_a_rule_of_registration_can_be_waived_with_its_reason(path: Path) -> None:
    edit(
        path,
        "[adjustment]",
        '[[waiver]]\nrule = "registration-after-data"\nreason = "An audit of old data."\n[adjustment]',
    )
    seal(read_plan(path), date=SEALED, data_seen=True)
    assert registration(path) == []
    waived = [one for one in check_plan(path).waived if one.finding.code == "registration-after-data"]
    assert [one.reason for one in waived] == ["An audit of old data."]
