"""A Parquet folder or a table of a cluster, opened through Spark.

The rows stay with the executors: they count, and send the counts. The list of files is made once, when the data are
opened: a file that arrives later is not seen, and one that goes away is an error.
"""

from __future__ import annotations

import uuid
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from adjustplan.data.sources.opened import Opened, data_error, repeated_names
from adjustplan.data.spark.faults import spark_faults
from adjustplan.data.spark.place import Place, read_place
from adjustplan.data.spark.session import spark_session

if TYPE_CHECKING:
    from pyspark.sql import DataFrame, SparkSession


@contextmanager
def open_spark(place: str, folder: Path | None = None) -> Iterator[Opened]:
    """Open data through Spark.

    Parameters
    ----------
    place : str
        As :mod:`adjustplan.data.spark.place` says.
    folder : Path, optional
        What a relative path is relative to; by default the working folder.

    Raises
    ------
    DataError
        If there is nothing there or it cannot be read, Spark does not start, or it or an executor is lost while the
        caller counts (``data-connection-lost``).
    """
    read = read_place(place, folder)
    _refuse(read)
    with spark_session(read.shown) as running, spark_faults(running, read.shown):
        from adjustplan.data.spark.engine import engine_of

        frame = _frame(running.session, read)
        view = f"adjustplan_{uuid.uuid4().hex}"
        frame.createTempView(view)
        yield Opened(engine_of(running.session).table(view), repeated_names(frame.columns))


def _refuse(place: Place) -> None:
    """DataError for a folder whose Parquet files are not all rows that count."""
    if place.files is None:
        return
    folder = Path(place.files.removeprefix("file:"))
    if (folder / "_delta_log").is_dir() or (folder / "metadata" / "version-hint.text").is_file():
        message = "This folder is a table with a history; its files also hold rows that were deleted since."
        remedy = "Name the table as Spark's catalogue has it, or save its rows as Parquet."
        raise data_error("data-unknown-format", message, remedy, place.shown)


def _frame(session: SparkSession, place: Place) -> DataFrame:
    if place.table is not None:
        return session.table(place.table)
    assert place.files is not None
    return session.read.parquet(place.files)
