"""Where Spark finds the data: what stands behind ``spark:`` in a plan.

``spark:parts.parquet``
    A Parquet file or a folder of them, relative to the plan, or absolute; also a pattern such as ``parts/*.parquet``.
``spark:hdfs://storage/parts.parquet``
    The same in a storage of the cluster's own (``hdfs``, ``s3a``, ``abfss``, …).
``spark:warehouse.cohort``
    A table of Spark's catalogue: its name, or ``database.name``, or ``catalogue.database.name``.

Who you are is told by the environment or by Spark's own settings, never by the plan.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from adjustplan.data.sources.opened import data_error
from adjustplan.data.sources.urls import holds_secret, scrubbed

_PREFIX = "spark:"
_TABLE = re.compile(r"\w+(\.\w+){0,2}")
_URL = re.compile(r"[A-Za-z][A-Za-z0-9+.-]*://")


@dataclass(frozen=True, slots=True)
class Place:
    """Where the data are.

    Attributes
    ----------
    shown : str
        What messages call it.
    files : str or None
        What Spark is asked to read as Parquet.
    table : str or None
        The name of the table in the catalogue, where the data are no files.
    """

    shown: str
    files: str | None = None
    table: str | None = None


def is_spark(place: str) -> bool:
    """Whether a plan's ``data`` means Spark."""
    return place.startswith(_PREFIX)


def read_place(place: str, folder: Path | None = None) -> Place:
    """Read a place.

    Parameters
    ----------
    place : str
        With its ``spark:``.
    folder : Path, optional
        What a relative path is relative to; by default the working folder.

    Raises
    ------
    DataError
        ``data-credentials`` where a storage's URL may hold a password or key, ``data-unknown-format`` where there is
        neither a path to Parquet nor the name of a table, and ``data-no-file`` where this machine has no such file.
    """
    rest = place.removeprefix(_PREFIX)
    if _URL.match(rest):
        shown = f"{_PREFIX}{scrubbed(rest)}"
        if holds_secret(rest):
            message = "The place of the data holds a password or a key, or what looks like one."
            remedy = "Take it out and change it; name it in Spark's own settings or the environment."
            raise data_error("data-credentials", message, remedy, shown)
        return Place(shown, files=rest)
    if _TABLE.fullmatch(rest) and not rest.lower().endswith(".parquet"):
        return Place(place, table=rest)
    if "/" not in rest and not rest.lower().endswith(".parquet"):
        message = f"“{rest}” is neither a path to Parquet files nor the name of a table."
        remedy = "Write spark:folder/file.parquet, spark:./folder, or spark:database.table."
        raise data_error("data-unknown-format", message, remedy, place)
    path = Path(rest)
    if not path.is_absolute():
        path = (folder or Path()) / path
        return Place(place, files=f"file:{_literal(path.absolute())}")
    return Place(place, files=_literal(path))


def _literal(path: Path) -> str:
    """A path as Spark has it; where there is a file of just that name, its letters mean nothing but themselves."""
    if not path.exists():
        return str(path)
    return re.sub(r"([\\*?\[\]{}])", r"\\\1", str(path))
