"""Through Spark the same people are counted as in a file that the embedded engine reads."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from data.spark.spark_session import opened, spark

from adjustplan.data import Patterns, Wanted, open_data, reduce_to_patterns
from adjustplan.data.checks import show
from adjustplan.data.reduction import distinct_values
from adjustplan.errors import DataError

__all__ = ["spark"]
pytestmark = pytest.mark.usefixtures("spark")
QUESTIONS = {
    "risks": Wanted("ill", {"night": "night", "site": "site", "day shift": "Tag.schicht `x`"}),
    "signed zeros": Wanted("glucose", {"shift": "shift"}),
    "means": Wanted("glucose", {"site": "site"}),
    "rates under weights": Wanted("ill", {"site": "site"}, person_time="years", weight="weight"),
    "clusters": Wanted("ill", {"night": "night"}, {"cluster": "site"}),
    "atoms": Wanted("ill", {"night": "night"}, {"entry": "shift"}, weight="weight", atoms=True),
    "an outcome in words": Wanted("site", {"night": "night"}),
}


def people(count: int = 400) -> pd.DataFrame:
    """People with everything that may go wrong in a column: blanks, words with accents, NaN, −0, nothing."""
    random = np.random.default_rng(6)
    rows = pd.DataFrame(
        {
            "night": random.integers(0, 3, count),
            "site": random.choice(["east", "wést “7”", " ", "", "East", None], count),
            "Tag.schicht `x`": random.choice(np.array([True, False, None], dtype=object), count),
            "shift": random.choice([0.0, -0.0, 1.5, np.nan], count),
            "glucose": random.normal(5, 1, count),
            "years": random.uniform(1, 9, count).round(1),
            "weight": random.choice([0.5, 1.0, 2.0], count),
            "ill": random.random(count) < 0.3,
        }
    )
    rows["ill"] = rows["ill"].astype(object).where(random.random(count) < 0.9, None)
    rows.loc[random.random(count) < 0.1, "glucose"] = np.nan
    return rows


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """The people in one file, and in a folder of three, whose name would be a pattern."""
    place, rows = tmp_path_factory.mktemp("spark"), people()
    rows.to_parquet(place / "all.parquet", index=False)
    (place / "parts[1]").mkdir()
    for number, part in enumerate((rows[:7], rows[7:300], rows[300:])):
        part.to_parquet(place / "parts[1]" / f"{number}.parquet", index=False)
    return place


def assert_same(one: Patterns, other: Patterns) -> None:
    pd.testing.assert_frame_equal(one.values, other.values, check_dtype=False)
    pd.testing.assert_frame_equal(one.keys, other.keys, check_dtype=False)
    assert one.kinds == other.kinds
    assert one.rows.tolist() == other.rows.tolist()
    for name, found in vars(one.moments).items():
        np.testing.assert_allclose(found, getattr(other.moments, name), rtol=1e-12, atol=1e-12, err_msg=name)
    np.testing.assert_equal(
        [getattr(one.outcome, name) for name in one.outcome.__slots__],
        [getattr(other.outcome, name) for name in one.outcome.__slots__],
    )


@pytest.mark.parametrize("question", QUESTIONS)
def test_the_same_people_make_the_same_patterns(folder, question):
    with open_data(folder / "all.parquet") as source:
        expected = reduce_to_patterns(source, QUESTIONS[question])
    with opened("spark:./parts[1]", folder) as source:
        assert_same(reduce_to_patterns(source, QUESTIONS[question]), expected)
    assert expected.total == 400


def test_infinite_outcomes_are_counted_and_left_out(tmp_path):
    rows = pd.DataFrame({"glucose": [5.0, np.inf, -np.inf, np.nan, 7.0], "night": [0, 0, 1, 1, 1]})
    rows.to_parquet(tmp_path / "rows.parquet")
    with opened("spark:rows.parquet", tmp_path) as source:
        patterns = reduce_to_patterns(source, Wanted("glucose", {"night": "night"}))
    assert patterns.outcome.infinite == 2
    assert patterns.mean.tolist() == [5.0, 7.0]


def test_the_values_of_a_column_are_named(folder):
    with opened("spark:all.parquet", folder) as source:
        assert distinct_values(source, "site", 10) == ["", " ", "East", "east", "wést “7”"]
        assert show(distinct_values(source, "night", 5)) == "“0”, “1”, “2”"
        assert distinct_values(source, "glucose", 5) is None


def test_every_kind_of_column_is_known(folder):
    with opened("spark:all.parquet", folder) as source, open_data(folder / "all.parquet") as same:
        assert source.kinds == same.kinds


def test_columns_that_differ_only_in_capitals_are_both_seen(tmp_path):
    pd.DataFrame({"Age": [1], "age": [2], "site": ["east"]}).to_parquet(tmp_path / "rows.parquet")
    with opened("spark:rows.parquet", tmp_path) as source:
        assert source.repeated == {"Age", "age"}


def test_a_table_of_the_catalogue_is_opened_by_its_name(spark, folder):
    spark.read.parquet(str(folder / "all.parquet")).createGlobalTempView("cohort")
    try:
        with opened("spark:global_temp.cohort") as source:
            assert int(source.table.count().execute()) == 400
    finally:
        spark.catalog.dropGlobalTempView("cohort")


def test_the_settings_of_a_session_that_was_there_stay_as_they_are(spark, folder):
    before = {row["key"]: row["value"] for row in spark.sql("SET").collect()}
    spark.conf.set("spark.sql.caseSensitive", "false")
    try:
        with opened("spark:all.parquet", folder):
            assert spark.conf.get("spark.sql.caseSensitive") == "false"
    finally:
        spark.conf.set("spark.sql.caseSensitive", "true")
    assert {row["key"]: row["value"] for row in spark.sql("SET").collect()} == before
    assert [table.name for table in spark.catalog.listTables()] == []


def finding_of(place, folder, going=None):
    """What is said when a place is opened, one of its files goes, and the people are counted."""
    with pytest.raises(DataError) as caught, opened(place, folder) as source:  # noqa: PT012
        if going is not None:
            going.unlink()
        reduce_to_patterns(source, Wanted("glucose", {"night": "night"}))
    (finding,) = caught.value.findings
    assert "\n" not in str(finding)
    assert caught.value.__suppress_context__
    return finding


def test_what_is_not_there_is_said(tmp_path):
    (tmp_path / "empty").mkdir()
    assert finding_of("spark:rows.parquet", tmp_path).code == "data-no-file"
    assert finding_of("spark:./empty", tmp_path).code == "data-no-file"
    assert finding_of("spark:global_temp.nothing", tmp_path).code == "data-no-table"
    assert finding_of("spark:nowhere.cohort", tmp_path).code == "data-no-table"


def test_files_that_are_no_parquet_or_break_off_are_unreadable(tmp_path):
    (tmp_path / "words.parquet").write_text("glucose,night\n5,1\n")
    people(4000).to_parquet(tmp_path / "broken.parquet")
    whole = (tmp_path / "broken.parquet").read_bytes()
    (tmp_path / "broken.parquet").write_bytes(bytes(len(whole) - 20_000) + whole[-20_000:])
    assert finding_of("spark:words.parquet", tmp_path).code == "data-unreadable"
    assert finding_of("spark:broken.parquet", tmp_path).code == "data-unreadable"


def test_parts_whose_columns_have_different_types_are_refused(tmp_path):
    (tmp_path / "parts").mkdir()
    pd.DataFrame({"glucose": [5.0], "night": [1]}).to_parquet(tmp_path / "parts" / "0.parquet")
    pd.DataFrame({"glucose": ["five"], "night": [1]}).to_parquet(tmp_path / "parts" / "1.parquet")
    assert finding_of("spark:./parts", tmp_path).code == "data-parts-differ"


def test_a_file_that_goes_away_is_an_error_and_not_fewer_people(tmp_path):
    (tmp_path / "parts").mkdir()
    for number in range(3):
        people(50).to_parquet(tmp_path / "parts" / f"{number}.parquet")
    assert finding_of("spark:./parts", tmp_path, tmp_path / "parts" / "1.parquet").code == "data-no-file"
