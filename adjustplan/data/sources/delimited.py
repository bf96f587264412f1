"""CSV and TSV, gzipped or not.

The file has a header. The separator of a CSV file is the one of ``,`` ``;`` tab and ``|`` that splits the header into
most names; that of a TSV file is the tab. The kind of a column is decided from the whole column, not from its first
lines, so that one "NA" far down makes it text here and is reported, instead of breaking off the reading. An empty field
is a missing value.

A gzipped file carries a checksum that the engine does not look at, so it is read through once before it is believed.
"""

from __future__ import annotations

import csv
import glob
import gzip
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TextIO

from adjustplan.data.sources.opened import Opened, data_error, embedded_engine, repeated_names, require_file
from adjustplan.errors import DataError, Finding

_SEPARATORS = (",", ";", "\t", "|")
_BLOCK = 1 << 20


@contextmanager
def open_delimited(path: Path) -> Iterator[Opened]:
    """Open a CSV or TSV file; a line deep inside that turns out broken is placed when somebody counts."""
    require_file(path)
    zipped = path.suffix.lower() == ".gz"
    if zipped:
        _check_gzip(path)
    tabs = Path(path.stem if zipped else path.name).suffix.lower() == ".tsv"
    separator, names = _read_header(path, ("\t",) if tabs else _SEPARATORS)

    import duckdb

    with embedded_engine() as engine:
        try:
            table = engine.read_csv(
                glob.escape(str(path)),  # the engine would expand * and [ in a file name
                header=True,
                delim=separator,
                quote='"',
                escape='"',
                comment="",
                skip=0,
                sample_size=-1,
                strict_mode=True,
                hive_partitioning=False,
                compression="gzip" if zipped else "none",
            )
            yield Opened(table, repeated_names(names))
        except duckdb.Error as error:
            raise DataError(_broken(path, separator)) from error


def _open_text(path: Path) -> TextIO:
    if path.suffix.lower() == ".gz":
        return gzip.open(path, "rt", encoding="utf-8-sig", newline="")
    return path.open(encoding="utf-8-sig", newline="")


def _check_gzip(path: Path) -> None:
    try:
        with gzip.open(path) as file:
            if not file.read(1):
                raise data_error("data-empty", "The data file is empty.", "Export the data again.", path)
            while file.read(_BLOCK):
                pass
    except (gzip.BadGzipFile, EOFError, zlib.error) as error:
        message = "The gzipped file is damaged or cut short."
        raise data_error("data-unreadable", message, "Copy or export it again.", path) from error


def _read_header(path: Path, separators: tuple[str, ...]) -> tuple[str, list[str]]:
    """The separator of a file, and the names that stand in its header."""
    headers: dict[str, list[str]] = {}
    try:
        for separator in separators:
            with _open_text(path) as lines:
                headers[separator] = next(csv.reader(lines, delimiter=separator), [])
    except UnicodeDecodeError as error:
        raise DataError(_not_utf8(path)) from error
    except csv.Error as error:
        message = f"The header is no CSV: {error}."
        raise data_error("data-unreadable", message, "Export it again.", path) from error
    best = max(separators, key=lambda separator: len(headers[separator]))
    return best, [name.strip() for name in headers[best]]


def _broken(path: Path, separator: str) -> Finding:
    """Why the engine could not read a file, found out without showing what is in it."""
    message, line = "The file cannot be read as CSV.", None
    with _open_text(path) as text:
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
