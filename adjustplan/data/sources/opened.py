"""What every kind of source gives, and the embedded engine that most of them are seen through."""

from __future__ import annotations

import errno
import tempfile
from collections import Counter
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from adjustplan.errors import DataError, Finding

if TYPE_CHECKING:
    import ibis


@dataclass(frozen=True, eq=False)
class Opened:
    """One table, open.

    Attributes
    ----------
    table : ibis.Table
        Its rows; valid while the source is open.
    repeated : frozenset of str
        Names that several columns share, capitals aside.
    notes : tuple of Finding
        What was done to the data on the way, such as codes for missing that became missing.
    column_notes : mapping of str to tuple of Finding
        Those of the notes that concern one column.
    """

    table: ibis.Table
    repeated: frozenset[str] = frozenset()
    notes: tuple[Finding, ...] = ()
    column_notes: Mapping[str, tuple[Finding, ...]] = field(default_factory=dict)


@contextmanager
def embedded_engine(database: Path | None = None) -> Iterator[Any]:
    """DuckDB through ibis, in memory or on a database file that it may only read; disconnected afterwards."""
    import ibis

    place = {} if database is None else {"database": str(database.absolute()), "read_only": True}
    engine = ibis.duckdb.connect(autoinstall_known_extensions=False, **place)
    try:
        engine.settings["enable_progress_bar"] = False
        engine.settings["temp_directory"] = tempfile.gettempdir()  # by default it would be the user's own folder
        yield engine
    finally:
        engine.disconnect()


@contextmanager
def reading(path: Path, kind: str) -> Iterator[None]:
    """Whatever the engine or Arrow says while a file is open becomes one finding that shows no data."""
    import duckdb
    import pyarrow as pa

    try:
        yield
    except duckdb.OutOfMemoryException as error:
        raise _no_room(path) from error
    except (duckdb.Error, pa.ArrowException) as error:
        raise data_error("data-unreadable", f"The file cannot be read as {kind}.", "Export it again.", path) from error


@contextmanager
def copying(path: Path, kind: str) -> Iterator[None]:
    """As :func:`reading`, while a file is copied to a temporary one."""
    try:
        with reading(path, kind):
            yield
    except OSError as error:
        if error.errno in (errno.ENOSPC, errno.EDQUOT):
            raise _no_room(path) from error
        raise data_error("data-unreadable", f"The file cannot be read as {kind}.", "Export it again.", path) from error


def _no_room(path: Path) -> DataError:
    message = "Memory, or the room for temporary files, was used up."
    return data_error("data-no-room", message, "Free some, or set TMPDIR to a folder on a larger disk.", path)


def require_file(path: Path) -> None:
    """DataError unless there is a file with something in it."""
    if not path.is_file():
        remedy = "Mend data = … in [analysis]; it is relative to the plan."
        raise data_error("data-no-file", "There is no such data file.", remedy, path)
    try:
        with path.open("rb") as file:
            first = file.read(1)
    except OSError as error:
        raise data_error("data-unreadable", f"{error.strerror}.", "Make the file readable.", path) from error
    if not first:
        raise data_error("data-empty", "The data file is empty.", "Export the data again.", path)


def repeated_names(names: Iterable[str]) -> frozenset[str]:
    """Names that stand more than once, or differ only in capitals, which the embedded engine cannot tell apart."""
    listed = list(names)
    counts = Counter(name.casefold() for name in listed)
    return frozenset(name for name in listed if counts[name.casefold()] > 1)


def data_error(code: str, message: str, remedy: str, place: Path | str, line: int | None = None) -> DataError:
    """A DataError with one finding at a file or a (scrubbed) URL."""
    return DataError(Finding(code, message, remedy, file=str(place), line=line))
