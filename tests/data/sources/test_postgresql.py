"""A real server: the same people as in a file, no secret shown, nothing written, and one line where it goes away."""

from __future__ import annotations

import logging
import threading
import time
import traceback

import numpy as np
import psycopg
import pytest
from data.sources import postgres_server
from data.sources.kinds import COLUMNS, people, write
from data.sources.postgres_server import Server, postgres, running_server

from adjustplan.data import Source, Wanted, open_data, reduce_to_patterns
from adjustplan.data.sources.fingerprint import fingerprint
from adjustplan.errors import DataError

__all__ = ["postgres"]
TYPES = {"night": "integer", "site": "text", "glucose": "double precision", "day": "date"}
WANTED = Wanted("glucose", {"night": "night", "site": "site"})


@pytest.fixture
def server(postgres: Server, monkeypatch: pytest.MonkeyPatch) -> Server:
    for name, value in postgres.environment.items():
        monkeypatch.setenv(name, value)
    return postgres


def finding_of(url, table="people"):
    with pytest.raises(DataError) as caught, open_data(url, table=table) as source:
        source.table.count().execute()
    (finding,) = caught.value.findings
    return finding


def test_a_table_holds_the_same_people_as_a_file(server, tmp_path):
    rows = people()
    server.write("people", rows, TYPES)
    with open_data(write(rows, tmp_path / "rows.csv")) as source:
        plain, prints = reduce_to_patterns(source, WANTED), fingerprint(source, COLUMNS)
    with open_data(server.url, table="people") as source:
        assert dict(source.kinds) == {"night": "number", "site": "text", "glucose": "number", "day": "other"}
        assert (source.path, source.place, source.name) == (None, server.url, f"{server.url}, table people")
        found = reduce_to_patterns(source, WANTED)
        assert fingerprint(source, COLUMNS) == prints
    assert found.values.fillna("missing").equals(plain.values.fillna("missing"))
    assert found.rows.tolist() == plain.rows.tolist()
    np.testing.assert_allclose(found.mean, plain.mean, rtol=1e-13)
    np.testing.assert_allclose(found.deviations, plain.deviations, rtol=1e-10)


def test_types_of_the_databases_own_count_as_what_they_are_made_of(server):
    with server.connect() as connection:
        connection.execute("DROP TABLE IF EXISTS odd; DROP TYPE IF EXISTS mood; DROP DOMAIN IF EXISTS dose, word")
        connection.execute("CREATE TYPE mood AS ENUM ('low', 'high')")
        connection.execute("CREATE DOMAIN dose AS integer CHECK (value > 0)")
        connection.execute("CREATE DOMAIN word AS varchar(9)")
        connection.execute(
            "CREATE TABLE odd (m mood, d dose, w word, c char(6), b boolean, n numeric(9, 2), u uuid, e money, y int)"
        )
        connection.execute(
            "INSERT INTO odd VALUES ('high', 3, 'w', 'ab', true, 2.5, gen_random_uuid(), 4.5, 1),"
            " (NULL, NULL, ' ', ' ', NULL, 'NaN', NULL, NULL, 0)"
        )
    with open_data(server.url, table="odd") as source:
        names = [name for name in source.kinds if name != "y"]
        found = reduce_to_patterns(source, Wanted("y", {name: name for name in names}))
        assert [source.kinds[name] for name in names] == [
            "text", "number", "text", "text", "boolean", "number", "text", "number"
        ]  # fmt: skip
        assert len(fingerprint(source, source.kinds)) == 64
    assert found.total == 2
    assert [found.levels(name).index.tolist() for name in names if name != "u"] == [
        ["high"], [3.0], ["w"], ["ab"], [1.0], [2.5], [4.5]
    ]  # fmt: skip


def test_names_never_become_part_of_a_query(server):
    strange = 'a"; DROP TABLE people; --'
    rows = people(20)
    server.write("people", rows, TYPES)
    server.write(strange, rows.rename(columns={"site": strange}), {strange: "text", "glucose": "float8"})
    with open_data(server.url, table=strange) as source:
        assert reduce_to_patterns(source, Wanted("glucose", {"site": strange})).total == 20
    with open_data(server.url, table="people") as source:
        assert source.table.count().execute() == 20


def test_tables_are_found_by_schema_and_listed_where_not_found(server):
    rows = people(5)
    server.write("people", rows, TYPES)
    server.write("cohort.visits", rows[:2], TYPES)
    server.write("other.visits", rows[:3], TYPES)
    with server.connect() as connection:
        connection.execute("CREATE OR REPLACE VIEW adults AS SELECT * FROM people")
        connection.execute(
            "DROP MATERIALIZED VIEW IF EXISTS kept; CREATE MATERIALIZED VIEW kept AS SELECT * FROM people"
        )
    for table, count in {"people": 5, "public.people": 5, "cohort.visits": 2, "adults": 5, "kept": 5}.items():
        with open_data(server.url, table=table) as source:
            assert source.table.count().execute() == count
    assert finding_of(server.url, "peopl").remedy == "Did you mean “people”?"
    assert "“people”" in finding_of(server.url, None).remedy
    ambiguous = finding_of(server.url, "visits")
    assert (ambiguous.code, "“cohort.visits”, “other.visits”" in ambiguous.remedy) == ("data-table-ambiguous", True)


def test_everything_is_counted_as_it_was_at_the_start_and_nothing_is_written(server):
    server.write("people", people(10), TYPES)
    with open_data(server.url, table="people") as source:
        assert source.table.count().execute() == 10
        with server.connect() as connection:
            connection.execute("INSERT INTO people SELECT * FROM people")
        assert source.table.count().execute() == 10
        with pytest.raises(psycopg.errors.ReadOnlySqlTransaction):
            source.table.get_backend().con.execute("DELETE FROM people")
    with open_data(server.url, table="people") as source:
        assert source.table.count().execute() == 20


def test_the_password_file_will_do(postgres, monkeypatch, tmp_path):
    for name in ("PGUSER", "PGPASSWORD"):
        monkeypatch.delenv(name, raising=False)
    postgres.write("people", people(5), TYPES)
    file = tmp_path / "passwords"
    file.write_text(f"127.0.0.1:{postgres.port}:*:{postgres.user}:{postgres.password}\n", encoding="utf-8")
    file.chmod(0o600)
    monkeypatch.setenv("PGPASSFILE", str(file))
    with open_data(postgres.url.replace("//", f"//{postgres.user}@"), table="people") as source:
        assert source.table.count().execute() == 5
        assert postgres.password not in source.name + source.place


def test_whatever_fails_no_secret_is_shown(server, monkeypatch, capfd):
    server.write("people", people(5), TYPES)
    wrong = "n0t-the-passw0rd"
    cases = [
        (server.url, server.password, "nobody"),
        (server.url, wrong, server.user),
        (server.url.replace("/postgres", "/nowhere"), server.password, server.user),
        ("postgresql://127.0.0.1:1/db", server.password, server.user),
        (f"{server.url}?sslmode=require", server.password, server.user),
        (f"{server.url}?nonsense={wrong}", server.password, server.user),
        (f"{server.url}?password={wrong}", server.password, server.user),
        (server.url.replace("//", f"//reader:{wrong}@"), server.password, server.user),
        (f"postgresql://127.0.0.1:{server.port}/{server.password}", server.password, server.user),
        (server.url, f"{wrong}\n", server.user),
    ]
    for url, password, user in cases:
        monkeypatch.setenv("PGPASSWORD", password)
        monkeypatch.setenv("PGUSER", user)
        with pytest.raises(DataError) as caught, open_data(url, table="people"):
            pass
        (finding,) = caught.value.findings
        assert finding.code in ("data-no-connection", "data-credentials")
        shown = finding.message + finding.remedy + "".join(traceback.format_exception(caught.value))
        shown += "".join(capfd.readouterr())
        assert wrong not in shown
        assert "\n" not in str(finding)
        if server.password not in url:  # what somebody writes as the name of a database is no secret to us
            assert server.password not in shown


def test_what_the_server_will_not_answer_is_said_without_the_value(server):
    with server.connect() as connection:
        connection.execute("DROP TABLE IF EXISTS wide CASCADE; CREATE TABLE wide (x text, night int, glucose float8)")
        connection.execute("INSERT INTO wide VALUES ('secret', 1, 2)")
        connection.execute("CREATE OR REPLACE VIEW broken AS SELECT x::int AS site, night, glucose FROM wide")
    with pytest.raises(DataError) as caught, open_data(server.url, table="broken") as source:
        reduce_to_patterns(source, WANTED)
    (finding,) = caught.value.findings
    assert finding.code == "data-refused"
    assert "22P02" in finding.message
    assert "secret" not in "".join(traceback.format_exception(caught.value))


def _count_kill_count(source: Source, server: Server) -> None:
    reduce_to_patterns(source, WANTED)
    server.kill()
    reduce_to_patterns(source, WANTED)


def test_a_server_killed_between_two_questions_is_one_finding_and_a_retry_gives_the_same(monkeypatch, caplog, capfd):
    rows = people()
    with running_server() as mine:
        for name, value in mine.environment.items():
            monkeypatch.setenv(name, value)
        mine.write("people", rows, TYPES)
        with open_data(mine.url, table="people") as source:
            before = fingerprint(source, COLUMNS)
        with (
            caplog.at_level(logging.WARNING),
            pytest.raises(DataError) as caught,
            open_data(mine.url, table="people") as source,
        ):
            _count_kill_count(source, mine)
        assert [finding.code for finding in caught.value.findings] == ["data-connection-lost"]
        assert "\n" not in str(caught.value)
        assert mine.password not in str(caught.value)
        assert finding_of(mine.url).code == "data-no-connection"
        assert caplog.records == []
        assert "".join(capfd.readouterr()) == ""
    with running_server() as again:
        monkeypatch.setenv("PGPASSWORD", again.password)
        again.write("people", rows, TYPES)
        with open_data(again.url, table="people") as source:
            assert fingerprint(source, COLUMNS) == before


@pytest.mark.parametrize("how", ["counting", "streaming"])
def test_a_server_killed_in_the_middle_of_an_answer_is_one_finding(monkeypatch, capfd, how):
    with running_server() as mine:
        for name, value in mine.environment.items():
            monkeypatch.setenv(name, value)
        with mine.connect() as connection:
            connection.execute(
                "CREATE VIEW people AS SELECT (x % 2)::int AS night, x::text AS site, x / 7.0 AS glucose"
                " FROM generate_series(1, 1000000000) AS x"
            )
        killed = []

        def kill_when_busy() -> None:
            query = "SELECT count(*) FROM pg_stat_activity WHERE state = 'active' AND query LIKE %s"
            deadline = time.monotonic() + 20
            with mine.connect() as watching:
                # The text of the query we wait for; our own has it as a parameter only.
                while watching.execute(query, ['%"t0"%']).fetchone() == (0,) and time.monotonic() < deadline:
                    time.sleep(0.02)
            killed.append(time.monotonic() < deadline)
            time.sleep(0.2)
            mine.kill()

        def ask(source: Source) -> object:
            return (
                reduce_to_patterns(source, WANTED) if how == "counting" else fingerprint(source, ["night", "glucose"])
            )

        killer = threading.Thread(target=kill_when_busy)
        killer.start()
        with pytest.raises(DataError) as caught, open_data(mine.url, table="people") as source:
            ask(source)
        killer.join()
        assert killed == [True]
        assert [finding.code for finding in caught.value.findings] == ["data-connection-lost"]
        assert "".join(capfd.readouterr()) == ""


def test_where_the_server_is_not_installed_ci_fails_and_others_skip(monkeypatch):
    monkeypatch.setattr(postgres_server, "programs", lambda: None)
    for ci, outcome in (("true", pytest.fail.Exception), ("", pytest.skip.Exception)):
        monkeypatch.setenv("CI", ci)
        with pytest.raises(outcome, match="PostgreSQL server"), running_server():
            pass
