"""Parquet in parts: all alike or a finding, and never a column or a digit lost on the way."""

from __future__ import annotations

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from data.sources.kinds import people, write

from adjustplan.data import open_data
from adjustplan.errors import DataError


def parts(folder, *tables):
    folder.mkdir(exist_ok=True)
    for number, columns in enumerate(tables):
        pq.write_table(pa.table(columns), folder / f"{number}.parquet")
    return folder


def finding_of(place):
    with pytest.raises(DataError) as caught, open_data(place) as source:
        source.table.count().execute()
    (finding,) = caught.value.findings
    return finding


def test_a_part_with_another_column_is_named(tmp_path):
    finding = finding_of(parts(tmp_path / "d", {"a": [1], "b": [2]}, {"a": [1], "b": [2], "c": [3]}))
    assert finding.code == "data-parts-differ"
    assert finding.file == str(tmp_path / "d" / "1.parquet")
    assert "“c”" in finding.message


def test_a_part_with_a_column_of_another_kind_is_named(tmp_path):
    finding = finding_of(parts(tmp_path / "d", {"a": [1], "b": [2]}, {"a": ["x"], "b": [2]}))
    assert (finding.code, "“a”" in finding.message) == ("data-parts-differ", True)


def test_whole_numbers_in_the_first_part_do_not_round_the_second(tmp_path):
    with open_data(parts(tmp_path / "d", {"a": [1], "b": ["x"]}, {"b": ["y"], "a": [2.25]})) as source:
        assert source.table["a"].sum().execute() == 3.25


def test_a_part_without_a_single_value_fits_any_kind(tmp_path):
    empty = {"a": pa.nulls(1)}
    with open_data(parts(tmp_path / "d", empty, {"a": ["x"]}, {"a": ["y"]})) as source:
        assert dict(source.kinds) == {"a": "text"}
    assert finding_of(parts(tmp_path / "e", empty, {"a": ["x"]}, {"a": [1]})).code == "data-parts-differ"


def test_a_broken_part_is_named(tmp_path):
    parts(tmp_path / "d", {"a": [1]}, {"a": [2]})
    (tmp_path / "d" / "1.parquet").write_bytes(b"PAR1 nothing PAR1")
    finding = finding_of(tmp_path / "d")
    assert (finding.code, finding.file) == ("data-unreadable", str(tmp_path / "d" / "1.parquet"))
    (tmp_path / "d" / "1.parquet").write_bytes(b"")
    assert finding_of(tmp_path / "d").code == "data-empty"


def test_folders_may_hold_the_value_of_a_column(tmp_path):
    folder = tmp_path / "site=9" / "lake"
    for site in ("east", "west"):
        (folder / f"site_name={site}").mkdir(parents=True)
        people(10).drop(columns="site").to_parquet(folder / f"site_name={site}" / "part.snappy.parquet", index=False)
    (folder / "_SUCCESS").touch()
    (folder / "_metadata.parquet").write_bytes(b"not a part")
    with open_data(folder) as source:
        assert set(source.kinds) == {"night", "glucose", "day", "site_name"}
        assert sorted(source.table["site_name"].value_counts().execute().iloc[:, 1]) == [10, 10]
    people(5).to_parquet(folder / "more.parquet", index=False)
    assert finding_of(folder).code == "data-parts-differ"


def test_an_empty_folder_is_a_finding(tmp_path):
    assert finding_of(tmp_path).code == "data-no-file"


@pytest.mark.parametrize("name", ["a[12].parquet", "a*.parquet", "p[12]*"])
def test_a_real_name_is_meant_before_a_pattern_is(tmp_path, name):
    people(7).to_parquet(tmp_path / "a1.parquet", index=False)
    if name.endswith(".parquet"):
        people(3).to_parquet(tmp_path / name, index=False)
    else:
        (tmp_path / name).mkdir()
        people(3).to_parquet(tmp_path / name / "x[1].parquet", index=False)
    with open_data(tmp_path / name) as source:
        assert source.table.count().execute() == 3


def test_a_pattern_may_match_nothing_but_parquet(tmp_path):
    people(3).to_parquet(tmp_path / "a1.parquet", index=False)
    people(3).to_csv(tmp_path / "a2.csv", index=False)
    assert finding_of(tmp_path / "a?.*").code == "data-unknown-format"
    assert finding_of(tmp_path / "b?.parquet").code == "data-no-file"


def test_columns_that_differ_in_capitals_only_cannot_be_told_apart(tmp_path):
    with open_data(parts(tmp_path / "d", {"Age": [1], "age": [2], "b": [3]})) as source:
        assert source.repeated == {"Age", "age"}
        assert {"Age", "age", "b"} <= set(source.kinds)


def test_levels_kept_as_a_dictionary_are_text_in_arrow(tmp_path):
    rows = people().assign(site=lambda frame: frame["site"].astype("category"))
    with open_data(write(rows, tmp_path / "rows.arrow")) as source:
        assert source.kinds["site"] == "text"
        assert set(source.table["site"].value_counts().execute()["site"].dropna()) == set(
            pd.unique(rows["site"].dropna())
        )
