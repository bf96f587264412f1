"""What stands behind “spark:” in a plan is read before Spark is started, and shows no secret."""

from __future__ import annotations

import pytest

from adjustplan.data.spark.opening import open_spark
from adjustplan.data.spark.place import is_spark, read_place
from adjustplan.errors import DataError


def code_of(place, folder=None):
    with pytest.raises(DataError) as caught, open_spark(place, folder):
        pass
    return caught.value.findings[0]


def test_a_place_is_a_table_a_path_or_a_storage():
    assert read_place("spark:cohort").table == "cohort"
    assert read_place("spark:lake.health.cohort").table == "lake.health.cohort"
    assert read_place("spark:hdfs://storage/cohort").files == "hdfs://storage/cohort"
    assert read_place("spark:/lake/cohort").files == "/lake/cohort"
    assert is_spark("spark:cohort")
    assert not is_spark("rows.parquet")


def test_a_relative_path_is_relative_to_the_plan(tmp_path):
    assert read_place("spark:cohort.parquet", tmp_path).files == f"file:{tmp_path}/cohort.parquet"
    assert read_place("spark:parts/*.parquet", tmp_path).files == f"file:{tmp_path}/parts/*.parquet"


def test_a_folder_of_just_that_name_is_meant_before_a_pattern(tmp_path):
    (tmp_path / "parts[1]").mkdir()
    assert read_place("spark:./parts[1]", tmp_path).files == rf"file:{tmp_path}/parts\[1\]"
    assert read_place("spark:./parts[2]", tmp_path).files == f"file:{tmp_path}/parts[2]"


def test_a_key_in_a_storages_url_is_refused_and_not_repeated():
    finding = code_of("spark:s3a://AKIA:hush/hush@lake/cohort")
    assert finding.code == "data-credentials"
    assert "hush" not in str(finding)
    assert read_place("spark:abfss://lake@account.example/cohort").files == "abfss://lake@account.example/cohort"


def test_what_is_neither_path_nor_table_is_refused():
    for place in ("spark:", "spark:a b", "spark:one.two.three.four", "spark:x; DROP TABLE y"):
        assert code_of(place).code == "data-unknown-format"


def test_the_files_of_a_table_with_a_history_are_not_its_rows(tmp_path):
    (tmp_path / "cohort" / "_delta_log").mkdir(parents=True)
    assert code_of("spark:./cohort", tmp_path).code == "data-unknown-format"
