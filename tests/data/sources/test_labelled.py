"""What Stata and SPSS know of a value is used and said: labels become levels, codes for missing become missing."""

from __future__ import annotations

import datetime as dt

import numpy as np
import pandas as pd
import pyreadstat
import pytest
from data.sources.sas_file import write_sas

import adjustplan.data.sources.labelled as labelled
from adjustplan.data import open_data


def stata(path, rows, **about):
    pyreadstat.write_dta(pd.DataFrame(rows), path, **about)
    return path


def spss(path, rows, **about):
    pyreadstat.write_sav(pd.DataFrame(rows), path, **about)
    return path


def opened(path):
    with open_data(path) as source:
        values = {name: [None if pd.isna(v) else v for v in source.table[name].execute()] for name in source.kinds}
        assert source.notes == tuple(note for notes in source.column_notes.values() for note in notes)
        return (
            values,
            dict(source.kinds),
            {n: [(f.code, f.severity, f.message) for f in v] for n, v in source.column_notes.items()},
        )


SITE = {"site": {1: "east", 2: "west"}}


@pytest.mark.parametrize(("write", "name"), [(stata, "a.dta"), (spss, "a.sav")])
def test_value_labels_become_levels_and_are_said(tmp_path, write, name):
    rows = {"site": [1.0, 2, np.nan, 1], "y": [0.0, 1, 1, 0]}
    values, kinds, notes = opened(write(tmp_path / name, rows, variable_value_labels=SITE))
    assert values["site"] == ["east", "west", None, "east"]
    assert kinds == {"site": "text", "y": "number"}
    assert notes == {"site": [("data-value-labels", "note", "The value labels of “site” became its levels.")]}


def test_codes_for_missing_become_missing_and_are_counted_in_stata(tmp_path):
    rows = {"income": [10.0, "a", "b", "a", np.nan], "y": [1.0, 2, 3, 4, 5]}
    labels = {"income": {"a": "refused"}}
    path = stata(tmp_path / "a.dta", rows, missing_user_values={"income": ["a", "b"]}, variable_value_labels=labels)
    values, kinds, notes = opened(path)
    assert values["income"] == [10, None, None, None, None]
    assert kinds["income"] == "number"
    message = "User-defined codes of “income” became missing: .a in 2 rows, .b in 1 row."
    assert notes == {"income": [("data-missing-codes", "note", message)]}


def test_codes_for_missing_become_missing_and_are_counted_in_sas(tmp_path):
    rows = [[10.0, dt.date(2020, 1, 1)], ["A", "B"], ["Z", None], ["A", dt.date(2020, 1, 2)], [None, None]]
    write_sas(tmp_path / "a.sas7bdat", {"income": (None, ""), "day": (None, "DATE")}, rows)
    values, kinds, notes = opened(tmp_path / "a.sas7bdat")
    assert values["income"] == [10, None, None, None, None]
    assert values["day"] == [pd.Timestamp(2020, 1, 1), None, None, pd.Timestamp(2020, 1, 2), None]
    assert kinds == {"income": "number", "day": "other"}
    assert [note[2] for note in notes["income"] + notes["day"]] == [
        "User-defined codes of “income” became missing: .A in 2 rows, .Z in 1 row.",
        "User-defined codes of “day” became missing: .B in 1 row.",
    ]


def test_codes_for_missing_become_missing_and_are_counted_in_spss(tmp_path):
    rows = {"age": [30.0, 99, -3, -1, 98.5], "word": ["x", "zz", "", "zz", "y"], "y": [1.0] * 5}
    ranges = {"age": [99, {"lo": -10, "hi": -1}], "word": ["zz"]}
    path = spss(tmp_path / "a.sav", rows, missing_ranges=ranges, variable_value_labels={"age": {99: "refused"}})
    values, kinds, notes = opened(path)
    assert values["age"] == [30, None, None, None, 98.5]
    assert [value or None for value in values["word"]] == ["x", None, None, None, "y"]
    assert kinds == {"age": "number", "word": "text", "y": "number"}
    (age,), (word,) = notes["age"], notes["word"]
    assert {part in age[2] for part in ("99 in 1 row", "-1 in 1 row", "-3 in 1 row")} == {True}
    assert word[2] == "User-defined codes of “word” became missing: zz in 2 rows."


def test_days_that_mean_missing_become_missing(tmp_path):
    days = [dt.date(2020, 1, 1), dt.date(1999, 9, 9), None]
    seconds = (dt.datetime(1999, 9, 9) - dt.datetime(1582, 10, 14)).total_seconds()
    path = spss(tmp_path / "a.sav", {"day": days, "y": [1.0, 2, 3]}, missing_ranges={"day": [seconds]})
    values, kinds, notes = opened(path)
    assert values["day"] == [pd.Timestamp(2020, 1, 1), None, None]
    assert kinds["day"] == "other"
    assert notes["day"][0][2] == "User-defined codes of “day” became missing: 1999-09-09 in 1 row."


@pytest.mark.parametrize(("write", "name"), [(stata, "a.dta"), (spss, "a.sav")])
def test_labels_for_some_values_only_leave_numbers_and_a_warning(tmp_path, write, name, monkeypatch):
    monkeypatch.setattr(labelled, "_CELLS_PER_CHUNK", 0)  # chunks of a thousand rows
    rows = {"dose": [1.0] * 1500 + [2.5, 3.0], "site": [1.0, 2] * 751}
    labels = {"dose": {1: "low"}, **SITE}
    values, kinds, notes = opened(write(tmp_path / name, rows, variable_value_labels=labels))
    assert kinds == {"dose": "number", "site": "text"}
    assert sum(values["dose"]) == 1505.5
    assert [code for code, _, _ in notes["dose"]] == ["data-labels-partial"]
    assert notes["dose"][0][1] == "warning"
    assert "not for its values in 2 rows" in notes["dose"][0][2]
    assert [code for code, _, _ in notes["site"]] == ["data-value-labels"]


def test_two_values_with_one_label_stay_two_levels(tmp_path):
    labels = {"site": {1: "e", 2: "e", 3: "w"}}
    path = stata(tmp_path / "a.dta", {"site": [1.0, 2, 3]}, variable_value_labels=labels)
    assert opened(path)[0]["site"] == ["e (1)", "e (2)", "w"]


@pytest.mark.parametrize(("write", "name"), [(stata, "a.dta"), (spss, "a.sav")])
def test_chunks_join_without_a_seam(tmp_path, write, name, monkeypatch):
    monkeypatch.setattr(labelled, "_CELLS_PER_CHUNK", 0)
    count = 2500
    first = dt.date(2020, 1, 1)
    days = [first] + [None] * 2000 + [first + dt.timedelta(days=place) for place in range(count - 2001)]
    rows = {
        "number": np.arange(count) / 8,
        "day": days,
        "never": [np.nan] * count,
        "late": [""] * 2400 + ["x"] * 100,
        "when": [pd.NaT] * 2499 + [pd.Timestamp("2021-02-03 04:05:06")],
    }
    values, kinds, _ = opened(write(tmp_path / name, rows))
    assert values["number"] == list(np.arange(count) / 8)
    assert values["day"] == [None if day is None else pd.Timestamp(day) for day in days]
    assert values["never"] == [None] * count
    assert [value or "" for value in values["late"]] == [""] * 2400 + ["x"] * 100
    assert values["when"][-1] == pd.Timestamp("2021-02-03 04:05:06")
    assert kinds == {"number": "number", "day": "other", "never": "number", "late": "text", "when": "other"}


def test_codes_met_in_one_chunk_only_do_not_change_the_kind(tmp_path, monkeypatch):
    monkeypatch.setattr(labelled, "_CELLS_PER_CHUNK", 0)
    rows = {"age": [30.0] * 1000 + ["a"] * 1000 + [31.0] * 5, "y": [1.0] * 2005}
    values, kinds, notes = opened(stata(tmp_path / "a.dta", rows, missing_user_values={"age": ["a"]}))
    assert (kinds["age"], values["age"].count(None), sum(v for v in values["age"] if v)) == ("number", 1000, 30155)
    assert ".a in 1000 rows" in notes["age"][0][2]


def test_names_that_differ_in_capitals_only_cannot_be_told_apart(tmp_path):
    with open_data(stata(tmp_path / "a.dta", {"Age": [1.0], "age": [2.0], "y": [3.0]})) as source:
        assert source.repeated == {"Age", "age"}
        assert source.table.columns == ("y",)


@pytest.mark.parametrize(("write", "name"), [(stata, "a.dta"), (spss, "a.sav")])
def test_a_file_without_rows_has_its_columns(tmp_path, write, name):
    path = write(tmp_path / name, {"y": pd.Series([], dtype=float), "word": pd.Series([], dtype=object)})
    values, kinds, notes = opened(path)
    assert (values, list(kinds), notes) == ({"y": [], "word": []}, ["y", "word"], {})
