"""A fingerprint of the data that were used: one number for what the rows hold, however they are kept.

Each row becomes a short text, each text a SHA-256 number, and the numbers are added up modulo 2^256. A sum does not
know the order of its terms, so neither order nor chunks nor engine matter; equal rows count as often as they stand
there. The fingerprint is the SHA-256 of the names of the columns, the number of rows and that sum. It tells whether
data changed by accident or by an honest correction; against somebody who seeks out rows to keep a sum unchanged, a
sum of hashes (Bellare and Micciancio 1997, EUROCRYPT) is weaker than one hash of a file.

What counts as the same value: 1 and 1.0 and true; a day and the midnight it begins with; an empty cell, a blank text,
a missing value and one that is not a number. Numbers are compared as the 64-bit numbers that the models see, and whole
numbers too long for that by all their digits.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from adjustplan.data.source import Source
from adjustplan.data.sources.batches import batches

if TYPE_CHECKING:
    import ibis
    import pyarrow as pa

_ROWS_PER_BATCH = 250_000
_EXACT = 2**53
_MISSING = "-"


def fingerprint(source: Source, columns: Iterable[str]) -> str:
    """The SHA-256 fingerprint of the rows of some columns, as 64 hexadecimal digits.

    Parameters
    ----------
    source : Source
        Open.
    columns : iterable of str
        The columns that count, in any order; all of them must be there.

    Notes
    -----
    One pass over the rows in batches. A batch's equal rows are hashed once, so that a few categorical columns cost
    little.
    """
    import pyarrow as pa

    names = sorted(set(columns))
    total, rows = 0, 0
    if names:
        table = source.table.select(**{f"c{place}": _plain(source, name) for place, name in enumerate(names)})
        for batch in batches(table, _ROWS_PER_BATCH):
            if batch.num_rows:
                total += _sum_of_hashes(_row_texts(pa.Table.from_batches([batch])).value_counts())
                rows += batch.num_rows
    else:
        rows = int(source.table.count().execute())
    head = "".join(f"{len(name)}:{name}" for name in names)
    return hashlib.sha256(f"{head};{rows};{total % 2**256:064x}".encode()).hexdigest()


def _plain(source: Source, name: str) -> ibis.Value:
    """A column as integers, floats, text, days or moments, so that engines differ no more than that."""
    import ibis

    values = source.table[name]
    dtype = values.type()
    if dtype.is_boolean():
        return ibis.cases((values, 1), (~values, 0))
    if dtype.is_integer() or dtype.is_string() or dtype.is_date() or dtype.is_timestamp():
        return values
    return values.cast("float64") if dtype.is_numeric() else values.cast("string")


def _row_texts(table: pa.Table) -> pa.Array:
    """One text for each row; different rows never share one."""
    import pyarrow as pa
    import pyarrow.compute as pc

    columns = [_texts(column.combine_chunks()) for column in table.columns]
    return pc.binary_join_element_wise(*columns, pa.scalar("", columns[0].type))


def _texts(values: pa.Array) -> pa.Array:
    import pyarrow as pa
    import pyarrow.compute as pc

    if pa.types.is_dictionary(values.type):
        values = values.dictionary_decode()
    if pa.types.is_null(values.type):
        return pa.array([_MISSING] * len(values), pa.string())
    if pa.types.is_temporal(values.type):
        zone = values.type.tz if pa.types.is_timestamp(values.type) else None
        moments = values.cast(pa.timestamp("us", zone), safe=False)
        return _marked("d", moments.cast(pa.int64()).cast(pa.string()))
    if pa.types.is_integer(values.type):
        return _marked("n", _integers(values))
    if pa.types.is_floating(values.type):
        return _marked("n", _floats(values.cast(pa.float64())))
    text = values.cast(pa.string())
    blank = pc.equal(pc.utf8_trim_whitespace(text), "")
    text = pc.if_else(blank, pa.scalar(None, pa.string()), text)
    length = pc.binary_length(text).cast(pa.string())
    return _marked("t", pc.binary_join_element_wise(length, text, ":"))


def _marked(kind: str, texts: pa.Array) -> pa.Array:
    """The texts with their kind before and an end behind; a dash where there is none."""
    import pyarrow.compute as pc

    return pc.fill_null(pc.binary_join_element_wise(kind, texts, ";", ""), _MISSING)


def _floats(values: pa.Array) -> pa.Array:
    """The bits of the numbers, −0 as 0 and not-a-number as missing."""
    import pyarrow as pa
    import pyarrow.compute as pc

    values = pc.if_else(pc.is_nan(values), pa.scalar(None, pa.float64()), pc.add(values, 0.0))
    return values.view(pa.int64()).cast(pa.string())


def _integers(values: pa.Array) -> pa.Array:
    """As :func:`_floats`, followed by what a 64-bit float leaves of a very large number."""
    import pyarrow as pa
    import pyarrow.compute as pc

    texts = _floats(values.cast(pa.float64(), safe=False))
    span = pc.min_max(values).as_py()
    if span["min"] is None or (span["min"] >= -_EXACT and span["max"] <= _EXACT):
        return texts
    rests = [None if value is None else value - int(float(value)) for value in values.to_pylist()]
    more = pa.array([None if rest is None else f"{rest:+d}" if rest else "" for rest in rests], pa.string())
    return pc.binary_join_element_wise(texts, more, "")


def _sum_of_hashes(counted: Any) -> int:
    """The sum of count × SHA-256 over the distinct texts of a batch, exactly."""
    counts = counted.field("counts").to_numpy()
    texts = counted.field("values").cast("binary").to_pylist()
    digests = b"".join([hashlib.sha256(text).digest() for text in texts])
    # Eight 32-bit words, so that a batch's sums fit into 64 bits.
    words = np.frombuffer(digests, dtype=">u4").reshape(-1, 8).astype(np.uint64)
    sums = (words * counts[:, np.newaxis].astype(np.uint64)).sum(axis=0)
    return sum(int(word) << (32 * (7 - place)) for place, word in enumerate(sums))
