"""Every code that anything in the package gives a finding is explained, and nothing else is."""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

import adjustplan
from adjustplan.check import RULES
from adjustplan.check.explaining import explain, explain_all
from adjustplan.check.reader_codes import READER_CODES
from adjustplan.errors import AdjustplanError

SOURCE = Path(adjustplan.__file__).parent
CODE = re.compile(r"[a-z0-9]+(-[a-z0-9]+)+")
SUBJECTS = {code.split("-")[0] for code in [*RULES, *READER_CODES]} | {"seal", "registration"}


def trees() -> Iterator[ast.Module]:
    tables = {"reader_codes.py", "estimate_codes.py", "source_codes.py"}
    for path in sorted(SOURCE.rglob("*.py")):
        if path.name not in tables:
            yield ast.parse(path.read_text(encoding="utf-8"), str(path))


def texts(node: ast.AST) -> Iterator[str]:
    """The texts in a piece of source that could be codes."""
    for part in ast.walk(node):
        if isinstance(part, ast.Constant) and isinstance(part.value, str) and CODE.fullmatch(part.value):
            yield part.value


def raised() -> set[str]:
    """The codes in the source: the first words of findings, and whatever else looks like one by its subject."""
    found: set[str] = set()
    for tree in trees():
        found |= {text for text in texts(tree) if text.split("-")[0] in SUBJECTS}
        for call in (node for node in ast.walk(tree) if isinstance(node, ast.Call)):
            name = getattr(call.func, "id", getattr(call.func, "attr", ""))
            if name in ("Finding", "Fault") and call.args:
                found |= set(texts(call.args[0]))
            if name == "read_text" and len(call.args) == 3:  # makes its codes from the subject
                subject = ast.literal_eval(call.args[2])
                found |= {f"{subject}-unreadable", f"{subject}-not-utf8"}
    return found


def test_every_code_in_the_source_is_explained() -> None:
    assert len(raised()) > 80
    assert raised() - RULES.keys() - READER_CODES.keys() == set()


def test_no_code_is_explained_that_nothing_raises() -> None:
    assert READER_CODES.keys() - raised() == set()


def test_no_code_is_explained_twice() -> None:
    assert RULES.keys() & READER_CODES.keys() == set()


def test_codes_made_up_at_run_time_are_only_those_of_reading_text() -> None:
    made_up = {
        (path.name, ast.unparse(call.args[0]))
        for path in SOURCE.rglob("*.py")
        for call in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(call, ast.Call) and getattr(call.func, "id", "") in ("Finding", "Fault") and call.args
        if isinstance(call.args[0], ast.JoinedStr)
    }
    assert made_up == {("files.py", "f'{subject}-unreadable'"), ("files.py", "f'{subject}-not-utf8'")}


@pytest.mark.parametrize("code", sorted([*RULES, *READER_CODES]))
def test_an_explanation_is_a_paragraph_of_whole_sentences(code: str) -> None:
    told = explain(code)
    assert told.text.endswith(".")
    assert "\n" not in told.text
    assert len(told.text) > 40
    assert code in str(told)
    assert told.to_dict()["family"] == code.split("-")[0]


def test_the_list_holds_every_code_once() -> None:
    told = explain_all()
    assert [item.code for item in told.rules] == sorted(RULES)
    assert [item.code for item in told.others] == sorted(READER_CODES)
    text = str(told)
    assert all(code in text for code in [*RULES, *READER_CODES])


def test_a_slip_gets_the_nearest_code_of_rules_and_readers_alike() -> None:
    for slip, meant in (("graph-cycel", "graph-cycle"), ("study-imortal-time", "study-immortal-time")):
        with pytest.raises(AdjustplanError, match=f"Did you mean “{meant}”"):
            explain(slip)
