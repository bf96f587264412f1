"""Sums taken inside the executors are those of the rows, however the rows are divided."""

from __future__ import annotations

import os
import signal

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from data.spark.spark_session import opened, spark
from scipy.special import expit

from adjustplan.data.spark import each_partition, frame_of, sum_over_rows
from adjustplan.errors import DataError

__all__ = ["spark"]
COLUMNS = ["night", "age", "glucose", "Body.mass `kg`"]
PARTITIONS = (1, 2, 4)


def people(count: int) -> pd.DataFrame:
    random = np.random.default_rng(8)
    age, glucose = random.normal(50, 10, count), random.normal(5, 1, count)
    night = random.random(count) < expit((age - 50) / 20)
    mass = random.lognormal(4.3, 0.2, count)
    ill = random.random(count) < expit(-3 + 0.6 * night + 0.03 * (age - 50) + 0.4 * (glucose - 5) + 0.01 * (mass - 74))
    return pd.DataFrame(dict(zip([*COLUMNS, "ill"], [night, age, glucose, mass, ill.astype(float)], strict=True)))


@pytest.fixture(scope="module")
def rows():
    return people(100_000)


@pytest.fixture(scope="module")
def frames(request, rows, tmp_path_factory):
    """The same rows in one, two and four partitions."""
    request.getfixturevalue("spark")
    folder = tmp_path_factory.mktemp("sums")
    rows.to_parquet(folder / "rows.parquet")
    with opened("spark:rows.parquet", folder) as source:
        frame = frame_of(source.table)
        yield {count: frame.repartition(count).cache() for count in PARTITIONS}


def fitted_by_newton(frame):
    """A logistic regression from its sums alone; coefficients, their covariance and the log-likelihood."""

    def step(block, coefficients):
        columns, outcome = np.column_stack([np.ones(len(block)), block[:, :-1]]), block[:, -1]
        mean = 1 / (1 + np.exp(-columns @ coefficients))
        information = (columns * (mean * (1 - mean))[:, None]).T @ columns
        likelihood = np.sum(outcome * np.log(mean) + (1 - outcome) * np.log1p(-mean))
        return np.concatenate([columns.T @ (outcome - mean), information.ravel(), [likelihood]])

    size = len(COLUMNS) + 1
    coefficients = np.zeros(size)
    for _ in range(9):  # the information is that of the step before the last, which must have settled too
        sums = sum_over_rows(frame, [*COLUMNS, "ill"], step, coefficients)
        information = sums[size:-1].reshape(size, size)
        coefficients = coefficients + np.linalg.solve(information, sums[:size])
    return coefficients, np.linalg.inv(information), sums[-1]


def test_a_logistic_regression_from_sums_is_that_of_statsmodels_on_the_rows(frames, rows):
    columns = sm.add_constant(rows[COLUMNS].astype(float))
    expected = sm.Logit(rows["ill"], columns).fit(disp=0, tol=1e-13)
    found = [fitted_by_newton(frames[count]) for count in PARTITIONS]
    for coefficients, covariance, likelihood in found:
        np.testing.assert_allclose(coefficients, expected.params, rtol=1e-8)
        np.testing.assert_allclose(np.sqrt(np.diag(covariance)), expected.bse, rtol=1e-8)
        assert likelihood == pytest.approx(expected.llf, rel=1e-12)
    for coefficients, covariance, likelihood in found[1:]:
        np.testing.assert_allclose(coefficients, found[0][0], rtol=1e-12)
        np.testing.assert_allclose(covariance, found[0][1], rtol=1e-12, atol=1e-18)
        assert likelihood == pytest.approx(found[0][2], rel=1e-14)


def test_the_same_partitions_give_the_same_digits_again(frames):
    first, second = (sum_over_rows(frames[4], ["age"], lambda block, _: block.sum(axis=0), None) for _ in range(2))
    assert first.tolist() == second.tolist()


def test_nothing_is_rounded_off_between_blocks_and_partitions(spark):
    numbers = [1e16, 1.0, -1e16, 3.0, 2.0**-40, -1.0]
    before = spark.conf.get("spark.sql.execution.arrow.maxRecordsPerBatch")
    spark.conf.set("spark.sql.execution.arrow.maxRecordsPerBatch", "1")
    try:
        for partitions in (1, 2, 6):
            frame = spark.createDataFrame(pd.DataFrame({"x": numbers})).repartition(partitions)
            total = sum_over_rows(frame, ["x"], lambda block, _: block.sum(axis=0), None)
            assert total.tolist() == [3.0 + 2.0**-40]
    finally:
        spark.conf.set("spark.sql.execution.arrow.maxRecordsPerBatch", before)


def test_the_last_numbers_are_least_ones(frames, rows):
    def ends(block, _):
        ages = block[:, 0]
        return np.array([len(ages), ages.min(initial=np.inf), -ages.max(initial=-np.inf)])

    for count in PARTITIONS:
        found = sum_over_rows(frames[count], ["age"], ends, None, least=2)
        assert found.tolist() == [len(rows), rows["age"].min(), -rows["age"].max()]


def test_what_is_missing_is_not_a_number_and_what_is_infinite_stays_so(spark):
    frame = spark.createDataFrame([(1.0, True), (None, None), (3.0, False)], "x double, y boolean").repartition(3)
    counted = sum_over_rows(frame, ["x", "y"], lambda block, _: np.isnan(block).sum(axis=0).astype(float), None)
    assert counted.tolist() == [1.0, 1.0]
    with np.errstate(divide="ignore"):
        logs = sum_over_rows(frame, ["y"], lambda block, _: np.log(np.nan_to_num(block)).sum(axis=0), None)
    assert logs.tolist() == [-np.inf]


def test_no_rows_give_what_a_block_without_rows_gives(spark):
    frame = spark.createDataFrame([], "x double")
    found = sum_over_rows(frame, ["x"], lambda block, _: np.array([len(block), 0.0, np.inf]), None, least=1)
    assert found.tolist() == [0.0, 0.0, np.inf]


def test_partitions_answer_in_their_order(spark):
    frame = spark.range(0, 40, 1, numPartitions=4)

    def first(batches):
        return str(next(batch.column("id")[0].as_py() for batch in batches if batch.num_rows)).encode()

    assert each_partition(frame, first) == [b"0", b"10", b"20", b"30"]


@pytest.mark.usefixtures("spark")
def test_an_executor_that_is_lost_gets_one_line(tmp_path):
    people(1000).to_parquet(tmp_path / "rows.parquet")

    def die(block, home):
        if len(block) and os.getpid() != home:
            os.kill(os.getpid(), signal.SIGKILL)
        return block.sum(axis=0)

    with pytest.raises(DataError) as caught, opened("spark:rows.parquet", tmp_path) as source:
        sum_over_rows(frame_of(source.table), ["age"], die, os.getpid())
    (finding,) = caught.value.findings
    assert finding.code == "data-connection-lost"
    assert "\n" not in str(finding)
    with opened("spark:rows.parquet", tmp_path) as source:
        assert int(source.table.count().execute()) == 1000
