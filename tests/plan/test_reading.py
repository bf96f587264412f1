"""Reading a plan: what it says, and that every mistake is one clear line with its place."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import adjustplan.plan
from adjustplan.errors import AdjustplanError, Finding, GraphError, PlanError
from adjustplan.plan import json_schema, read_plan
from adjustplan.plan.places import line_numbers

PLAN = """\
title = "Damp homes and asthma"
graph = "damp.edges"

[question]
exposure = "damp"
outcome  = "asthma"
contrast = { exposed = "damp", reference = "dry" }

[study]
design = "cohort"

[adjustment]
set = ["income"]
rationale = \"\"\"
Income decides who lives where.
set = 3 is not a key here.
\"\"\"

[[adjustment.alternative]]
set = []
rationale = "as it is"

[[adjustment.alternative]]
set = ["district"]

[analysis]
measure = "odds ratio"
data = "damp.csv"

[analysis.columns]
income = "inc_2020"

[analysis.forms]
income = "spline(4)"
"""
GRAPH = "income, district -> damp\nincome -> asthma\ndamp -> asthma\n"


@pytest.fixture
def plan_path(tmp_path: Path) -> Path:
    (tmp_path / "damp.edges").write_text(GRAPH)
    path = tmp_path / "plan.toml"
    path.write_text(PLAN)
    return path


def test_a_plan_is_read_with_its_graph(plan_path: Path) -> None:
    plan = read_plan(plan_path)
    assert plan.question.effect == "total"
    assert plan.adjustment.members == ["income"]
    assert [other.members for other in plan.adjustment.alternative] == [[], ["district"]]
    assert plan.column("income") == "inc_2020"
    assert plan.column("damp") == "damp"
    assert plan.data_place == plan_path.parent / "damp.csv"
    assert len(plan.graph) == 4


def test_keys_are_found_on_their_lines(plan_path: Path) -> None:
    plan = read_plan(plan_path)
    assert plan.line("question", "exposure") == 5
    assert plan.line("question", "contrast", "exposed") == 7
    assert plan.line("adjustment", "set") == 13
    assert plan.line("adjustment", "alternative", 1, "set") == 24
    assert plan.line("analysis", "columns", "income") == 31
    assert plan.line("nowhere") is None


@pytest.mark.parametrize(
    ("old", "new", "line", "words"),
    [
        ('title = "', 'titel = "', 1, "Did you mean “title”"),
        ("exposure = ", "exposer = ", 5, "Did you mean “exposure”"),
        ('design = "cohort"', 'design = "kohort"', 10, "Did you mean “cohort”"),
        ('"odds ratio"', '"odds ration"', 27, "Did you mean “odds ratio”"),
        ("inc_2020", "", 31, "cannot be"),
        ("spline(4)", "spline(40)", 34, "cannot be"),
        ('exposure = "damp"', 'exposure = "dampp"', 5, "Did you mean “damp”"),
        ('set = ["district"]', 'set = ["distrikt"]', 24, "Did you mean “district”"),
        ('set = ["income"]', 'set = "income"', 13, "cannot be"),
        ("[analysis.columns]\nincome", "[analysis.columns]\nincone", 31, "Did you mean “income”"),
        ('title = "Damp', "title = Damp", 1, "Invalid value"),
    ],
)
def test_a_mistake_is_one_line_with_its_place(
    plan_path: Path, old: str, new: str, line: int | None, words: str
) -> None:
    text = plan_path.read_text()
    assert old in text
    plan_path.write_text(text.replace(old, new, 1))
    with pytest.raises(PlanError) as caught:
        read_plan(plan_path)
    told = [finding for finding in caught.value.findings if words in str(finding)]
    assert [finding.line for finding in told] == [line]
    assert told[0].file == str(plan_path)


def test_a_missing_table_is_said_when_it_is_needed(tmp_path: Path) -> None:
    (tmp_path / "damp.edges").write_text(GRAPH)
    path = tmp_path / "plan.toml"
    path.write_text(PLAN.split("[study]")[0])
    plan = read_plan(path)
    with pytest.raises(PlanError, match=r"no \[adjustment\] yet"):
        _ = plan.adjustment
    with pytest.raises(PlanError, match=r"no \[analysis\] yet"):
        _ = plan.data_place


def test_a_broken_graph_is_reported_as_the_graphs_own(plan_path: Path) -> None:
    (plan_path.parent / "damp.edges").write_text("a -> a")
    with pytest.raises(GraphError, match="arrow to itself"):
        read_plan(plan_path)


def test_the_json_schema_names_the_keys_as_the_file_does() -> None:
    schema = json_schema()
    assert schema["required"] == ["title", "graph", "question"]
    assert "set" in schema["$defs"]["Adjustment"]["properties"]
    assert schema["$defs"]["Study"]["additionalProperties"] is False
    json.dumps(schema)


def test_the_committed_json_schema_is_the_models_own() -> None:
    committed = Path(adjustplan.plan.__file__).with_name("plan.schema.json")
    assert json.loads(committed.read_text(encoding="utf-8")) == json_schema()


def test_text_in_triple_quotes_holds_no_keys() -> None:
    assert ("adjustment", "set") in line_numbers(PLAN)
    assert line_numbers(PLAN)["adjustment", "set"] == 13


@settings(max_examples=150, deadline=None)
@given(data=st.data())
def test_a_broken_plan_never_ends_in_a_traceback(tmp_path_factory: pytest.TempPathFactory, data: st.DataObject) -> None:
    """One character of a good plan is replaced by anything; what comes is a plan or one of our errors."""
    folder = tmp_path_factory.mktemp("plan")
    (folder / "damp.edges").write_text(GRAPH)
    place = data.draw(st.integers(0, len(PLAN) - 1))
    letter = data.draw(st.sampled_from('"[]{}=.,#\n\\ \x00é0a-'))
    (folder / "plan.toml").write_text(PLAN[:place] + letter + PLAN[place + 1 :], encoding="utf-8")
    findings: tuple[Finding, ...] = ()
    try:
        read_plan(folder / "plan.toml")
    except AdjustplanError as error:
        findings = error.findings
    assert all(finding.file for finding in findings)
