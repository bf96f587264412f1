"""A DuckDB file: opened to read only, one of its tables or views."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

from adjustplan.data.sources.opened import Opened, data_error, embedded_engine, reading, require_file
from adjustplan.errors import DataError, did_you_mean

_SHOWN = 10
_MAGIC = b"DUCK"  # bytes 8 to 11 of every DuckDB file

# ibis 12 cannot list tables with DuckDB 2.
_TABLES = """\
SELECT schema_name, table_name FROM duckdb_tables() WHERE database_name = current_database() AND NOT internal
UNION
SELECT schema_name, view_name FROM duckdb_views() WHERE database_name = current_database() AND NOT internal
"""


@contextmanager
def open_database_file(path: Path, table: str | None) -> Iterator[Opened]:
    """Open a table of a DuckDB file; without a name, the only one."""
    import duckdb

    require_file(path)
    with path.open("rb") as file:
        if file.read(12)[8:] != _MAGIC:
            message = "The file is no DuckDB database."
            raise data_error("data-unreadable", message, "Name a DuckDB file, or export the table.", path)
    try:
        with embedded_engine(path) as engine, reading(path, "a DuckDB database"):
            schema, name = choose_table(engine.con.execute(_TABLES).fetchall(), table, "main", path, needed=False)
            yield Opened(engine.table(name, database=schema))
    except duckdb.Error as error:  # from opening; what comes later is a DataError by now
        message = "The database cannot be opened: another program may be writing to it, or a newer version wrote it."
        raise data_error("data-unreadable", message, "Close the other program, or export the table.", path) from error


def choose_table(
    tables: Sequence[tuple[str, str]], wanted: str | None, usual: str, place: Path | str, *, needed: bool
) -> tuple[str, str]:
    """The schema and name of the table that is meant.

    Parameters
    ----------
    tables : sequence of (schema, name)
        All there are.
    wanted : str or None
        ``table`` or ``schema.table``; None means the only one, unless a name is ``needed``.
    usual : str
        The schema where a table without one is looked for first.
    place : Path or str
        Where a finding says it is.

    Raises
    ------
    DataError
        If there is none, or more than one; the finding lists them.
    """
    listed = [name if schema == usual else f"{schema}.{name}" for schema, name in sorted(tables)]
    shown = ", ".join(f"“{name}”" for name in listed[:_SHOWN]) + (", …" if len(listed) > _SHOWN else "")
    there = f"There are {shown}." if listed else "There is none, or none that you may see."
    if wanted is None:
        if len(tables) == 1 and not needed:
            return tables[0]
        message = "The plan does not say which table holds the data."
        raise data_error("data-no-table", message, f"Add table = … to [data]. {there}", place)
    matches = [(schema, name) for schema, name in tables if wanted in (name, f"{schema}.{name}")]
    if (usual, wanted) in matches:
        return usual, wanted
    if len(matches) == 1:
        return matches[0]
    if matches:
        raise _ambiguous(wanted, matches, place)
    message = f"There is no table “{wanted}”."
    raise data_error("data-no-table", message, did_you_mean(wanted, listed, there), place)


def _ambiguous(wanted: str, matches: Sequence[tuple[str, str]], place: Path | str) -> DataError:
    shown = ", ".join(f"“{schema}.{name}”" for schema, name in sorted(matches)[:_SHOWN])
    message = f"There is more than one table “{wanted}”."
    return data_error("data-table-ambiguous", message, f"Name one of {shown}.", place)
