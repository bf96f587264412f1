"""What Spark says when something goes wrong, as one clear line.

Spark speaks in pages of Java, and shows values of people's records in them. So its words are only read here, never
passed on: they tell which of a few things happened.

When an executor is lost, Spark does its share of the work again elsewhere, and nobody hears of it; the numbers are the
same. Only when that fails too, or when the driver itself is gone, does the work end. Nothing was written by then: the
same command, given again, begins anew.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

from adjustplan.data.sources.opened import data_error
from adjustplan.errors import AdjustplanError, DataError

if TYPE_CHECKING:
    from adjustplan.data.spark.session import Running

# What stands in Spark's message, and what it means; the first that fits.
_LOST = (
    "SparkContext was shut down",
    "stopped SparkContext",
    "ExecutorLostFailure",
    "Python worker exited unexpectedly",
    "Python worker failed to connect back",
    "FetchFailed",
    "MetadataFetchFailed",
    "Master removed our application",
    "StatusCode.UNAVAILABLE",
    "RETRIES_EXCEEDED",
    "INVALID_HANDLE.SESSION",
)
_NO_PATH = ("PATH_NOT_FOUND", "Path does not exist", "FILE_NOT_EXIST", "java.io.FileNotFoundException")
_NO_TABLE = ("TABLE_OR_VIEW_NOT_FOUND", "SCHEMA_NOT_FOUND", "CATALOG_NOT_FOUND", "Catalog '")
_NO_PARTS = ("UNABLE_TO_INFER_SCHEMA",)
_UNREADABLE = ("is not a Parquet file", "CANNOT_READ_FILE_FOOTER", "FAILED_READ_FILE", "Could not read footer")
_DIFFERENT_PARTS = ("CONVERT_PARQUET_TYPE", "PARQUET_COLUMN_DATA_TYPE_MISMATCH", "CANNOT_MERGE_SCHEMAS")
_NO_ROOM = ("OutOfMemoryError", "No space left on device", "UNABLE_TO_ACQUIRE_MEMORY")
_NO_RIGHT = ("AccessControlException", "Permission denied", "INSUFFICIENT_PERMISSIONS")
_NO_STORAGE = ("No FileSystem for scheme", "ClassNotFoundException", "UnknownHostException")
_NO_PACKAGE = ("ModuleNotFoundError", "PYTHON_VERSION_MISMATCH", "PACKAGE_NOT_INSTALLED")


@contextmanager
def spark_faults(running: Running, place: str) -> Iterator[None]:
    """Whatever goes wrong with Spark while data are open becomes a DataError that shows no data."""
    try:
        yield
    except AdjustplanError:
        raise
    except Exception as error:
        fault = _fault(running, error, place)
        if fault is None:
            raise
        raise fault from None  # Spark's own text may show values


def _fault(running: Running, error: Exception, place: str) -> DataError | None:
    """The finding behind an error; None for one that is not Spark's."""
    if not running.is_alive():
        return _lost(place)
    from py4j.protocol import Py4JError  # type: ignore[import-untyped]
    from pyspark.errors import PySparkException

    if not isinstance(error, (Py4JError, PySparkException)) and type(error).__module__.partition(".")[0] != "grpc":
        return None
    said = str(error)

    def says(words: tuple[str, ...]) -> bool:
        return any(word in said for word in words)

    if says(_LOST):
        return _lost(place)
    if says(_NO_PACKAGE):
        message = "Spark's executors lack a Python package, or run another version of Python."
        remedy = "Give them the driver's Python, with adjustplan, numpy, scipy and pyarrow, by spark.pyspark.python."
        return data_error("data-spark-workers", message, remedy, place)
    if says(_DIFFERENT_PARTS):
        message = "The parts hold columns of the same name but of different types."
        return data_error("data-parts-differ", message, "Write the parts again, all in one way.", place)
    if says(_UNREADABLE) and not says(("FILE_NOT_EXIST",)):
        return data_error("data-unreadable", "A file cannot be read as Parquet.", "Export it again.", place)
    if says(_NO_STORAGE):
        message = "Spark does not know the storage that the place of the data names."
        remedy = "Check the place, and give Spark the storage's package by spark.jars.packages."
        return data_error("data-no-connection", message, remedy, place)
    if says(_NO_ROOM):
        message = "Spark's memory, or its room for temporary files, was used up."
        remedy = "Give it more by spark.driver.memory, spark.executor.memory or SPARK_LOCAL_DIRS."
        return data_error("data-no-room", message, remedy, place)
    if says(_NO_PATH):
        remedy = "Mend data = …; a relative path is relative to the plan."
        return data_error("data-no-file", "There is no such file or folder where Spark looks.", remedy, place)
    if says(_NO_TABLE):
        message = "Spark's catalogue has no such table."
        return data_error("data-no-table", message, "Mend data = …, or give Spark its catalogue's settings.", place)
    if says(_NO_PARTS):
        message = "There is no Parquet file in this folder."
        return data_error("data-no-file", message, "Name a file, or a folder with .parquet files.", place)
    if says(_NO_RIGHT):
        return data_error("data-refused", "Spark may not read the data.", "Ask for the right to read them.", place)
    if "Traceback (most recent call last)" in said:
        return None  # a fault of the function that ran in the executors
    condition = error.getCondition() if isinstance(error, PySparkException) else None
    named = f" ({condition})" if condition else ""
    remedy = "Look the condition up, or ask whoever runs the cluster."
    return data_error("data-refused", f"Spark would not answer{named}.", remedy, place)


def _lost(place: str) -> DataError:
    message = "The connection to Spark, or one of its executors, was lost before the counting was done."
    return data_error("data-connection-lost", message, "Run the same command again; nothing was written.", place)
