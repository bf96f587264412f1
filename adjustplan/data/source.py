"""Opening the data: whatever holds them, one table seen through a database engine.

The rows stay in the engine (spoken to through ibis; DuckDB, embedded, unless the data live in a server of their own):
Python gets to know the names and kinds of the columns, and later the counts that it asks for, but never a row. That
keeps memory flat however long the data are, and keeps people's records out of error messages.

What a place is, is read off its name: a URL has ``://``; anything else is a file, a folder of Parquet files or a
pattern such as ``parts/*.parquet``, and a file or folder of just that name is always meant before a pattern is. Each
kind has a file of its own in ``sources``.
"""

from __future__ import annotations

import glob
from collections.abc import Iterator, Mapping
from contextlib import AbstractContextManager, contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from adjustplan.data.patterns import Kind
from adjustplan.data.sources.opened import Opened, data_error
from adjustplan.data.sources.urls import is_url, scrubbed
from adjustplan.data.spark.place import is_spark, read_place
from adjustplan.errors import Finding

if TYPE_CHECKING:
    import ibis

READABLE = "CSV, TSV, Parquet, Arrow, Stata, SAS, SPSS, Excel or DuckDB"
_DELIMITED = (".csv", ".tsv", ".csv.gz", ".tsv.gz")
_ARROW = (".arrow", ".feather")
_LABELLED = (".dta", ".sas7bdat", ".xpt", ".sav")
_DATABASE = (".duckdb", ".db")


@dataclass(frozen=True, eq=False)
class Source:
    """Open data.

    Attributes
    ----------
    path : Path or None
        The file, folder or pattern; None where the data are in a server.
    table : ibis.Table
        The rows, inside the engine; valid while the source is open.
    kinds : mapping of str to {"number", "boolean", "text", "other"}
        Each column's kind; "other" (dates, lists, …) cannot enter a model.
    repeated : frozenset of str
        Column names that the data have more than once, or that differ only in capitals.
    name : str
        What messages call the data: the file's name, or the URL without secrets, and the table.
    place : str
        What a finding names as its file: the path, or the URL without secrets.
    notes : tuple of Finding
        What was done to the data when they were opened: value labels that became levels, codes that became missing.
    column_notes : mapping of str to tuple of Finding
        Those of the notes that concern one column.
    """

    path: Path | None
    table: ibis.Table
    kinds: Mapping[str, Kind]
    repeated: frozenset[str] = frozenset()
    name: str = ""
    place: str = ""
    notes: tuple[Finding, ...] = ()
    column_notes: Mapping[str, tuple[Finding, ...]] = field(default_factory=dict)


@contextmanager
def open_data(place: Path | str, *, table: str | None = None, folder: Path | None = None) -> Iterator[Source]:
    """Open a file, a folder or pattern of Parquet files, a database file or a server.

    Parameters
    ----------
    place : Path or str
        A path whose name ends in ``.csv``, ``.tsv`` (also ``.gz``), ``.parquet``, ``.arrow``, ``.feather``, ``.dta``,
        ``.sas7bdat``, ``.xpt``, ``.sav``, ``.xlsx``, ``.duckdb`` or ``.db``, in capitals or not; a folder or a pattern
        of Parquet files; or the URL of a PostgreSQL database, without a password.
    table : str, optional
        The table of a database (``schema.table`` where its schema is not the usual one) or the sheet of a workbook.
    folder : Path, optional
        What a relative path written as text is relative to; by default the working folder. A ``Path`` stays as it is.

    Yields
    ------
    Source

    Raises
    ------
    DataError
        If there is nothing there, it is of no known kind, it is empty, or it cannot be read as what it claims to be;
        also when a line deep inside turns out to be broken, or the connection is lost, while the caller counts.
    """
    text = str(place)
    if is_spark(text):
        from adjustplan.data.spark.opening import open_spark

        shown = read_place(text, folder).shown
        if table is not None:
            message = "What stands behind “spark:” names its table itself."
            raise data_error("data-table-unused", message, "Leave the table out of [data].", shown)
        with open_spark(text, folder) as opened:
            yield _source(None, shown, shown, opened)
        return
    if is_url(text):
        from adjustplan.data.sources.postgresql import open_postgresql

        with open_postgresql(text, table) as opened:
            shown = scrubbed(text)
            yield _source(None, shown, f"{shown}, table {table}", opened)
        return
    path = Path(place) if folder is None or isinstance(place, Path) else folder / place
    with _open_path(path, table) as opened:
        yield _source(path, str(path), path.name if table is None else f"{path.name}, {table}", opened)


def _open_path(path: Path, table: str | None) -> AbstractContextManager[Opened]:
    from adjustplan.data.sources.columnar import open_arrow, open_parquet

    ending = "".join(path.suffixes[-2:]).lower()
    ending = ending if ending in _DELIMITED else path.suffix.lower()
    if not path.exists() and glob.has_magic(str(path)):
        opener, one = open_parquet(path, _matches(path)), True
    elif path.is_dir() or ending == ".parquet":
        opener, one = open_parquet(path), True
    elif ending in _DELIMITED:
        from adjustplan.data.sources.delimited import open_delimited

        opener, one = open_delimited(path), True
    elif ending in _ARROW:
        opener, one = open_arrow(path), True
    elif ending in _LABELLED:
        from adjustplan.data.sources.labelled import open_labelled

        opener, one = open_labelled(path), True
    elif ending == ".xlsx":
        from adjustplan.data.sources.excel import open_excel

        opener, one = open_excel(path, table), False
    elif ending in _DATABASE:
        from adjustplan.data.sources.database_file import open_database_file

        opener, one = open_database_file(path, table), False
    else:
        message = f"“{path.name}” ends in nothing that can be read."
        raise data_error("data-unknown-format", message, f"Save the data as {READABLE}.", path)
    if one and table is not None:
        message = f"The plan names the table “{table}”, but these data have no tables in them."
        raise data_error("data-table-unused", message, "Leave the table out.", path)
    return opener


def _matches(path: Path) -> list[Path]:
    """The Parquet files that a pattern names, sorted."""
    found = sorted(Path(name) for name in glob.glob(str(path), recursive=True))  # noqa: PTH207 (its folder may be a pattern too)
    if not found:
        message = "No file matches this pattern."
        raise data_error("data-no-file", message, "Mend data = … in [analysis]; it is relative to the plan.", path)
    if any(match.suffix.lower() != ".parquet" or not match.is_file() for match in found):
        message = "The pattern also matches what is no .parquet file."
        raise data_error("data-unknown-format", message, "Let it end in .parquet; only Parquet may be in parts.", path)
    return found


def _source(path: Path | None, place: str, name: str, opened: Opened) -> Source:
    table = opened.table
    if identifiers := [column for column, dtype in table.schema().items() if dtype.is_uuid()]:
        table = table.mutate(**{column: table[column].cast("string") for column in identifiers})
    kinds: dict[str, Kind] = {column: _kind(dtype) for column, dtype in table.schema().items()}
    # The engine renames the second of two columns; whoever asks for it shall hear why it cannot be had.
    kinds |= {column: "other" for column in opened.repeated if column not in kinds}
    return Source(path, table, kinds, opened.repeated, name, place, opened.notes, opened.column_notes)


def _kind(dtype: Any) -> Kind:
    if dtype.is_boolean():
        return "boolean"
    if dtype.is_numeric():
        return "number"
    return "text" if dtype.is_string() else "other"
