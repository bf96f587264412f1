"""A DuckDB file: the table that is meant or a list of those there are, and nothing in it ever changes."""

from __future__ import annotations

import hashlib
import sqlite3

import duckdb
import pytest

from adjustplan.data import open_data
from adjustplan.errors import DataError

STRANGE = 'a"; DROP TABLE people; --'


def database(path, *tables):
    with duckdb.connect(str(path)) as engine:
        for place, name in enumerate(tables):
            schema, _, table = name.rpartition(".")
            quoted = ".".join('"' + part.replace('"', '""') + '"' for part in (schema, table) if part)
            if schema:
                engine.execute(f'CREATE SCHEMA IF NOT EXISTS "{schema}"')
            engine.execute(f"CREATE TABLE {quoted} AS SELECT {place} AS x, NULL::BOOLEAN AS b, uuid() AS id")
        engine.execute("CHECKPOINT")
    return path


def first(path, table=None):
    with open_data(path, table=table) as source:
        assert source.kinds == {"x": "number", "b": "boolean", "id": "text"}
        return int(source.table["x"].max().execute())


def finding_of(path, table=None):
    with pytest.raises(DataError) as caught:
        first(path, table)
    (finding,) = caught.value.findings
    return finding


def test_the_only_table_needs_no_name(tmp_path):
    assert first(database(tmp_path / "a.duckdb", "people")) == 0
    assert first(database(tmp_path / "it's; --.db", "raw.people")) == 0


def test_a_table_is_found_by_its_name_and_its_schema(tmp_path):
    path = database(tmp_path / "a.db", "people", "raw.people", "raw.visits", "old.people", "dotted.a.b", STRANGE)
    assert [first(path, name) for name in ("people", "main.people", "raw.people", "visits", STRANGE)] == [0, 0, 1, 2, 5]


def test_views_are_tables_too(tmp_path):
    path = database(tmp_path / "a.duckdb", "people")
    with duckdb.connect(str(path)) as engine:
        engine.execute("CREATE VIEW adults AS SELECT x + 7 AS x, b, id FROM people")
    assert first(path, "adults") == 7


def test_what_cannot_be_chosen_is_listed(tmp_path):
    path = database(tmp_path / "a.db", "raw.people", "old.people", "visits")
    assert finding_of(path).code == "data-no-table"
    assert "“visits”" in finding_of(path).remedy
    assert finding_of(path, "visit").remedy == "Did you mean “visits”?"
    finding = finding_of(path, "people")
    assert finding.code == "data-table-ambiguous"
    assert "“old.people”, “raw.people”" in finding.remedy
    assert finding_of(database(tmp_path / "none.db")).code == "data-no-table"


def test_the_file_is_not_changed(tmp_path):
    path = database(tmp_path / "a.db", "people")
    before = hashlib.sha256(path.read_bytes()).hexdigest()
    with open_data(path) as source:
        with pytest.raises(duckdb.Error):
            source.table.get_backend().con.execute("DROP TABLE people")
        assert source.table.count().execute() == 1
    assert hashlib.sha256(path.read_bytes()).hexdigest() == before
    assert [entry.name for entry in tmp_path.iterdir()] == ["a.db"]


def test_a_database_of_another_program_is_a_finding(tmp_path):
    with sqlite3.connect(tmp_path / "a.db") as other:
        other.execute("CREATE TABLE people (x int)")
    other.close()
    finding = finding_of(tmp_path / "a.db")
    assert (finding.code, "no DuckDB database" in finding.message) == ("data-unreadable", True)


def test_a_database_that_another_program_holds_open_is_a_finding(tmp_path):
    path = database(tmp_path / "a.db", "people")
    with duckdb.connect(str(path)):
        assert "another program may be writing" in finding_of(path).message
