"""A plan's history: amendments keep it sound, whatever was done to its file is found, and nothing is half-written."""

from __future__ import annotations

import datetime
import os
import tomllib
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.errors import AdjustplanError, OutputError, SealError
from adjustplan.plan import Plan, read_plan
from adjustplan.plan.history import changes_since, entry_fingerprint, faults
from adjustplan.plan.seal_file import read_history, seal_path, write_history
from adjustplan.plan.sealing import amend, seal
from adjustplan.plan.statements import Statements

PLAN = """\
title = "Allotments and low mood"
graph = "allotment.edges"
[question]
exposure = "allotment"
outcome = "low_mood"
[adjustment]
set = ["age"]
rationale = "Age decides who has one."
"""
GRAPH = "age -> allotment, low_mood : 'pensioners' have time\nallotment -> low_mood\n"
SEALED, LATER = datetime.date(2024, 3, 4), datetime.date(2024, 5, 6)


def make_plan(folder: Path) -> Plan:
    folder.mkdir(exist_ok=True)
    (folder / "allotment.edges").write_text(GRAPH)
    (folder / "plan.toml").write_text(PLAN)
    return read_plan(folder / "plan.toml")


def changed(plan: Plan, old: str, new: str) -> Plan:
    """The plan after an edit of its file."""
    text = plan.path.read_text()
    assert old in text
    plan.path.write_text(text.replace(old, new))
    return read_plan(plan.path)


@pytest.fixture
def plan(tmp_path: Path) -> Plan:
    return make_plan(tmp_path)


@pytest.fixture
def amended(plan: Plan) -> Plan:
    """The plan, sealed and amended twice."""
    seal(plan, "Ines Roth", SEALED)
    plan = changed(plan, '["age"]', "[]")
    amend(plan, "Age is\n not on file", "I. Roth", LATER, data_seen=False)
    plan = changed(plan, "low mood", "mood")
    amend(plan, 'The "mood" scale came', date=LATER, data_seen=True)
    return plan


def found_in(plan: Plan) -> list[str]:
    """The codes of all that is wrong with the plan's seal file, however it comes to light."""
    try:
        history = read_history(plan.path)
    except SealError as error:
        return [finding.code for finding in error.findings]
    return [finding.code for finding in faults(history)] if history else ["no seal"]


def test_the_seal_stands_beside_its_plan() -> None:
    assert seal_path("study/plan.toml") == Path("study/plan.seal")
    assert seal_path("plan.v2.TOML") == Path("plan.v2.seal")
    assert seal_path("plan.v2") == Path("plan.v2.seal")
    assert seal_path("plan.seal") == Path("plan.seal.seal")


def test_a_seal_is_read_back_as_it_was_made(plan: Plan) -> None:
    assert read_history(plan.path) is None
    made = seal(plan, "  Ines\nRoth ", SEALED, data_seen=True)
    assert read_history(plan.path) == made
    entry = made.last
    assert (entry.kind, entry.date, entry.by, entry.data_seen) == ("seal", SEALED, "Ines Roth", True)
    assert (entry.before, entry.changes, entry.reason) == ("", [], "")
    assert faults(made) == []
    assert changes_since(plan, made) == []


def test_a_seal_is_of_today_unless_said_otherwise(plan: Plan) -> None:
    days = {datetime.date.today()}
    made = seal(plan)
    assert made.last.date in days | {datetime.date.today()}


def test_amendments_say_what_changed_and_why_and_keep_the_chain(amended: Plan) -> None:
    history = read_history(amended.path)
    assert history is not None
    assert faults(history) == []
    assert [entry.kind for entry in history.entries] == ["seal", "amendment", "amendment"]
    assert history.entries[1].changes == ["age removed from the set"]
    assert history.entries[1].reason == "Age is not on file"
    assert history.entries[2].changes == ["the title changed from “Allotments and low mood” to “Allotments and mood”"]
    assert [entry.before for entry in history.entries[1:]] == [entry.fingerprint for entry in history.entries[:2]]
    assert [entry.data_seen for entry in history.entries] == [False, False, True]


def test_a_change_of_the_graph_is_a_change_of_the_contract(plan: Plan) -> None:
    sealed = seal(plan, date=SEALED)
    plan.graph_path.write_text(GRAPH + "age -> low_pay\n")
    now = read_plan(plan.path)
    assert changes_since(now, sealed) == ["arrow age -> low_pay added", "variable low_pay added to the graph"]
    last = amend(now, "Pay matters", date=LATER, data_seen=False).last
    assert last.graph != sealed.last.graph
    assert last.plan == sealed.last.plan


def test_what_cannot_be_sealed_or_amended_says_so_and_leaves_the_file_alone(plan: Plan) -> None:
    with pytest.raises(SealError, match="not sealed yet"):
        amend(plan, "why", data_seen=False)
    with pytest.raises(SealError, match="in the future"):
        seal(plan, date=datetime.date.today() + datetime.timedelta(days=2))
    assert not seal_path(plan.path).exists()
    seal(plan, date=LATER, data_seen=True)
    before = seal_path(plan.path).read_bytes()
    with pytest.raises(SealError, match="sealed already"):
        seal(plan)
    with pytest.raises(SealError, match="Nothing has changed"):
        amend(plan, "why", data_seen=True)
    plan = changed(plan, '["age"]', "[]")
    with pytest.raises(SealError, match="reason is empty"):
        amend(plan, " \n", data_seen=True)
    with pytest.raises(SealError, match="is before that of"):
        amend(plan, "why", date=SEALED, data_seen=True)
    with pytest.raises(SealError, match="stays seen"):
        amend(plan, "why", data_seen=False)
    with pytest.raises(SealError, match="not UTF-8"):
        amend(plan, "caf\udce9", data_seen=True)
    assert seal_path(plan.path).read_bytes() == before


@pytest.mark.parametrize(
    ("old", "new", "code"),
    [
        ('by = "I. Roth"', 'by = "Another"', "seal-entry-edited"),
        ("date = 2024-03-04", "date = 2023-03-04", "seal-entry-edited"),
        ("data_seen = true", "data_seen = false", "seal-entry-edited"),
        ("'age removed from the set'", "'nothing much'", "seal-entry-edited"),
        ('reason = "Age is', 'reason = "The age is', "seal-entry-edited"),
        ("'variable age'", "'variable aged'", "seal-statements-edited"),
        ("  'variable age',\n", "", "seal-statements-edited"),
        ("'variable age',\n  'variable allotment'", '"variable age\\nvariable allotment"', "seal-statements-edited"),
        ("format = 1", "format = 2", "seal-bad-value"),
        ("format = 1", "format = 1\nformal = 2", "seal-unknown-key"),
        ("format = 1", "", "seal-missing-key"),
        ("format = 1", "format = 1\n<<<<<<< ours", "seal-not-toml"),
        ("data_seen = true\n", "", "seal-missing-key"),
        ("[agreed]", "[agree]", "seal-missing-key"),
        ("date = 2024-03-04", 'date = "2024-03-04"', "seal-bad-value"),
        ("data_seen = true", "data_seen = 1", "seal-bad-value"),
        ("format = 1", f"format = {'[' * 5000}", "seal-not-toml"),
        ("format = 1", f"format = {'1' * 5000}", "seal-not-toml"),
    ],
)
def test_an_edited_seal_file_is_found_out(amended: Plan, old: str, new: str, code: str) -> None:
    path = seal_path(amended.path)
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")
    assert code in found_in(amended)
    now = path.read_bytes()
    with pytest.raises(SealError, match=r"version control|Did you mean"):
        amend(changed(amended, "[]", '["age"]'), "why", data_seen=True)
    assert path.read_bytes() == now


def test_bytes_that_are_not_utf8_are_found_out(amended: Plan) -> None:
    seal_path(amended.path).write_bytes(b"\xff" + seal_path(amended.path).read_bytes())
    assert found_in(amended) == ["seal-not-utf8"]


@pytest.mark.parametrize("kept", [(0, 2), (1, 2), (1, 0, 2), (0, 1, 1, 2), (2,), (0, 1)])
def test_an_entry_taken_out_doubled_or_moved_is_found_out(amended: Plan, kept: tuple[int, ...]) -> None:
    history = read_history(amended.path)
    assert history is not None
    entries = tuple(history.entries[place] for place in kept)
    write_history(replace(history, entries=entries), "plan.toml", force=True)
    assert found_in(amended)


def test_contradictions_are_found_even_when_every_fingerprint_was_worked_out_anew(amended: Plan) -> None:
    history = read_history(amended.path)
    assert history is not None
    forged, before = [], ""
    for entry, date, seen in zip(history.entries, (LATER, SEALED, LATER), (False, True, False), strict=True):
        entry = entry.model_copy(update={"date": date, "data_seen": seen, "before": before, "kind": "seal"})
        forged.append(entry.model_copy(update={"fingerprint": entry_fingerprint(entry)}))
        before = forged[-1].fingerprint
    found = faults(replace(history, entries=tuple(forged)))
    assert {finding.code for finding in found} == {"seal-order"}
    told = " ".join(finding.message for finding in found)
    for words in ("second seal", "stands after", "had not been seen"):
        assert words in told


@settings(max_examples=400, deadline=None)
@given(place=st.integers(0, 10_000), act=st.sampled_from(["put", "insert", "cut"]), letter=st.characters(codec="utf-8"))
def test_any_edit_of_one_character_that_changes_what_the_file_says_is_found(
    tmp_path_factory: pytest.TempPathFactory, place: int, act: str, letter: str
) -> None:
    plan = make_plan(tmp_path_factory.getbasetemp() / "one_character")
    path = seal_path(plan.path)
    path.unlink(missing_ok=True)
    seal(plan, "Ines", SEALED)
    plan = changed(plan, '["age"]', "[]")
    amend(plan, "Not on file", date=LATER, data_seen=False)
    text = path.read_text(encoding="utf-8")
    place %= len(text)
    edited = text[:place] + ("" if act == "cut" else letter) + text[place + (act != "insert") :]
    path.write_bytes(edited.encode("utf-8"))
    try:
        same = tomllib.loads(edited) == tomllib.loads(text)
    except ValueError:
        same = False
    if same or edited.startswith("\ufeff"):  # a byte order mark is no part of a text
        assert found_in(plan) == []
    else:
        assert found_in(plan)


EDITS = st.lists(
    st.tuples(st.sampled_from(["title", "rationale", "population"]), st.text(st.characters(codec="utf-8"), max_size=9)),
    min_size=1,
    max_size=5,
)


@settings(max_examples=40, deadline=None)
@given(edits=EDITS, reason=st.text(st.characters(codec="utf-8"), min_size=1), by=st.text(st.characters(codec="utf-8")))
def test_amendment_after_amendment_keeps_the_history_sound(
    tmp_path_factory: pytest.TempPathFactory, edits: list[tuple[str, str]], reason: str, by: str
) -> None:
    plan = make_plan(tmp_path_factory.mktemp("amended"))
    seal(plan, by, SEALED)
    entries = 1
    for key, words in edits:
        file = plan.file
        if key == "population":
            file = file.model_copy(update={"question": file.question.model_copy(update={key: words})})
        elif key == "rationale":
            file = file.model_copy(update={"adjustment": plan.adjustment.model_copy(update={key: words})})
        else:
            file = file.model_copy(update={key: words})
        plan = replace(plan, file=file)
        history = read_history(plan.path)
        assert history is not None
        if changes_since(plan, history) and reason.strip():
            history = amend(plan, reason, by, LATER, data_seen=False)
            entries += 1
            assert read_history(plan.path) == history
            assert changes_since(plan, history) == []
        assert faults(history) == []
        assert len(history.entries) == entries


def test_a_failed_write_leaves_the_seal_as_it_was(plan: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    seal(plan, date=SEALED)
    before = seal_path(plan.path).read_bytes()
    plan = changed(plan, '["age"]', "[]")
    for attribute in ("replace", "chmod"):
        with monkeypatch.context() as patched:
            patched.setattr(Path, attribute, full)
            with pytest.raises(OutputError, match="No space left"):
                amend(plan, "why", date=LATER, data_seen=False)
        assert seal_path(plan.path).read_bytes() == before
    with monkeypatch.context() as patched:
        patched.setattr(os, "fdopen", full)
        with pytest.raises(OutputError):
            amend(plan, "why", date=LATER, data_seen=False)
    assert sorted(path.name for path in plan.path.parent.iterdir()) == ["allotment.edges", "plan.seal", "plan.toml"]


def test_a_folder_or_a_dangling_link_in_the_place_of_the_seal_is_no_seal_to_write_over(plan: Plan) -> None:
    path = seal_path(plan.path)
    path.mkdir()
    with pytest.raises(SealError, match="sealed already"):
        seal(plan)
    with pytest.raises(AdjustplanError, match="directory"):
        read_history(plan.path)
    path.rmdir()
    path.symlink_to("nowhere")
    with pytest.raises(SealError, match="sealed already"):
        seal(plan)
    assert path.is_symlink()


def test_statements_of_one_line_each_cannot_be_run_together(plan: Plan) -> None:
    history = seal(plan, date=SEALED)
    first, second, *rest = history.agreed.graph
    joined = replace(history, agreed=Statements((f"{first}\n{second}", *rest), history.agreed.plan))
    assert [finding.code for finding in faults(joined)] == ["seal-statements-edited"]
