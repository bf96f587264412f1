"""Rows as a stream of Arrow batches, whatever engine holds them; the only way in which rows come to Python at all."""

from __future__ import annotations

import uuid
from collections.abc import Iterator
from decimal import Decimal
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import ibis
    import pyarrow as pa


def batches(table: ibis.Table, rows: int) -> Iterator[pa.RecordBatch]:
    """The rows of an expression in batches of at most ``rows``; memory holds a few batches, however many there are.

    The engine can answer nothing else until the last batch is taken or the iterator is closed. Not for expressions with
    tables made in memory.
    """
    engine = table.get_backend()
    if engine.name == "duckdb":
        # ibis 12 asks DuckDB for batches by a name that DuckDB 2 no longer has.
        yield from engine.con.sql(engine.compile(table)).to_arrow_reader(rows)
    elif engine.name == "postgres":
        yield from _from_postgres(engine, table, rows)
    else:
        yield from table.to_pyarrow_batches(chunk_size=rows)


def _from_postgres(engine: Any, table: ibis.Table, rows: int) -> Iterator[pa.RecordBatch]:
    """As ibis does it, but with the server's decimals as the floats that the expression promises."""
    import pyarrow as pa

    schema = table.schema().to_pyarrow()
    with engine.con.cursor(name=f"rows_{uuid.uuid4().hex}", binary=True) as cursor:
        cursor.execute(engine.compile(table))
        while found := cursor.fetchmany(rows):
            columns = [
                _floats(column) if pa.types.is_floating(field.type) else column
                for field, column in zip(schema, zip(*found, strict=True), strict=True)
            ]
            arrays = [pa.array(column, field.type) for field, column in zip(schema, columns, strict=True)]
            yield pa.RecordBatch.from_arrays(arrays, schema=schema.remove_metadata())


def _floats(values: tuple[Any, ...]) -> tuple[Any, ...]:
    if any(isinstance(value, Decimal) for value in values):
        return tuple(value if value is None else float(value) for value in values)
    return values
