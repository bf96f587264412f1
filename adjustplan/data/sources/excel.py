"""An Excel workbook: one sheet, its first row the names of the columns.

The sheet is read cell by cell into a temporary file, while it is noted what each column holds. A column of numbers only
is numbers, of dates only dates; where kinds are mixed, all of it is text and the checks of the data say what stands in
the way. Text stays text even where it looks like a number, so that "007" is not 7. Empty cells are missing values; rows
with nothing in them are left out.

A formula is worth what Excel last saved for it. One that was never calculated has no value, and is an error here.
"""

from __future__ import annotations

import csv
import datetime as dt
import tempfile
import zipfile
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from adjustplan.data.sources.opened import (
    Opened,
    copying,
    data_error,
    embedded_engine,
    reading,
    repeated_names,
    require_file,
)
from adjustplan.errors import did_you_mean

_TYPES = {"number": "DOUBLE", "boolean": "BOOLEAN", "day": "DATE", "moment": "TIMESTAMP", "time": "TIME"}


@contextmanager
def open_excel(path: Path, sheet: str | None) -> Iterator[Opened]:
    """Open a sheet of a workbook; the first one without a name."""
    require_file(path)
    with tempfile.TemporaryDirectory(prefix="adjustplan-") as folder:
        copy = Path(folder) / "rows.csv"
        with copying(path, "an Excel workbook"):
            names, types = _copy(path, sheet, copy)
        with embedded_engine() as engine, reading(path, "an Excel sheet"):
            table = engine.read_csv(
                str(copy),
                header=False,
                columns={f"c{place}": kind for place, kind in enumerate(types)},
                delim=",",
                quote='"',
                escape='"',
                comment="",
                skip=0,
                strict_mode=True,
            )
            repeated = repeated_names(names)
            kept = {name: table[f"c{place}"] for place, name in enumerate(names) if name not in repeated}
            yield Opened(table.select(**kept), repeated)


def _copy(path: Path, sheet: str | None, target: Path) -> tuple[list[str], list[str]]:
    """Copy the cells to a CSV file without a header; the names of the columns and the engine's types for them."""
    import openpyxl
    from openpyxl.utils.exceptions import InvalidFileException

    try:
        book = openpyxl.load_workbook(path, read_only=True, data_only=True)
    except (InvalidFileException, zipfile.BadZipFile, KeyError, ValueError, OSError) as error:
        message = "The file cannot be read as an Excel workbook."
        raise data_error("data-unreadable", message, "Save it as .xlsx without a password.", path) from error
    try:
        names_of_sheets = [page.title for page in book.worksheets]
        if sheet is not None and sheet not in names_of_sheets:
            listed = f"There are {', '.join(f'“{name}”' for name in names_of_sheets)}."
            remedy = did_you_mean(sheet, names_of_sheets, listed)
            raise data_error("data-no-table", f"There is no sheet “{sheet}”.", remedy, path)
        page = book.worksheets[0] if sheet is None else book[sheet]
        page.reset_dimensions()  # what the file says of its own size is often wrong
        rows = (list(row) for row in page.iter_rows(values_only=True))
        filled = ((line, row) for line, row in enumerate(rows, start=1) if any(cell is not None for cell in row))
        line, header = next(filled, (0, []))
        if not header:
            raise data_error("data-empty", "The sheet is empty.", "Name another sheet, or export it again.", path)
        while header[-1] is None:
            header.pop()
        if None in header:
            message = f"Column {header.index(None) + 1} has no name in the first row."
            raise data_error("data-unreadable", message, "Let the first row name every column.", path, line)
        names = [str(name).strip() for name in header]
        found = _write(path, len(names), filled, target)
    finally:
        book.close()
    _refuse_uncalculated(path, page.title)
    return names, [_type(kinds) for kinds in found]


def _write(path: Path, width: int, rows: Iterable[tuple[int, list[Any]]], target: Path) -> list[set[str]]:
    found: list[set[str]] = [set() for _ in range(width)]
    with target.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        for line, row in rows:
            if any(cell is not None for cell in row[width:]):
                message = f"This row is longer than the header, which names {width} columns."
                raise data_error("data-unreadable", message, "Name every column in the first row.", path, line)
            cells = [*row[:width], *[None] * (width - len(row))]
            for kinds, cell in zip(found, cells, strict=True):
                if cell is not None:
                    kinds.add(_kind(cell))
            writer.writerow([_text(cell) for cell in cells])
    return found


def _kind(cell: Any) -> str:
    if isinstance(cell, bool):
        return "boolean"
    if isinstance(cell, int | float):
        return "number"
    if isinstance(cell, dt.datetime):
        return "day" if cell.time() == dt.time() else "moment"
    if isinstance(cell, dt.date):
        return "day"
    return "time" if isinstance(cell, dt.time) else "text"


def _text(cell: Any) -> str:
    if cell is None:
        return ""
    if isinstance(cell, float):
        return str(int(cell)) if cell.is_integer() and abs(cell) < 2**53 else repr(cell)
    if isinstance(cell, dt.datetime) and cell.time() == dt.time():
        return cell.date().isoformat()
    return cell.isoformat(" ") if isinstance(cell, dt.datetime) else str(cell)


def _type(kinds: set[str]) -> str:
    if kinds == {"day", "moment"}:
        return "TIMESTAMP"
    return _TYPES.get(next(iter(kinds)), "VARCHAR") if len(kinds) == 1 else "VARCHAR" if kinds else "DOUBLE"


def _refuse_uncalculated(path: Path, sheet: str) -> None:
    """DataError where a formula has no saved value; the workbook is read again only where it has formulas at all."""
    import openpyxl

    with zipfile.ZipFile(path) as parts:
        if not any(_has_formula(parts, name) for name in parts.namelist() if name.startswith("xl/worksheets/")):
            return
    asked = openpyxl.load_workbook(path, read_only=True)
    known = openpyxl.load_workbook(path, read_only=True, data_only=True)
    try:
        pages = [book[sheet] for book in (asked, known)]
        for page in pages:
            page.reset_dimensions()
        for line, (formulas, values) in enumerate(zip(*(page.iter_rows() for page in pages), strict=True), start=1):
            for formula, value in zip(formulas, values, strict=True):
                if formula.data_type == "f" and value.value is None:
                    message = f"The formula in cell {formula.coordinate} was never calculated, so it has no value."
                    remedy = "Open the workbook in Excel and save it, or replace formulas by their values."
                    raise data_error("data-unreadable", message, remedy, path, line)
    finally:
        asked.close()
        known.close()


def _has_formula(parts: zipfile.ZipFile, name: str) -> bool:
    tail = b""
    with parts.open(name) as file:
        while block := file.read(1 << 20):
            if b"<f>" in tail + block or b"<f " in tail + block:
                return True
            tail = block[-2:]
    return False
