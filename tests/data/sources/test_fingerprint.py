"""The fingerprint knows what the rows hold and how often, and nothing else."""

from __future__ import annotations

import datetime as dt
import hashlib

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from data.sources.kinds import COLUMNS, people, write
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import adjustplan.data.sources.fingerprint as module
from adjustplan.data import open_data
from adjustplan.data.sources.fingerprint import fingerprint


def of(place, columns=("x",)):
    with open_data(place) as source:
        return fingerprint(source, columns)


def column(folder, values, dtype=None, name="x"):
    place = folder / "one.parquet"
    pq.write_table(pa.table({name: pa.array(values, dtype)}), place)
    return of(place, [name])


def test_order_chunks_and_other_columns_do_not_matter(tmp_path, monkeypatch):
    rows = people()
    before = of(write(rows, tmp_path / "a.parquet"), COLUMNS)
    shuffled = rows.sample(frac=1, random_state=3)[COLUMNS[::-1]].assign(more=1)
    assert of(write(shuffled, tmp_path / "b.parquet"), [*COLUMNS, "night"]) == before
    monkeypatch.setattr(module, "_ROWS_PER_BATCH", 7)
    assert of(tmp_path / "a.parquet", COLUMNS) == before


@pytest.mark.parametrize("change", ["cell", "row twice", "row less", "missing", "name", "swapped"])
def test_every_change_shows(tmp_path, change):
    rows = people(50).drop(columns="day").assign(site=lambda frame: frame["site"].fillna("east"), other=0.5)
    before = of(write(rows, tmp_path / "a.csv"), list(rows))
    changed = rows.copy()
    match change:
        case "cell":
            changed.loc[7, "other"] = np.nextafter(0.5, 1)
        case "row twice":
            changed = pd.concat([rows, rows[:1]])
        case "row less":
            changed = rows[1:]
        case "missing":
            changed.loc[7, "site"] = None
        case "name":
            changed = rows.rename(columns={"other": "another"})
        case "swapped":
            changed = rows.rename(columns={"other": "night", "night": "other"})
    assert of(write(changed, tmp_path / "b.csv"), list(changed)) != before


def test_one_number_has_one_fingerprint_however_it_is_kept(tmp_path):
    kept = [column(tmp_path, [0, 1, None, 1], dtype) for dtype in (pa.int8(), pa.int64(), pa.float32(), pa.float64())]
    kept += [column(tmp_path, [False, True, None, True]), column(tmp_path, [0, 1, None, 1], pa.decimal128(9, 3))]
    kept += [column(tmp_path, [-0.0, 1.0, float("nan"), 1.0])]
    assert len(set(kept)) == 1


def test_words_are_no_numbers_and_blanks_are_missing(tmp_path):
    assert column(tmp_path, ["1"]) != column(tmp_path, [1])
    assert column(tmp_path, ["-"]) != column(tmp_path, [None], pa.string())
    assert (
        column(tmp_path, ["", "  ", None]) == column(tmp_path, [None] * 3, pa.string()) == column(tmp_path, [None] * 3)
    )
    levels = pa.array(["a", "b", "a"]).dictionary_encode()
    pq.write_table(pa.table({"x": levels}), tmp_path / "levels.parquet")
    assert of(tmp_path / "levels.parquet") == column(tmp_path, ["b", "a", "a"])


def test_a_day_is_the_midnight_it_begins_with(tmp_path):
    day = column(tmp_path, [dt.date(2020, 2, 3)])
    for unit in ("s", "ms", "us", "ns"):
        assert column(tmp_path, [dt.datetime(2020, 2, 3)], pa.timestamp(unit)) == day
    assert column(tmp_path, [dt.datetime(2020, 2, 3, 1)]) != day


def test_long_whole_numbers_count_by_all_their_digits(tmp_path):
    long = 2**53
    seen = {column(tmp_path, [value], pa.int64()) for value in (long, long + 1, -long - 1, 2**63 - 1, 2**63 - 2)}
    assert len(seen) == 5
    assert column(tmp_path, [2**60], pa.int64()) == column(tmp_path, [2.0**60])


def test_cells_cannot_run_into_each_other(tmp_path):
    def pair(a, b):
        pq.write_table(pa.table({"a": a, "b": b}), tmp_path / "pair.parquet")
        return of(tmp_path / "pair.parquet", ["a", "b"])

    texts = ["x", "x;t1:y", ";t1:", "x;-", "-"]
    assert len({pair([a], [b]) for a in texts for b in texts}) == len(texts) ** 2
    assert column(tmp_path, ["ab"], name="a") != column(tmp_path, ["ab"], name="b")


def test_it_is_the_sum_of_sha256_that_it_says_it_is(tmp_path):
    bits = np.array([1.0, 2.5]).view(np.int64)
    hashes = [int.from_bytes(hashlib.sha256(f"n{b};".encode()).digest(), "big") for b in bits]
    total = (2 * hashes[0] + hashes[1]) % 2**256
    expected = hashlib.sha256(f"1:x;3;{total:064x}".encode()).hexdigest()
    assert column(tmp_path, [1.0, 2.5, 1.0]) == expected


@settings(max_examples=10, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    st.lists(st.tuples(st.sampled_from([0.0, 1.5, None]), st.sampled_from(["", "a", "é;"])), max_size=6), st.randoms()
)
def test_two_tables_agree_exactly_where_their_rows_do(tmp_path, rows, random):
    def write_rows(chosen):
        table = pa.table(
            {"a": pa.array([r[0] for r in chosen], pa.float64()), "b": pa.array([r[1] for r in chosen], pa.string())}
        )
        pq.write_table(table, tmp_path / "rows.parquet")
        return of(tmp_path / "rows.parquet", ["a", "b"])

    other = random.sample(rows, len(rows))
    assert write_rows(rows) == write_rows(other)
    if rows:
        replaced = [*other[1:], (7.0, "new")]
        assert write_rows(replaced) != write_rows(rows)


def test_no_columns_still_count_the_rows(tmp_path):
    write(people(5), tmp_path / "a.parquet")
    write(people(6), tmp_path / "b.parquet")
    assert of(tmp_path / "a.parquet", []) != of(tmp_path / "b.parquet", [])
