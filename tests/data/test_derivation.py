"""Missing codes, groups, recodes and spans of time are what plain Python makes of the same rows."""

from __future__ import annotations

import datetime
import tomllib
from itertools import pairwise
from pathlib import Path
from typing import Any

import ibis
import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from adjustplan.data.derivation import labels_of
from adjustplan.data.eligibility import Prepared, apply, data_problems
from adjustplan.data.patterns import Kind
from adjustplan.errors import DataError
from adjustplan.plan.data_schema import Data


def kinds_of(table: ibis.Table) -> dict[str, Kind]:
    def kind(dtype: Any) -> Kind:
        if dtype.is_boolean() or dtype.is_string():
            return "boolean" if dtype.is_boolean() else "text"
        return "number" if dtype.is_numeric() else "other"

    return {name: kind(dtype) for name, dtype in table.schema().items()}


def plan(text: str) -> Data:
    return Data.model_validate(tomllib.loads(text).get("data", {}))


def prepared(columns: dict[str, Any], text: str) -> Prepared:
    table = ibis.memtable(pa.table(columns))
    return apply(table, kinds_of(table), plan(text))


def column(result: Prepared, name: str) -> list[Any]:
    return result.table.select(name).to_pyarrow()[name].to_pylist()


def codes(columns: dict[str, Any], text: str) -> list[str]:
    with pytest.raises(DataError) as caught:
        prepared(columns, text)
    return [finding.code for finding in caught.value.findings]


def test_missing_codes_become_missing_and_each_is_counted() -> None:
    result = prepared(
        {"bmi": [22.5, 999.0, -1.0, 999.0, None, float("nan")], "site": ["N", "NA", "unknown", "NA", None, ""]},
        '[data.missing]\nbmi = [999, -1, 777]\nsite = ["NA", "unknown"]',
    )
    assert [None if value is None or np.isnan(value) else value for value in column(result, "bmi")] == [22.5] + [
        None
    ] * 5
    assert column(result, "site") == ["N", None, None, None, None, ""]
    assert {(change.column, change.what): change.rows for change in result.flow.changes} == {
        ("bmi", "-1 counts as missing"): 1,
        ("bmi", "777 counts as missing"): 0,
        ("bmi", "999 counts as missing"): 2,
        ("site", "“NA” counts as missing"): 2,
        ("site", "“unknown” counts as missing"): 1,
    }
    assert [(finding.code, finding.severity) for finding in result.findings] == [("data-missing-code-unused", "note")]
    assert "777" in result.findings[0].message


def test_dates_and_truth_values_can_be_missing_codes_too() -> None:
    far = datetime.date(9999, 12, 31)
    result = prepared(
        {"last": [far, datetime.date(2020, 1, 1)], "flag": [True, False]},
        "[data.missing]\nlast = [9999-12-31]\nflag = [true]",
    )
    assert column(result, "last") == [None, datetime.date(2020, 1, 1)]
    assert column(result, "flag") == [None, False]


def test_codes_are_taken_out_before_anything_is_derived_or_asked() -> None:
    text = """
    [data]
    where = "age >= 18"
    [data.missing]
    age = [999]
    [data.derive.group]
    from = "age"
    cut = [50]
    """
    result = prepared({"age": [20, 999, 60]}, text)
    assert column(result, "group") == ["below 50", "50 or more"]
    assert result.flow.rows == 2


@settings(max_examples=30, deadline=None)
@given(
    values=st.lists(st.one_of(st.none(), st.integers(-4, 4).map(lambda half: half / 2)), min_size=1, max_size=20),
    cuts=st.lists(st.integers(-3, 3).map(lambda half: half / 2), min_size=1, max_size=5, unique=True),
)
def test_a_value_on_a_limit_belongs_to_the_group_above_it(values: list[float | None], cuts: list[float]) -> None:
    data = Data.model_validate({"derive": {"group": {"from": "x", "cut": cuts}}})
    table = ibis.memtable(pa.table({"x": pa.array(values, pa.float64())}))
    got = column(apply(table, {"x": "number"}, data), "group")
    names, limits = labels_of(cuts), sorted(cuts)
    assert got == [None if v is None else names[int(np.searchsorted(limits, v, side="right"))] for v in values]


def test_groups_say_on_which_side_their_limits_are() -> None:
    assert labels_of([45, 30.0, 60]) == ["below 30", "30 to below 45", "45 to below 60", "60 or more"]
    assert labels_of([0.1]) == ["below 0.1", "0.1 or more"]
    days = [datetime.date(2020, 3, 1), datetime.date(2010, 1, 1)]
    assert labels_of(days) == ["before 2010-01-01", "2010-01-01 to before 2020-03-01", "2020-03-01 or later"]


def test_dates_are_cut_into_periods() -> None:
    moments = [datetime.datetime(2019, 12, 31, 23, 59), datetime.datetime(2020, 1, 1, 0, 0), None]
    text = '[data.derive.period]\nfrom = "seen"\ncut = [2020-01-01]'
    assert column(prepared({"seen": moments}, text), "period") == ["before 2020-01-01", "2020-01-01 or later", None]


RECODE = '[data.derive.shift]\nfrom = "rota"\nrecode = { nights = ["N1", "N2"], days = ["D"] }\n'


def test_a_value_without_a_new_one_becomes_missing_and_is_counted() -> None:
    result = prepared({"rota": ["N1", "N2", "D", "L", "n1", None, " "]}, RECODE)
    assert column(result, "shift") == ["nights", "nights", "days", None, None, None, None]
    assert [(c.what, c.rows) for c in result.flow.changes] == [("no new value, so missing", 2)]
    assert [(f.code, f.severity) for f in result.findings] == [("data-recode-unlisted", "warning")]


def test_otherwise_takes_what_is_not_listed_and_leaves_missing_alone() -> None:
    result = prepared({"rota": ["N1", "L", None, " "]}, RECODE + 'otherwise = "other"')
    assert column(result, "shift") == ["nights", "other", None, None]
    assert [(c.what, c.rows) for c in result.flow.changes] == [("no new value, so “other”", 1)]
    assert result.findings == ()


def test_numbers_and_truth_values_are_recoded_too() -> None:
    text = '[data.derive.new]\nfrom = "x"\nrecode = { low = [1, 2.5], high = [3] }'
    assert column(prepared({"x": [1.0, 2.5, 3.0, 4.0]}, text), "new") == ["low", "low", "high", None]
    text = '[data.derive.new]\nfrom = "x"\nrecode = { yes = [true], no = [0] }'
    assert column(prepared({"x": [True, False, None]}, text), "new") == ["yes", "no", None]


DATES = st.one_of(st.none(), st.dates(datetime.date(1899, 1, 1), datetime.date(2101, 1, 1)))


@settings(max_examples=30, deadline=None)
@given(rows=st.lists(st.tuples(DATES, DATES), min_size=1, max_size=20))
def test_spans_are_those_of_the_calendar_and_never_negative(rows: list[tuple[Any, Any]]) -> None:
    table = ibis.memtable(
        pa.table(
            {"entry": pa.array([a for a, _ in rows], pa.date32()), "exit": pa.array([b for _, b in rows], pa.date32())}
        )
    )
    span = {"from": "entry", "to": "exit"}
    data = Data.model_validate({"derive": {"d": {"days": span}, "y": {"years": span}}})
    result = apply(table, {"entry": "other", "exit": "other"}, data)
    true = [None if a is None or b is None else (b - a).days for a, b in rows]
    kept = [None if days is None or days < 0 else days for days in true]
    assert column(result, "d") == kept
    assert column(result, "y") == [None if days is None else days / 365.25 for days in kept]
    wrong = sum(days is not None and days < 0 for days in true)
    assert [change.rows for change in result.flow.changes] == [wrong, wrong]
    assert len(result.findings) == (2 if wrong else 0)


@pytest.mark.parametrize(
    ("entry", "leave", "days"),
    [("2016-02-28", "2016-03-01", 2), ("2015-02-28", "2015-03-01", 1), ("1900-02-28", "1900-03-01", 1),
     ("2000-02-28", "2000-03-01", 2), ("2016-02-29", "2016-02-29", 0)],
)  # fmt: skip
def test_leap_days_count(entry: str, leave: str, days: int) -> None:
    """The Gregorian rule: 1900 is no leap year, 2000 is one."""
    columns = {"a": [datetime.date.fromisoformat(entry)], "b": [datetime.datetime.fromisoformat(f"{leave}T23:59")]}
    assert column(prepared(columns, '[data.derive.d]\ndays = { from = "a", to = "b" }'), "d") == [days]


def test_a_span_may_begin_or_end_at_one_date_for_all() -> None:
    columns = {"entry": [datetime.date(2020, 1, 1), datetime.date(2021, 1, 1)]}
    result = prepared(columns, '[data.derive.d]\ndays = { from = "entry", to = 2020-12-31 }')
    assert column(result, "d") == [365, None]
    assert [(f.code, f.severity) for f in result.findings] == [("data-dates-order", "warning")]
    assert "1 rows" in result.findings[0].message


def test_a_derived_column_may_use_another_wherever_it_stands() -> None:
    text = """
    [data.derive.a_group]
    from = "m_mass"
    cut = [25]
    [data.derive.m_mass]
    equals = "weight / (height * height)"
    [data.derive.z_heavy]
    equals = "a_group = '25 or more'"
    """
    result = prepared({"weight": [80.0, 60.0, 70.0], "height": [1.6, 2.0, 0.0]}, text)
    assert column(result, "m_mass") == [80.0 / (1.6 * 1.6), 15.0, None]
    assert column(result, "a_group") == ["25 or more", "below 25", None]
    assert column(result, "z_heavy") == [True, False, None]
    assert {name: result.kinds[name] for name in ("m_mass", "a_group", "z_heavy")} == {
        "m_mass": "number",
        "a_group": "text",
        "z_heavy": "boolean",
    }


def test_columns_that_use_each_other_in_a_circle_are_refused() -> None:
    text = '[data.derive.a]\nequals = "b + 1"\n[data.derive.b]\nfrom = "c"\ncut = [1]\n[data.derive.c]\nequals = "a"'
    assert codes({"x": [1]}, text) == ["data-derive-cycle"]
    assert codes({"x": [1]}, '[data.derive.a]\nequals = "a + 1"') == ["data-derive-cycle"]


def doubling(length: int) -> str:
    names = ["x", *(f"c{k}" for k in range(length))]
    return "".join(f'[data.derive.{new}]\nequals = "{old} + {old}"\n' for old, new in pairwise(names))


def test_columns_that_each_double_the_last_do_not_blow_up() -> None:
    steps = "[data.where]\n" + "".join(f's{k} = "c{k % 6} > 0 or c{5 - k % 6} > 0"\n' for k in range(25))
    assert column(prepared({"x": [1, -1]}, doubling(6) + steps), "c5") == [2.0**6]
    assert codes({"x": [1]}, doubling(25)) == ["data-expression-size"]


def test_a_chain_of_columns_that_each_use_the_last_once_may_be_longer() -> None:
    chain = "".join(f'[data.derive.c{k + 1}]\nequals = "c{k} + 1"\n' for k in range(12))
    assert column(prepared({"c0": [0.5]}, chain), "c12") == [12.5]


def test_a_chain_of_too_many_columns_is_refused_and_a_very_long_one_breaks_nothing() -> None:
    for length in (28, 3_000):
        chain = "".join(f'[data.derive.c{k + 1}]\nequals = "c{k} + 1"\n' for k in range(length))
        assert "data-expression-size" in codes({"c0": [1]}, chain)


@pytest.mark.parametrize("name", ["age", "Age", "AGE"])
def test_a_derived_column_never_replaces_one_of_the_data(name: str) -> None:
    assert codes({"age": [1], "weight": [1]}, f'[data.derive.{name}]\nequals = "weight + 1"') == ["data-derive-name"]


def test_two_derived_columns_differ_in_more_than_capitals() -> None:
    text = '[data.derive.old]\nequals = "age > 60"\n[data.derive.OLD]\nequals = "age > 70"'
    assert "data-derive-name" in codes({"age": [1]}, text)


@pytest.mark.parametrize(
    ("derivation", "said"),
    [
        ('from = "age"', "nothing"),
        ('from = "age"\ncut = [1]\nrecode = { a = [1] }', "both cut and recode"),
        ("cut = [1]", "from which column"),
        ('from = "age"\nequals = "age + 1"', "no use for “from”"),
        ('from = "age"\ncut = [1]\notherwise = "x"', "no use for “otherwise”"),
        ('from = "age"\ncut = [1, 1]', "same value twice"),
        ('from = "age"\ncut = [1, 2020-01-01]', "numbers and at dates"),
        ('from = "age"\nrecode = { a = [1, 2], b = [2] }', "both “a” and “b”"),
        ('from = "site"\nrecode = { " " = ["x"] }', "text of nothing"),
        ("days = { from = 2020-01-01, to = 2020-01-02 }", "two fixed dates"),
        ('equals = "age +"', "found the end"),
    ],
)
def test_a_derivation_that_makes_no_sense_is_refused_before_there_are_data(derivation: str, said: str) -> None:
    (problem,) = data_problems(plan(f"[data.derive.new]\n{derivation}"))
    assert said in problem.message
    assert problem.key[:3] == ("data", "derive", "new")


@pytest.mark.parametrize(
    ("derivation", "code"),
    [
        ('from = "aged"\ncut = [1]', "data-missing-column"),
        ('from = "site"\ncut = [1]', "data-derive-form"),
        ('from = "age"\ncut = [2020-01-01]', "data-derive-form"),
        ('from = "age"\nrecode = { a = ["1"] }', "data-derive-form"),
        ('from = "site"\nrecode = { a = [1] }', "data-derive-form"),
        ('days = { from = "age", to = 2020-01-01 }', "data-derive-form"),
        ('years = { from = 2020-01-01, to = "stie" }', "data-missing-column"),
        ('equals = "site"', "data-derive-form"),
        ('equals = "site + 1"', "data-expression-type"),
        ('equals = "wieght + 1"', "data-missing-column"),
    ],
)
def test_a_derivation_that_does_not_fit_the_columns_is_refused(derivation: str, code: str) -> None:
    assert codes({"age": [1], "site": ["a"]}, f"[data.derive.new]\n{derivation}") == [code]


@pytest.mark.parametrize(
    ("line", "code"),
    [
        ('age = ["NA"]', "data-missing-code"),
        ("site = [999]", "data-missing-code"),
        ('site = [""]', "data-missing-code"),
        ("aged = [999]", "data-missing-column"),
        ("flag = [2]", "data-missing-code"),
    ],
)
def test_a_missing_code_that_the_column_cannot_hold_is_refused(line: str, code: str) -> None:
    assert codes({"age": [1], "site": ["a"], "flag": [True]}, f"[data.missing]\n{line}") == [code]


@pytest.mark.parametrize(
    "text",
    [
        "[data.missing]\nbmi = []",
        "[data.missing]\nbmi = 999",
        "[data.missing]\nbmi = [nan]",
        "[data.missing]\nbmi = [1e400]",
        "[data.missing]\nbmi = [10000000000000000000000]",
        "[data.missing]\nbmi = [[1]]",
        "[data]\nwhere = 5",
        "[data]\nwhere = { adult = 5 }",
        '[data.derive.x]\nfrom = "a"\ncut = ["a"]',
        '[data.derive.x]\nfrom = "a"\ncut = [true]',
        "[data.derive.x]\ndays = { from = 5, to = 2020-01-01 }",
        '[data.derive.x]\nfrom = "a"\nround = 5',
    ],
)
def test_the_plan_takes_no_values_that_data_cannot_hold(text: str) -> None:
    with pytest.raises(ValidationError) as caught:
        plan(text)
    assert len(caught.value.errors()) == 1  # one message, not one for every kind a value may have


def test_derived_labels_and_codes_never_become_part_of_a_query() -> None:
    strange = "x'; DROP TABLE rows; --"
    data = Data.model_validate(
        {
            "missing": {strange: [strange]},
            "derive": {f"{strange} 2": {"from": strange, "recode": {f"{strange} new": [f"{strange} old"]}}},
            "where": {strange: "`x'; DROP TABLE rows; --` is missing or `x'; DROP TABLE rows; --` != 'q'"},
        }
    )
    table = ibis.memtable(pa.table({strange: [strange, f"{strange} old", "q"]}))
    result = apply(table, {strange: "text"}, data)
    assert column(result, strange) == [None, f"{strange} old"]
    assert column(result, f"{strange} 2") == [None, f"{strange} new"]


def test_single_precision_columns_are_cut_and_coded_as_written(tmp_path: Path) -> None:
    path = tmp_path / "rows.parquet"
    pa.parquet.write_table(pa.table({"x": pa.array([0.1, 0.05, 9.9, None], pa.float32())}), path)
    table = ibis.duckdb.connect().read_parquet(path)
    data = plan('[data.missing]\nx = [9.9]\n[data.derive.g]\nfrom = "x"\ncut = [0.1]')
    result = apply(table, {"x": "number"}, data)
    assert column(result, "g") == ["0.1 or more", "below 0.1", None, None]
    assert result.flow.changes[0].rows == 1


def test_a_csv_file_gives_the_same_as_its_parquet_file(tmp_path: Path) -> None:
    frame = pd.DataFrame(
        {
            "a": pd.to_datetime(["2020-02-28", "2020-03-01", None]),
            "b": pd.to_datetime(["2020-03-01"] * 3),
            "x": [1, 2, 3],
        }
    )
    frame = frame.astype({"a": "datetime64[us]", "b": "datetime64[us]"})
    frame.to_csv(tmp_path / "rows.csv", index=False)
    frame.to_parquet(tmp_path / "rows.parquet")
    engine = ibis.duckdb.connect()
    data = plan('[data]\nwhere = "x < 3 and a > date(1999, 1, 1)"\n[data.derive.d]\ndays = { from = "a", to = "b" }')
    for table in (engine.read_csv(tmp_path / "rows.csv"), engine.read_parquet(tmp_path / "rows.parquet")):
        result = apply(table, kinds_of(table), data)
        assert sorted(column(result, "d")) == [0, 2]
