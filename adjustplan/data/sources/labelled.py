"""Stata, SAS and SPSS files, which know more about a value than the value.

*Value labels* ("1 means yes") become the levels: where every observed value of a variable has a label, the variable is
text here, made of the labels. Where only some have one (0 "less than a year" in a column of years), it stays numbers
and a warning says so. *User-defined missing codes* (Stata's ``.a`` to ``.z``, SAS's ``.A`` to ``.Z``, what SPSS was
told to treat as missing) become missing, counted. Dates stay dates.

The file is read in chunks, and each chunk goes to a temporary file that the embedded engine reads and that is removed
afterwards, so that memory does not grow with the rows. Labels are put in on the way. If a value without a label turns
up, what was written of that variable is wrong, and the file is read a second time.

SAS transport files (``.xpt``) have such codes too, but the reader does not tell them from other missing values; they
become missing without being counted.
"""

from __future__ import annotations

import datetime as dt
import glob
import shutil
import tempfile
from collections import Counter
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from adjustplan.data.sources.opened import (
    Opened,
    copying,
    data_error,
    embedded_engine,
    reading,
    repeated_names,
    require_file,
)
from adjustplan.errors import Finding

if TYPE_CHECKING:
    import pandas as pd

_CELLS_PER_CHUNK = 4_000_000
_SHOWN = 5
_SPSS_BEGINS = dt.datetime(1582, 10, 14)
_PROGRAMS = {".dta": "Stata", ".sas7bdat": "SAS", ".xpt": "SAS transport", ".sav": "SPSS"}


@dataclass
class _Tally:
    """What was met while a file was copied: columns by name, codes and values with the rows that had them."""

    columns: list[str] = field(default_factory=list)
    labelled: dict[str, Mapping[Any, str]] = field(default_factory=dict)
    codes: dict[str, Counter[str]] = field(default_factory=dict)
    unlabelled: dict[str, int] = field(default_factory=dict)


@contextmanager
def open_labelled(path: Path) -> Iterator[Opened]:
    """Open a ``.dta``, ``.sas7bdat``, ``.xpt`` or ``.sav`` file."""
    require_file(path)
    with tempfile.TemporaryDirectory(prefix="adjustplan-") as folder:
        place, kind = Path(folder) / "first", f"a {_PROGRAMS[path.suffix.lower()]} file"
        with copying(path, kind):
            tally = _copy(path, place, frozenset())
            if tally.unlabelled:
                shutil.rmtree(place)
                place, seen = Path(folder) / "second", tally.unlabelled
                tally = _copy(path, place, frozenset(seen))
                tally.unlabelled = seen
        notes = _notes(path, tally)
        with embedded_engine() as engine, reading(path, kind):
            table = engine.read_parquet(
                glob.escape(str(place)) + "/*.parquet", union_by_name=True, hive_partitioning=False
            )
            repeated = repeated_names(tally.columns)
            kept = [name for name in tally.columns if name not in repeated]
            places = {name: f"c{place}" for place, name in enumerate(tally.columns)}
            yield Opened(
                table.select(**{name: table[places[name]] for name in kept}),
                repeated,
                tuple(note for found in notes.values() for note in found),
                notes,
            )


def _copy(path: Path, target: Path, numeric: frozenset[str]) -> _Tally:
    """Copy a file to Parquet files in ``target``, one for each chunk; ``numeric`` variables keep their numbers.

    Columns are called c0, c1, … there. A chunk leaves out a column that is missing in all of its rows, because what
    kind it is shows only in a value; the engine fills it up.
    """
    import pyarrow as pa
    import pyarrow.parquet as pq

    target.mkdir()
    tally = _Tally()
    schema: dict[str, pa.DataType] = {}
    for number, (rows, meta) in enumerate(_chunks(path)):
        if number == 0:
            tally.columns = list(meta.column_names)
            tally.labelled = {
                name: labels
                for name in meta.variable_value_labels
                if name not in numeric and (labels := _levels(name, meta))
            }
        arrays = {"present": pa.array([True] * len(rows), pa.bool_())}
        for place, name in enumerate(tally.columns if len(rows) else ()):
            values = _without_codes(rows[name], name, meta, tally)
            if name in tally.labelled:
                values = _with_labels(values, name, tally)
            if values.notna().any():
                arrays[f"c{place}"] = _array(values, meta.readstat_variable_types[name] == "string")
                schema.setdefault(f"c{place}", arrays[f"c{place}"].type)
        pq.write_table(pa.table(arrays), target / f"{number:06}.parquet")
    lacking = {f"c{place}": pa.float64() for place in range(len(tally.columns))} | schema
    empty = {name: pa.array([], dtype) for name, dtype in lacking.items()}
    pq.write_table(pa.table({"present": pa.array([], pa.bool_()), **empty}), target / "empty.parquet")
    return tally


def _chunks(path: Path) -> Iterator[tuple[pd.DataFrame, Any]]:
    """The rows in chunks, the first without any, each with what the file says of its variables."""
    import pyreadstat

    ending = path.suffix.lower()
    read: Any = {
        ".dta": pyreadstat.read_dta,
        ".sas7bdat": pyreadstat.read_sas7bdat,
        ".xpt": pyreadstat.read_xport,
        ".sav": pyreadstat.read_sav,
    }[ending]
    coded: dict[str, Any] = {} if ending == ".xpt" else {"user_missing": True}
    try:
        nothing, about = read(path, metadataonly=True, **coded)
        size = max(1000, _CELLS_PER_CHUNK // max(1, len(about.column_names)))
        yield nothing, about
        yield from pyreadstat.read_file_in_chunks(read, path, chunksize=size, **coded)
    except (pyreadstat.ReadstatError, pyreadstat.PyreadstatError, UnicodeError, OverflowError) as error:
        message = f"The file cannot be read as a {_PROGRAMS[ending]} file."
        raise data_error("data-unreadable", message, "Export it again.", path) from error


def _levels(name: str, meta: Any) -> dict[Any, str]:
    """The labels of a variable, but for those of codes for missing; told apart by their values where two share one."""
    spans, text = meta.missing_ranges.get(name, ()), meta.readstat_variable_types[name] == "string"
    labels = {
        value: label
        for value, label in meta.variable_value_labels[name].items()
        if label.strip()
        and (text or not isinstance(value, str))  # a letter is one of the codes
        and not any(span["lo"] <= value <= span["hi"] for span in spans)
    }
    times = Counter(labels.values())
    return {value: label if times[label] == 1 else f"{label} ({_shown(value)})" for value, label in labels.items()}


def _without_codes(values: pd.Series[Any], name: str, meta: Any, tally: _Tally) -> pd.Series[Any]:
    """The values of a chunk with user-defined codes for missing as missing; what there was is counted."""
    text = meta.readstat_variable_types[name] == "string"
    if not text and values.dtype.kind == "O":
        letters = values.map(lambda value: isinstance(value, str)).astype(bool)
        tally.codes.setdefault(name, Counter()).update(f".{letter}" for letter in values[letters])
        values = values.where(~letters)
        if letters.any() and not values.map(lambda value: isinstance(value, dt.date | dt.time)).any():
            values = values.astype("float64")
    for span in meta.missing_ranges.get(name, ()):
        low, high = span["lo"], span["hi"]
        if not text and values.dtype.kind in "OM":
            low, high = _as_moment(low), _as_moment(high)
            inside = values.map(lambda value, a=low, b=high: a <= _moment(value) <= b if _moment(value) else False)
        else:
            inside = values.str.rstrip() == str(low).rstrip() if text else (values >= low) & (values <= high)
        inside = inside.astype(bool)
        tally.codes.setdefault(name, Counter()).update(_shown(value) for value in values[inside])
        values = values.where(~inside)
    return values


def _moment(value: Any) -> dt.datetime | None:
    if value is None or value != value:
        return None
    if isinstance(value, dt.datetime):
        return value
    return dt.datetime.combine(value, dt.time()) if isinstance(value, dt.date) else None


def _as_moment(bound: Any) -> dt.datetime:
    """An end of a range of codes, which the reader gives as a date or as SPSS's seconds."""
    if isinstance(bound, dt.date):
        return _moment(bound) or dt.datetime.min
    try:
        return _SPSS_BEGINS + dt.timedelta(seconds=bound)
    except OverflowError:
        return dt.datetime.min if bound < 0 else dt.datetime.max


def _with_labels(values: pd.Series[Any], name: str, tally: _Tally) -> pd.Series[Any]:
    """The values replaced by their labels; those without one are counted."""
    labels = tally.labelled[name]
    if values.dtype.kind in "OM" and values.map(lambda value: isinstance(value, dt.date)).any():
        return values  # a date with a label for some code; the date is the value
    named = values.map(labels)
    blank = values.map(lambda value: isinstance(value, str) and not value.strip()).astype(bool)
    lacking = int((values.notna() & ~blank & named.isna()).sum())
    if lacking:
        tally.unlabelled[name] = tally.unlabelled.get(name, 0) + lacking
    return named.astype("object")


def _array(values: pd.Series[Any], text: bool) -> Any:
    import pyarrow as pa

    dtype = pa.string() if text else pa.float64() if values.dtype.kind in "fiu" else None
    if dtype is None and values.dtype.kind == "M":
        dtype = pa.timestamp("us")
    return pa.Array.from_pandas(values, type=dtype)


def _notes(path: Path, tally: _Tally) -> dict[str, tuple[Finding, ...]]:
    """What was done to each column, in the order of the file."""
    notes: dict[str, tuple[Finding, ...]] = {}
    for name in tally.columns:
        found: list[Finding] = []
        if name in tally.unlabelled:
            rows = _rows(tally.unlabelled[name])
            message = f"“{name}” has value labels, but not for its values in {rows}; it keeps its codes."
            remedy = "Label every value, or none, or state what the codes mean in the plan."
            found.append(Finding("data-labels-partial", message, remedy, "warning", file=str(path)))
        elif name in tally.labelled:
            message = f"The value labels of “{name}” became its levels."
            remedy = "Nothing needs mending; name the labels, not the codes, in the plan."
            found.append(Finding("data-value-labels", message, remedy, "note", file=str(path)))
        if codes := tally.codes.get(name):
            shown = ", ".join(f"{code} in {_rows(count)}" for code, count in codes.most_common(_SHOWN))
            more = f", and {len(codes) - _SHOWN} other codes" if len(codes) > _SHOWN else ""
            message = f"User-defined codes of “{name}” became missing: {shown}{more}."
            remedy = "Nothing needs mending where the codes mean missing."
            found.append(Finding("data-missing-codes", message, remedy, "note", file=str(path)))
        if found:
            notes[name] = tuple(found)
    return notes


def _rows(count: int) -> str:
    return f"{count} row" if count == 1 else f"{count} rows"


def _shown(value: Any) -> str:
    return f"{value:.12g}" if isinstance(value, int | float) else str(value)
