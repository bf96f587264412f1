"""Opening the data: one CSV or Parquet file, seen through an embedded database engine.

The rows stay in the engine (DuckDB, spoken to through ibis): Python gets to know the names and kinds of the
columns, and later the counts that it asks for, but never a row. That keeps memory flat however long the file
is, and keeps people's records out of error messages.

A CSV file has a header; its separator is the one of ``,`` ``;`` tab and ``|`` that splits the header into
most names. The kind of a column is decided from the whole column, not from its first lines, so that one "NA"
far down makes it text here and is reported, instead of breaking off the reading. An empty field is a missing
value.
"""

from __future__ import annotations

import csv
import glob
import tempfile
from collections import Counter
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from adjustplan.data.patterns import Kind
from adjustplan.errors import DataError, Finding

if TYPE_CHECKING:
    import ibis

_SEPARATORS = (",", ";", "\t", "|")


@dataclass(frozen=True, eq=False)
class Source:
    """An open file of data.

    Attributes
    ----------
    path : Path
        The file.
    table : ibis.Table
        Its rows, inside the engine; valid while the file is open.
    kinds : mapping of str to {"number", "boolean", "text", "other"}
        Each column's kind; "other" (dates, lists, …) cannot enter a model.
    repeated : frozenset of str
        Column names that the header of a CSV file has more than once, or that differ only in capitals.
    """

    path: Path
    table: ibis.Table
    kinds: Mapping[str, Kind]
    repeated: frozenset[str] = frozenset()


@contextmanager
def open_data(path: Path) -> Iterator[Source]:
    """Open a CSV or Parquet file.

    Parameters
    ----------
    path : Path
        A file whose name ends in ``.csv`` or ``.parquet``, in capitals or not.

    Yields
    ------
    Source

    Raises
    ------
    DataError
        If there is no such file, it is neither CSV nor Parquet, it is empty, or it cannot be read as what it
        claims to be; also when a line deep inside turns out to be broken while the caller counts.
    """
    ending = path.suffix.lower()
    if ending not in (".csv", ".parquet"):
        message = f"“{path.name}” is neither a .csv nor a .parquet file."
        raise _error("data-unknown-format", message, "Save the data as CSV or Parquet.", path)
    if not path.is_file():
        remedy = "Mend data = … in [analysis]; it is relative to the plan."
        raise _error("data-no-file", "There is no such data file.", remedy, path)
    if path.stat().st_size == 0:
        raise _error("data-empty", "The data file is empty.", "Export the data again.", path)
    separator, repeated = _read_header(path) if ending == ".csv" else ("", frozenset())

    import duckdb
    import ibis

    engine = ibis.duckdb.connect(autoinstall_known_extensions=False)
    engine.settings["enable_progress_bar"] = False
    engine.settings["temp_directory"] = tempfile.gettempdir()  # by default it would be the user's own folder
    literal_name = glob.escape(str(path))  # the engine would expand * and [ in a file name
    try:
        if ending == ".csv":
            table = engine.read_csv(
                literal_name,
                header=True,
                delim=separator,
                quote='"',
                escape='"',
                comment="",
                skip=0,
                sample_size=-1,
                strict_mode=True,
                hive_partitioning=False,
            )
        else:
            table = engine.read_parquet(literal_name, hive_partitioning=False)
        yield Source(path, table, {name: _kind(dtype) for name, dtype in table.schema().items()}, repeated)
    except duckdb.Error as error:
        raise DataError(_broken(path, separator)) from error
    finally:
        engine.disconnect()


def _read_header(path: Path) -> tuple[str, frozenset[str]]:
    """The separator of a CSV file, and the names that stand in its header more than once."""
    headers: dict[str, list[str]] = {}
    try:
        for separator in _SEPARATORS:
            with path.open(encoding="utf-8-sig", newline="") as lines:
                headers[separator] = next(csv.reader(lines, delimiter=separator), [])
    except UnicodeDecodeError as error:
        raise DataError(_not_utf8(path)) from error
    except csv.Error as error:
        raise _error("data-unreadable", f"The header is no CSV: {error}.", "Export it again.", path) from error
    except OSError as error:
        raise _error("data-unreadable", f"{error.strerror}.", "Make the file readable.", path) from error
    best = max(_SEPARATORS, key=lambda separator: len(headers[separator]))
    names = [name.strip() for name in headers[best]]
    counts = Counter(name.casefold() for name in names)
    return best, frozenset(name for name in names if counts[name.casefold()] > 1)


def _kind(dtype: Any) -> Kind:
    if dtype.is_boolean():
        return "boolean"
    if dtype.is_numeric():
        return "number"
    return "text" if dtype.is_string() else "other"


def _broken(path: Path, separator: str) -> Finding:
    """Why the engine could not read a file, found out without showing what is in it."""
    if not separator:
        message = "The file cannot be read as Parquet."
        return Finding("data-unreadable", message, "Export it again.", file=str(path))
    message, line = "The file cannot be read as CSV.", None
    with path.open(encoding="utf-8-sig", newline="") as text:
        reader = csv.reader(text, delimiter=separator, strict=True)
        try:
            wanted = len(next(reader, []))
            for fields in reader:
                if fields and len(fields) != wanted:
                    message = f"This line has {len(fields)} fields where the header has {wanted}."
                    line = reader.line_num
                    break
        except UnicodeDecodeError:
            return _not_utf8(path)
        except csv.Error:
            message, line = "A quotation mark is opened or closed out of place.", reader.line_num
    return Finding("data-unreadable", message, "Mend or export it again.", file=str(path), line=line)


def _not_utf8(path: Path) -> Finding:
    return Finding("data-not-utf8", "The file is not UTF-8 text.", "Save it as UTF-8.", file=str(path))


def _error(code: str, message: str, remedy: str, path: Path) -> DataError:
    return DataError(Finding(code, message, remedy, file=str(path)))
