"""A sheet of a workbook holds what a person sees in it."""

from __future__ import annotations

import datetime as dt

import openpyxl
import pandas as pd
import pytest

from adjustplan.data import open_data
from adjustplan.errors import DataError


def workbook(path, sheets):
    book = openpyxl.Workbook()
    book.remove(book.active)
    for title, rows in sheets.items():
        page = book.create_sheet(title)
        for row in rows:
            page.append(row)
    book.save(path)
    return path


def opened(path, table=None):
    with open_data(path, table=table) as source:
        frame = source.table.execute()
        return {name: [None if pd.isna(v) else v for v in frame[name]] for name in frame}, dict(source.kinds)


def finding_of(path, table=None):
    with pytest.raises(DataError) as caught:
        opened(path, table)
    (finding,) = caught.value.findings
    return finding


def test_each_column_has_the_kind_of_its_cells(tmp_path):
    rows = [
        ["number", "flag", "code", "day", "when", "mixed", "nothing", 2019],
        [1, True, "007", dt.date(2020, 1, 2), dt.datetime(2020, 1, 2, 3, 4), 1, None, 1],
        [2.5, False, "a,b\n“c”", dt.date(2020, 1, 3), dt.datetime(2020, 1, 3), "NA", None, 2],
        [None, None, None, None, None, None, None, None],
        [0.1, None, None, None, None, None, None, 3],
    ]
    values, kinds = opened(workbook(tmp_path / "a.xlsx", {"One": rows}))
    assert values["number"] == [1, 2.5, 0.1]
    assert values["code"] == ["007", "a,b\n“c”", None]
    assert values["day"] == [pd.Timestamp(2020, 1, 2), pd.Timestamp(2020, 1, 3), None]
    assert values["when"] == [pd.Timestamp(2020, 1, 2, 3, 4), pd.Timestamp(2020, 1, 3), None]
    assert values["mixed"] == ["1", "NA", None]
    assert values["2019"] == [1, 2, 3]
    assert kinds == {
        "number": "number", "flag": "boolean", "code": "text", "day": "other", "when": "other", "mixed": "text",
        "nothing": "number", "2019": "number",
    }  # fmt: skip


def test_the_first_sheet_unless_another_is_named(tmp_path):
    path = workbook(tmp_path / "a.xlsx", {"First": [["x"], [1]], "The other": [["x"], [2]]})
    assert opened(path)[0] == {"x": [1]}
    assert opened(path, "The other")[0] == {"x": [2]}
    finding = finding_of(path, "The othr")
    assert (finding.code, finding.remedy) == ("data-no-table", "Did you mean “The other”?")


def test_a_column_without_a_name_is_a_finding(tmp_path):
    path = workbook(tmp_path / "a.xlsx", {"S": [["x", None, "y"], [1, 2, 3]]})
    assert "Column 2 has no name" in finding_of(path).message
    path = workbook(tmp_path / "b.xlsx", {"S": [["x"], [1], [1, 2]]})
    finding = finding_of(path)
    assert (finding.code, finding.line) == ("data-unreadable", 3)


def test_an_empty_sheet_is_a_finding(tmp_path):
    assert finding_of(workbook(tmp_path / "a.xlsx", {"S": []})).code == "data-empty"


def test_a_formula_that_was_never_calculated_is_a_finding_not_a_missing_value(tmp_path):
    finding = finding_of(workbook(tmp_path / "a.xlsx", {"S": [["x", "y"], [1, 2], [3, "=A2+A3"]]}))
    assert "B3" in finding.message
    assert finding.line == 3


def test_two_columns_of_one_name_cannot_be_told_apart(tmp_path):
    with open_data(workbook(tmp_path / "a.xlsx", {"S": [["x", "X", "y"], [1, 2, 3]]})) as source:
        assert source.repeated == {"x", "X"}
        assert source.table.columns == ("y",)
