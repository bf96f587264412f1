"""Sums over the rows, taken inside the executors, so that only a few hundred numbers come back.

Spark divides the rows into partitions. For each, an executor runs through its rows in Arrow batches, hands each batch
as a block of numbers to a function, and adds up what the function gives. The partitions' sums are then added up here.

Every addition of floats rounds, and how partitions are cut, and which comes back first, is Spark's own affair. So that
neither shows in the digits, each partition keeps beside every sum what was rounded off it (Neumaier 1974, ZAMM 54:39),
and the parts are added without any rounding but the last (Shewchuk 1997, Discrete and Computational Geometry 18:305).
What is left is the rounding inside a block, some 1e-16 of what is summed.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Sequence
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np

from adjustplan.data.moments import Floats

if TYPE_CHECKING:
    import ibis
    import pyarrow as pa
    from pyspark.sql import DataFrame

Parameters = TypeVar("Parameters")


def frame_of(table: ibis.Table) -> DataFrame:
    """The rows of an expression over an open Spark source, as Spark has them."""
    engine = table.get_backend()
    frame: DataFrame = engine.raw_sql(engine.compile(table))
    return frame


def sum_over_rows(
    frame: DataFrame,
    columns: Sequence[str],
    function: Callable[[Floats, Parameters], Floats],
    parameters: Parameters,
    *,
    least: int = 0,
) -> Floats:
    """Add up what a function gives for blocks of rows.

    Parameters
    ----------
    frame : pyspark.sql.DataFrame
    columns : sequence of str
        Columns of numbers or booleans; what is missing is not a number in the blocks.
    function : function of (array of float, shape (rows, columns)) and the parameters
        Gives an array of floats, always of the same length, also for a block without rows. It is pickled, and so are
        the parameters: what it uses must be installed where the executors run.
    parameters
        Handed to the function: coefficients, say.
    least : int
        So many numbers at the end of the array are not added up: the least of them is taken (of a number with its sign
        turned, this gives the greatest).

    Returns
    -------
    array of float
        What the function gives for a block without rows, where there are none.
    """
    names = [f"c{place}" for place in range(len(columns))]
    chosen = [_column(frame, column).cast("double").alias(name) for column, name in zip(columns, names, strict=True)]
    numbers = frame.select(*chosen)
    start = np.asarray(function(np.empty((0, len(columns))), parameters), dtype=np.float64)
    added = len(start) - least

    def summarise(batches: Iterable[pa.RecordBatch]) -> bytes:
        sums, rests, lowest = np.zeros(added), np.zeros(added), start[added:].copy()
        for batch in batches:
            found = function(_block(batch, names), parameters)
            sums, rests = _add(sums, rests, found[:added])
            lowest = np.fmin(lowest, found[added:])
        return np.concatenate([sums, rests, lowest]).astype("<f8").tobytes()

    parts = np.array([np.frombuffer(part, dtype="<f8") for part in each_partition(numbers, summarise)])
    if not len(parts):
        return start
    sums, rests, lowest = np.split(parts, [added, 2 * added], axis=1)
    return np.concatenate([_total(sums, rests), np.fmin.reduce(lowest, axis=0)])


def each_partition(frame: DataFrame, summarise: Callable[[Iterable[pa.RecordBatch]], bytes]) -> list[bytes]:
    """What a function makes of the rows of each partition, inside the executors, in the order of the partitions.

    Parameters
    ----------
    frame : pyspark.sql.DataFrame
    summarise : function of an iterator of Arrow record batches
        Pickled and sent to the executors; gives some bytes. A partition may have no rows, and then no batches.
    """

    def run(batches: Iterable[pa.RecordBatch]) -> Iterator[pa.RecordBatch]:
        import pyarrow as pa
        from pyspark import TaskContext

        task = TaskContext.get()
        assert task is not None
        summary = summarise(batches)
        yield pa.RecordBatch.from_arrays(
            [pa.array([task.partitionId()], pa.int32()), pa.array([summary], pa.binary())], ["place", "summary"]
        )

    found = frame.mapInArrow(run, "place int, summary binary").collect()
    return [bytes(row["summary"]) for row in sorted(found, key=lambda row: int(row["place"]))]


def _column(frame: DataFrame, name: str) -> Any:
    """A column by its whole name, whatever letters are in it."""
    return frame["`" + name.replace("`", "``") + "`"]


def _block(batch: pa.RecordBatch, names: Sequence[str]) -> Floats:
    block = np.empty((batch.num_rows, len(names)), order="F")
    for place, name in enumerate(names):
        block[:, place] = batch.column(name).to_numpy(zero_copy_only=False)
    return block


def _add(sums: Floats, rests: Floats, more: Floats) -> tuple[Floats, Floats]:
    """One step of Neumaier's summation, for every sum at once."""
    after = sums + more
    with np.errstate(invalid="ignore"):
        lost = np.where(np.abs(sums) >= np.abs(more), (sums - after) + more, (more - after) + sums)
    return after, rests + np.where(np.isfinite(after), lost, 0.0)


def _total(sums: Floats, rests: Floats) -> Floats:
    """The sum over partitions of each column; infinite or not a number where a part is."""
    with np.errstate(invalid="ignore", over="ignore"):
        total = sums.sum(axis=0)
    for place in np.flatnonzero(np.isfinite(total)):
        total[place] = math.fsum([*sums[:, place], *rests[:, place]])
    return np.asarray(total)
