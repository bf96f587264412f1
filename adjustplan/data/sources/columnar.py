"""Parquet (a file, a folder, a pattern) and Arrow IPC, also known as Feather.

A folder of Parquet files is one table in parts, as a cluster writes it. All parts must have the same columns of the
same kinds: an engine left alone takes the first part as the rule and drops what others have besides, or rounds it.
Folders inside it may be named ``column=value``; that column is then part of the table. Names that start with ``.`` or
``_`` are the cluster's own notes.

An Arrow file is scanned batch by batch, never loaded whole. The streaming variant can only be read once, so it is first
copied to a temporary file.
"""

from __future__ import annotations

import glob
import tempfile
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from adjustplan.data.sources.opened import (
    Opened,
    copying,
    data_error,
    embedded_engine,
    reading,
    repeated_names,
    require_file,
)

if TYPE_CHECKING:
    import pyarrow as pa

_SHOWN = 5


@contextmanager
def open_parquet(place: Path, parts: Sequence[Path] | None = None) -> Iterator[Opened]:
    """Open one Parquet file, every one in a folder, or the ``parts`` that a pattern named."""
    if parts is None:
        parts = parquet_parts(place) if place.is_dir() else [place]
    keys = _folder_keys(place, parts) if place.is_dir() else ()
    names = _agreed_names(parts)
    with embedded_engine() as engine, reading(place, "Parquet"):
        # The engine would expand * and [ in a file name.
        paths = [glob.escape(str(part)) for part in parts]
        table = engine.read_parquet(paths, union_by_name=len(paths) > 1, hive_partitioning=bool(keys))
        if keys:
            table = table.select(*(name for name in table.columns if name in {*names, *keys}))
        yield Opened(table, repeated_names([*names, *keys]))


def parquet_parts(folder: Path) -> list[Path]:
    """The Parquet files in a folder and in the folders in it, sorted."""
    parts = [
        part
        for part in folder.rglob("*")
        if part.suffix.lower() == ".parquet"
        and part.is_file()
        and not any(step.startswith((".", "_")) for step in part.relative_to(folder).parts)
    ]
    if not parts:
        message = "There is no Parquet file in this folder."
        raise data_error("data-no-file", message, "Name a file, or a folder with .parquet files.", folder)
    return sorted(parts)


def _folder_keys(folder: Path, parts: Sequence[Path]) -> tuple[str, ...]:
    """The columns that folders called ``column=value`` hold; the same for every part."""
    found = {
        tuple(step.split("=", 1)[0] for step in part.relative_to(folder).parts[:-1] if "=" in step) for part in parts
    }
    if len(found) > 1:
        message = "Some parts lie in folders called column=value and others do not, or in folders of other columns."
        raise data_error("data-parts-differ", message, "Write the parts again, all in one way.", folder)
    keys = found.pop()
    above = {step.split("=", 1)[0] for step in folder.absolute().parts if "=" in step}
    if len(set(keys)) < len(keys) or above & set(keys):
        message = "Two folders on the way to a part give a value to the same column."
        raise data_error("data-parts-differ", message, "Rename one of the folders.", folder)
    return keys


def _agreed_names(parts: Sequence[Path]) -> list[str]:
    """The column names, the same in every part; only the ends of the files are read."""
    import pyarrow.parquet as pq

    names: list[str] = []
    kinds: dict[str, str] = {}
    for place, part in enumerate(parts):
        require_file(part)
        with reading(part, "Parquet"):
            schema = pq.read_schema(part)
        here = {field.name: _kind(field.type) for field in schema}
        if place == 0:
            names, kinds = list(schema.names), here
            continue
        first = parts[0].name
        odd = sorted(kinds.keys() ^ here.keys())
        if odd:
            message = f"This part has other columns than {first}: {_listed(odd)} in one of the two only."
        elif odd := sorted(
            name for name in kinds if "nothing" not in (kinds[name], here[name]) and kinds[name] != here[name]
        ):
            message = f"This part has columns of another kind than {first}: {_listed(odd)}."
        else:
            kinds |= {name: kind for name, kind in here.items() if kinds[name] == "nothing"}
            continue
        raise data_error("data-parts-differ", message, "Write the parts again, all with the same columns.", part)
    return names


def _listed(names: Sequence[str]) -> str:
    return ", ".join(f"“{name}”" for name in names[:_SHOWN]) + (", …" if len(names) > _SHOWN else "")


def _kind(dtype: pa.DataType) -> str:
    """What a column holds, widths aside: two parts may store the same numbers in four or in eight bytes."""
    import pyarrow.types as kinds

    if kinds.is_dictionary(dtype):
        return _kind(dtype.value_type)
    if kinds.is_integer(dtype) or kinds.is_floating(dtype) or kinds.is_decimal(dtype):
        return "number"
    if kinds.is_string(dtype) or kinds.is_large_string(dtype) or kinds.is_string_view(dtype):
        return "text"
    if kinds.is_null(dtype):
        return "nothing"
    return "moment" if kinds.is_timestamp(dtype) else str(dtype)


@contextmanager
def open_arrow(path: Path) -> Iterator[Opened]:
    """Open an Arrow IPC or Feather file, or a file with an Arrow stream in it."""
    require_file(path)
    import pyarrow as pa
    import pyarrow.dataset
    import pyarrow.fs

    local = pyarrow.fs.LocalFileSystem()
    with tempfile.TemporaryDirectory(prefix="adjustplan-") as folder, reading(path, "Arrow"):
        place = path
        try:
            with pa.OSFile(str(path)) as file:
                names = pa.ipc.open_file(file).schema.names
        except pa.ArrowInvalid:
            place = Path(folder) / "rows.arrow"
            with copying(path, "Arrow"):
                names = _copy_stream(path, place)
        rows = pyarrow.dataset.dataset(str(place), format="ipc", filesystem=local)
        with embedded_engine() as engine:
            engine.con.register("rows", rows)
            yield Opened(engine.table("rows"), repeated_names(names))


def _copy_stream(path: Path, target: Path) -> list[str]:
    import pyarrow as pa

    with pa.OSFile(str(path)) as file, pa.ipc.open_stream(file) as stream:
        with pa.ipc.new_file(str(target), stream.schema) as copy:
            for batch in stream:
                copy.write_batch(batch)
        names: list[str] = stream.schema.names
        return names
