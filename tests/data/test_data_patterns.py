"""The engine's counts are those that pandas gets from the rows, whatever the columns are called and hold."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from adjustplan.data import Patterns, Wanted, open_data, reduce_to_patterns
from adjustplan.errors import DataError


def write(rows: pd.DataFrame, path: Path) -> Path:
    if path.suffix == ".parquet":
        rows.to_parquet(path, index=False)
    else:
        rows.to_csv(path, index=False)
    return path


def reduced(path: Path, outcome: str, variables: dict[str, str]) -> Patterns:
    with open_data(path) as source:
        return reduce_to_patterns(source, Wanted(outcome, variables))


def people(count: int = 500) -> pd.DataFrame:
    random = np.random.default_rng(4)
    rows = pd.DataFrame(
        {
            "night": random.integers(0, 2, count),
            "site": random.choice(["east", "west"], count),
            "glucose": random.normal(5, 1, count),
        }
    )
    rows.loc[random.random(count) < 0.1, "site"] = None
    rows.loc[random.random(count) < 0.1, "glucose"] = np.nan
    return rows


@pytest.mark.parametrize("name", ["rows.csv", "rows.parquet", "ROWS.CSV"])
def test_rows_means_and_deviations_are_those_of_the_rows(tmp_path, name):
    rows = people()
    rows.to_csv(tmp_path / name, index=False) if name.lower().endswith("csv") else write(rows, tmp_path / name)
    patterns = reduced(tmp_path / name, "glucose", {"night": "night", "site": "site"})
    groups = rows.groupby(["night", "site"], dropna=False)["glucose"]
    assert len(patterns) == len(groups) == 6
    assert patterns.total == len(rows)
    assert patterns.missing("site") == rows["site"].isna().sum()
    for place, (night, site) in enumerate(patterns.values.itertuples(index=False)):
        same = rows["site"].isna() if pd.isna(site) else rows["site"] == site
        here = rows[(rows["night"] == night) & same]
        assert patterns.rows[place] == len(here)
        assert patterns.observed[place] == here["glucose"].count()
        assert patterns.mean[place] == pytest.approx(here["glucose"].mean(), rel=1e-12)
        expected = here["glucose"].var(ddof=0) * here["glucose"].count()
        assert patterns.deviations[place] == pytest.approx(expected, rel=1e-10)


def test_pooling_patterns_keeps_every_moment(tmp_path):
    rows = people()
    patterns = reduced(write(rows, tmp_path / "rows.csv"), "glucose", {"night": "night", "site": "site"})
    complete = rows.dropna()
    both = patterns.complete(["night", "site"])
    alone = both.complete(["night"])
    assert both.total == alone.total == len(complete)
    for place, night in enumerate(alone.values["night"]):
        here = complete.loc[complete["night"] == night, "glucose"]
        assert alone.mean[place] == pytest.approx(here.mean(), rel=1e-12)
        assert alone.deviations[place] == pytest.approx(here.var(ddof=0) * len(here), rel=1e-10)


def test_names_and_values_never_become_part_of_a_query(tmp_path):
    strange = 'a"; DROP TABLE rows; --'
    rows = people().rename(columns={"site": strange})
    rows[strange] = rows[strange].where(rows[strange] != "east", "x'); DELETE")
    for name in ("rows.csv", "rows.parquet"):
        patterns = reduced(write(rows, tmp_path / name), "glucose", {"night": "night", "site": strange})
        assert set(patterns.levels("site").index) == {"x'); DELETE", "west"}
        assert patterns.total == len(rows)


@pytest.mark.parametrize("folder", ["site=3", "a b", "[x]*?"])
@pytest.mark.parametrize("ending", ["csv", "parquet"])
def test_the_name_of_a_file_or_folder_means_nothing(tmp_path, folder, ending):
    place = tmp_path / folder
    place.mkdir()
    with open_data(write(people(), place / f"rows[1]*.{ending}")) as source:
        assert list(source.kinds) == ["night", "site", "glucose"]
        assert source.table.count().execute() == 500


@pytest.mark.parametrize("separator", [",", ";", "\t", "|"])
def test_the_separator_is_read_off_the_header(tmp_path, separator):
    people().to_csv(tmp_path / "rows.csv", sep=separator, index=False)
    with open_data(tmp_path / "rows.csv") as source:
        assert source.kinds == {"night": "number", "site": "text", "glucose": "number"}


def test_a_line_that_starts_with_a_hash_is_data(tmp_path):
    tmp_path.joinpath("rows.csv").write_text("site,night,y\n#1,0,1\n#2,1,0\n", encoding="utf-8")
    assert reduced(tmp_path / "rows.csv", "y", {"night": "night", "site": "site"}).total == 2


def test_a_byte_order_mark_is_no_part_of_the_first_name(tmp_path):
    tmp_path.joinpath("rows.csv").write_text("\ufeffnight,y\n0,1\n1,0\n", encoding="utf-8")
    with open_data(tmp_path / "rows.csv") as source:
        assert list(source.kinds) == ["night", "y"]


def test_kinds_of_parquet_columns_are_told_apart(tmp_path):
    rows = pd.DataFrame({"a": [True, False], "b": ["x", "y"], "c": [1, 2], "d": pd.to_datetime(["2021-01-01"] * 2)})
    rows["e"] = rows["b"].astype("category")
    with open_data(write(rows, tmp_path / "rows.parquet")) as source:
        assert dict(source.kinds) == {"a": "boolean", "b": "text", "c": "number", "d": "other", "e": "text"}


def test_a_broken_line_deep_inside_is_placed(tmp_path):
    lines = ["night,y", *["1,0"] * 60_000, "1,0,secret"]
    tmp_path.joinpath("rows.csv").write_text("\n".join(lines), encoding="utf-8")
    with pytest.raises(DataError) as caught:
        reduced(tmp_path / "rows.csv", "y", {"night": "night"})
    assert caught.value.findings[0].line == 60_002
    assert "secret" not in str(caught.value)


def test_importing_the_floor_above_loads_no_numerical_library():
    heavy = "('pandas', 'statsmodels', 'ibis', 'scipy')"
    code = f"import sys, adjustplan.estimate; print([m for m in {heavy} if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
