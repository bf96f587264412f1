"""Everybody in the source is accounted for: eligible, left out at a step, or left out because nobody can tell."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import ibis
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.data.eligibility import Prepared, Step, apply, data_problems, steps_of
from adjustplan.data.expressions import in_plan
from adjustplan.data.flow import FlowStep, LeftOut
from adjustplan.errors import DataError
from adjustplan.plan import read_plan
from adjustplan.plan.data_schema import Data
from adjustplan.plan.statements import plan_statements

KINDS = {"age": "number", "ill": "boolean", "site": "text", "coded": "number"}
ROWS = {
    "age": [10, 20, 30, None, 40, 50, None],
    "ill": [False, True, None, False, False, False, True],
    "site": ["north", "north", "south", "north", "west", "north", None],
    "coded": [0, 1, 0, 1, None, 1, 0],
}


def prepared(where: str | dict[str, str] | None, rows: dict[str, Any] = ROWS) -> Prepared:
    table = ibis.memtable(pa.table(rows))
    return apply(table, {name: KINDS[name] for name in rows}, Data.model_validate({"where": where}))


def test_without_conditions_everybody_is_eligible() -> None:
    result = apply(ibis.memtable(pa.table(ROWS)), KINDS, None)
    assert result.flow.steps == (FlowStep("in the source", 7),)
    assert result.table.count().execute() == 7
    assert dict(result.kinds) == KINDS
    assert result.table.columns == tuple(ROWS)


def test_who_does_not_meet_a_condition_and_of_whom_it_is_unknown_are_counted_apart() -> None:
    result = prepared("age >= 18 and not ill")
    last = result.flow.steps[-1]
    # rows: false; false; missing; missing; true; true; false, since ill decides although the age is missing
    assert last == FlowStep(
        "eligible",
        2,
        (LeftOut("not: age >= 18 and not ill", 3), LeftOut("a value is missing for: age >= 18 and not ill", 2)),
    )
    assert sorted(result.table.to_pyarrow()["age"].to_pylist()) == [40, 50]
    assert [(finding.code, finding.severity) for finding in result.findings] == [("data-eligibility-unknown", "note")]


def test_each_step_counts_those_who_met_all_steps_before() -> None:
    result = prepared({"2_well": "not ill", "10_north": "site = 'north'", "1_adult": "age >= 18"})
    assert [(step.label, step.rows) for step in result.flow.steps] == [
        ("in the source", 7),
        ("1_adult", 4),
        ("2_well", 2),
        ("10_north", 1),
    ]
    assert [step.left_out for step in result.flow.steps[1:]] == [
        (LeftOut("not: 1_adult", 1), LeftOut("a value is missing for: 1_adult", 2)),
        (LeftOut("not: 2_well", 1), LeftOut("a value is missing for: 2_well", 1)),
        (LeftOut("not: 10_north", 1),),
    ]


def test_the_order_of_steps_is_that_of_their_names_and_not_of_the_file() -> None:
    names = ["10 b", "2 z", "a", "1 c", "02 a", "B"]
    expected = ["1 c", "02 a", "2 z", "10 b", "B", "a"]
    for order in (names, sorted(names), names[::-1]):
        steps = steps_of(Data.model_validate({"where": dict.fromkeys(order, "age > 1")}))
        assert [step.name for step in steps] == expected
    assert steps[0] == Step("1 c", "age > 1", ("data", "where", "1 c"))


VALUES = st.fixed_dictionaries(
    {
        "age": st.one_of(st.none(), st.integers(15, 22)),
        "ill": st.one_of(st.none(), st.booleans()),
        "site": st.one_of(st.none(), st.sampled_from(["north", "south", ""])),
    }
)
STEPS = {
    "age > 18": lambda row: None if row["age"] is None else row["age"] > 18,
    "not ill": lambda row: None if row["ill"] is None else not row["ill"],
    "site != 'north'": lambda row: None if not row["site"] else row["site"] != "north",
    "ill is not missing": lambda row: row["ill"] is not None,
}


@settings(max_examples=25, deadline=None)
@given(rows=st.lists(VALUES, min_size=1, max_size=25), chosen=st.permutations(sorted(STEPS)), many=st.integers(1, 4))
def test_the_flow_is_what_a_loop_over_the_rows_counts(rows: list[Any], chosen: list[str], many: int) -> None:
    schema = pa.schema([("age", pa.int64()), ("ill", pa.bool_()), ("site", pa.string())])
    table = ibis.memtable(pa.Table.from_pylist(rows, schema=schema))
    data = Data.model_validate({"where": {f"{n}_step": text for n, text in enumerate(chosen[:many])}})
    here, expected = rows, []
    for text in chosen[:many]:
        answers = [STEPS[text](row) for row in here]
        expected.append([n for n in (answers.count(False), answers.count(None)) if n])
        here = [row for row, answer in zip(here, answers, strict=True) if answer]
    kinds = {name: KINDS[name] for name in schema.names}
    if not here:
        with pytest.raises(DataError) as caught:
            apply(table, kinds, data)
        assert [finding.code for finding in caught.value.findings] == ["data-none-eligible"]
        return
    result = apply(table, kinds, data)
    assert [[part.rows for part in step.left_out] for step in result.flow.steps[1:]] == expected
    assert result.flow.rows == len(here) == result.table.count().execute()


def test_all_counts_come_from_one_query(monkeypatch: pytest.MonkeyPatch) -> None:
    asked = []
    execute = ibis.expr.types.Table.execute
    monkeypatch.setattr(ibis.expr.types.Table, "execute", lambda self: asked.append(self) or execute(self))
    where = {"1_adult": "age >= 18", "2_coded": "coded"}
    data = Data.model_validate({"where": where, "missing": {"site": ["west"]}, "derive": {"d": {"equals": "age + 1"}}})
    apply(ibis.memtable(pa.table(ROWS)), KINDS, data)
    assert len(asked) == 1


def test_a_number_stands_as_a_condition_only_where_it_is_0_or_1_throughout() -> None:
    assert prepared("not coded").flow.rows == 3
    rows = {"age": [20, 30], "coded": [1, 2]}
    with pytest.raises(DataError) as caught:
        prepared("coded and age > 1", rows)
    (finding,) = caught.value.findings
    assert finding.code == "data-not-zero-one"
    assert "in 1 rows" in finding.message
    data = Data.model_validate({"where": "coded", "missing": {"coded": [2]}})
    assert apply(ibis.memtable(pa.table(rows)), KINDS, data).flow.rows == 1


def test_nobody_left_is_said_with_the_step_that_left_the_last_out() -> None:
    with pytest.raises(DataError) as caught:
        prepared({"1_adult": "age >= 18", "2_none": "site = 'North'", "3_well": "not ill"})
    (finding,) = caught.value.findings
    assert finding.code == "data-none-eligible"
    assert "not: 2_none" in finding.message


def test_a_source_without_rows_is_left_to_those_who_check_data() -> None:
    table = ibis.memtable(pa.table({"age": pa.array([], pa.int64())}))
    assert apply(table, {"age": "number"}, Data.model_validate({"where": "age > 1"})).flow.rows == 0


def test_hidden_columns_never_meet_a_column_of_the_data() -> None:
    rows = {"adjustplan_0": [1, 2], "Adjustplan__1": [3, 4]}
    table = ibis.memtable(pa.table(rows))
    data = Data.model_validate({"where": "adjustplan_0 > 1", "missing": {"Adjustplan__1": [4]}})
    result = apply(table, dict.fromkeys(rows, "number"), data)
    assert result.table.columns == tuple(rows)
    assert result.table.to_pyarrow().to_pydict() == {"adjustplan_0": [2], "Adjustplan__1": [None]}


def test_a_moment_with_a_time_zone_is_no_date() -> None:
    table = ibis.memtable(pa.table({"seen": pa.array([0], pa.timestamp("us", "UTC"))}))
    with pytest.raises(DataError, match="plain dates"):
        apply(table, {"seen": "other"}, Data.model_validate({"where": "seen < date(2020, 1, 1)"}))


PLAN = """title = "Nights"
graph = "g.edges"
[question]
exposure = "nights"
outcome = "diabetes"
"""
TABLE = '''[data]
where = "age >= 18 and iill"    # age
[data.missing]
site = [999]
[data.derive.old]
equals = """
age > 60
  and site == 'north'"""
[data.derive.long]
from = "age"
'''


def test_everything_wrong_in_the_plan_is_said_at_once_at_its_character(tmp_path: Path) -> None:
    (tmp_path / "g.edges").write_text("nights -> diabetes\n", encoding="utf-8")
    path = tmp_path / "plan.toml"
    path.write_text(PLAN, encoding="utf-8")
    plan = read_plan(path)
    path.write_text(PLAN + TABLE, encoding="utf-8")
    data = Data.model_validate(tomllib.loads(TABLE)["data"])
    with pytest.raises(DataError) as caught:
        apply(ibis.memtable(pa.table(ROWS)), KINDS, data, place=in_plan(plan))
    lines = (PLAN + TABLE).splitlines()
    found = {finding.code: finding for finding in caught.value.findings}
    assert set(found) == {"data-missing-column", "data-missing-code", "data-expression-syntax", "data-derive-form"}
    assert all(finding.file == str(path) for finding in found.values())
    unknown, syntax = found["data-missing-column"], found["data-expression-syntax"]
    assert unknown.line == lines.index('where = "age >= 18 and iill"    # age') + 1
    assert lines[unknown.line - 1][unknown.column - 1 :].startswith("iill")
    assert syntax.line == lines.index('  and site == \'north\'"""') + 1
    assert lines[syntax.line - 1][syntax.column - 1 :].startswith("==")
    assert found["data-missing-code"].line == lines.index("site = [999]") + 1
    assert found["data-derive-form"].line == lines.index("[data.derive.long]") + 1


def test_what_can_be_said_without_data_is() -> None:
    data = Data.model_validate({"where": {"a": "age >", "b": "nonsense here", "c": "unknown_column > 1"}})
    assert [problem.key[-1] for problem in data_problems(data)] == ["a", "b"]


def test_the_order_of_the_file_leaves_no_trace_in_what_is_sealed_and_counted() -> None:
    one = Data.model_validate({"missing": {"age": [20, 30], "coded": [1]}, "where": {"b": "coded", "a": "age > 1"}})
    other = Data.model_validate({"where": {"a": "age > 1", "b": "coded"}, "missing": {"coded": [1], "age": [30, 20]}})
    assert plan_statements(one) == plan_statements(other)  # type: ignore[arg-type]
    rows = {"age": [20, 30, 40, 50], "coded": [0, 0, 1, 0]}
    flows = []
    for data in (one, other):
        with pytest.raises(DataError) as caught:
            apply(ibis.memtable(pa.table(rows)), KINDS, data)
        flows.append(str(caught.value))
    assert flows[0] == flows[1]
