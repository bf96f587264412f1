"""Whatever kind of file holds the same people, the same patterns and the same fingerprint come out of it."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from data.sources.kinds import COLUMNS, FILES, people, write

from adjustplan.data import Patterns, Wanted, open_data, reduce_to_patterns
from adjustplan.data.source import Source
from adjustplan.data.sources.fingerprint import fingerprint
from adjustplan.errors import DataError


def patterns(source: Source) -> Patterns:
    return reduce_to_patterns(source, Wanted("glucose", {"night": "night", "site": "site"}))


@pytest.mark.parametrize("name", FILES)
def test_every_kind_of_file_holds_the_same_people(tmp_path, name):
    rows = people()
    with open_data(write(rows, tmp_path / name)) as source:
        found, prints = patterns(source), fingerprint(source, COLUMNS)
        assert dict(source.kinds) == {"night": "number", "site": "text", "glucose": "number", "day": "other"}
        assert source.table.schema()["day"].is_date() or source.table.schema()["day"].is_timestamp()
        assert source.table["day"].max().execute() == pd.Timestamp(rows["day"].max())
    groups = rows.assign(night=rows["night"].astype(float)).groupby(["night", "site"], dropna=False)["glucose"]
    expected = groups.agg(["size", "count", "mean"]).reset_index()
    assert (
        found.values.fillna("missing").to_numpy().tolist()
        == expected[["night", "site"]].fillna("missing").to_numpy().tolist()
    )
    assert found.rows.tolist() == expected["size"].tolist()
    assert found.observed.tolist() == expected["count"].tolist()
    np.testing.assert_allclose(found.mean, expected["mean"], rtol=1e-13)
    with open_data(write(rows, tmp_path / "plain.csv")) as source:
        assert fingerprint(source, COLUMNS) == prints


@pytest.mark.parametrize("name", FILES)
def test_nothing_is_left_in_the_temporary_folder(tmp_path, name, monkeypatch):
    spare = tmp_path / "spare"
    spare.mkdir()
    monkeypatch.setattr(tempfile, "tempdir", str(spare))
    write(people(), tmp_path / name)

    def count_until_stopped(source: Source) -> None:
        patterns(source)
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt), open_data(tmp_path / name) as source:
        count_until_stopped(source)
    assert list(spare.iterdir()) == []


@pytest.mark.parametrize("name", [name for name in FILES if not name.startswith("parts")])
@pytest.mark.parametrize("content", [b"", b"\x00\xff nonsense \xfe" * 300])
def test_a_file_that_is_not_what_its_name_says_is_one_finding(tmp_path, name, content):
    (tmp_path / name).write_bytes(content)
    with pytest.raises(DataError) as caught, open_data(tmp_path / name) as source:
        source.table.count().execute()
    (finding,) = caught.value.findings
    assert finding.code == ("data-empty" if not content else finding.code)
    assert finding.code in ("data-empty", "data-unreadable", "data-not-utf8")
    assert finding.file == str(tmp_path / name)
    assert "nonsense" not in str(finding)


# Plain text can be cut without anybody being able to tell, and XPT knows no number of rows.
UNTOLD = ("rows.csv", "rows.tsv", "rows.xpt")


@pytest.mark.parametrize("name", [name for name in FILES if not name.startswith("parts") and name not in UNTOLD])
def test_a_file_cut_short_is_one_finding(tmp_path, name):
    whole = write(people(3000), tmp_path / name).read_bytes()
    (tmp_path / name).write_bytes(whole[: len(whole) // 2])
    with pytest.raises(DataError) as caught, open_data(tmp_path / name) as source:
        source.table.count().execute()
    assert [finding.code for finding in caught.value.findings] == ["data-unreadable"]


@pytest.mark.parametrize("name", FILES)
def test_what_is_not_there_is_one_finding(tmp_path, name):
    with pytest.raises(DataError) as caught, open_data(tmp_path / name):
        pass
    expected = "data-unknown-format" if name == "parts" else "data-no-file"
    assert [finding.code for finding in caught.value.findings] == [expected]


def test_a_file_that_may_not_be_read_is_one_finding(tmp_path, monkeypatch):
    def refuse(*_arguments, **_options):
        raise PermissionError(13, "Permission denied")

    write(people(), tmp_path / "rows.sav")
    monkeypatch.setattr(Path, "open", refuse)  # root, as CI is, may read everything
    with pytest.raises(DataError, match="Permission denied"), open_data(tmp_path / "rows.sav"):
        pass


def test_a_relative_path_written_as_text_is_relative_to_the_folder_given(tmp_path):
    write(people(), tmp_path / "rows.parquet")
    write(people(), tmp_path / "parts")
    for place in ("rows.parquet", "parts", "par?s/part-*.parquet", tmp_path / "parts"):
        with open_data(place, folder=tmp_path) as source:
            assert source.table.count().execute() == 300
            assert source.place == str(tmp_path / place)
            assert source.name == Path(place).name


def test_a_table_in_data_without_tables_is_a_finding(tmp_path):
    with pytest.raises(DataError, match="no tables in them"), open_data(write(people(), tmp_path / "a.csv"), table="t"):
        pass


@pytest.mark.parametrize("damage", ["cut", "flipped", "checksum"])
def test_a_damaged_gzip_file_is_never_counted(tmp_path, damage):
    place = write(people(20_000), tmp_path / "rows.csv.gz")
    content = bytearray(place.read_bytes())
    if damage == "cut":
        del content[len(content) // 2 :]
    else:
        content[len(content) // 2 if damage == "flipped" else -6] ^= 0x55
    place.write_bytes(content)
    with pytest.raises(DataError, match="damaged or cut short"), open_data(place):
        pass


def test_a_broken_line_deep_inside_a_gzip_file_is_placed(tmp_path):
    lines = pd.Series(["night\ty", *["1\t0"] * 30_000, "1\t0\tsecret"])
    lines.to_csv(tmp_path / "rows.tsv.gz", index=False, header=False, quoting=3, sep="\x01", compression="gzip")
    with pytest.raises(DataError) as caught, open_data(tmp_path / "rows.tsv.gz") as source:
        source.table.count().execute()
    assert caught.value.findings[0].line == 30_002
    assert "secret" not in str(caught.value)


def test_commas_in_the_header_of_a_tsv_file_are_part_of_a_name(tmp_path):
    (tmp_path / "a.tsv").write_text("age, years, at entry\ty\n30\t1\n", encoding="utf-8")
    with open_data(tmp_path / "a.tsv") as source:
        assert list(source.kinds) == ["age, years, at entry", "y"]
