"""A table or view of a PostgreSQL database, reached by a connection URL such as ``postgresql://host/database``.

The rows stay in the server: it counts, and sends the counts. Everything happens inside one read-only transaction that
sees the database as it was when it began, so that a table that grows meanwhile gives every model the same people.

Who you are is told by the environment (PGUSER, PGPASSWORD, PGSERVICE, …) or by the password file (``~/.pgpass``, or
what PGPASSFILE names), never by the URL, which stands in a plan that others read. What the driver says is shown only
where it is about the connection, and never with the password in it.
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from typing import TYPE_CHECKING, Any

from adjustplan.data.sources.database_file import choose_table
from adjustplan.data.sources.opened import Opened, data_error
from adjustplan.data.sources.urls import holds_secret, scrubbed
from adjustplan.errors import DataError

if TYPE_CHECKING:
    import psycopg

# A server that is gone is noticed after about a minute of silence, not after the two hours of most systems.
_PATIENCE = {"keepalives_idle": "30", "keepalives_interval": "10", "keepalives_count": "3"}
_SECONDS_TO_CONNECT = "10"
_LONGEST = 300
_NO_RIGHT = "42501"
# What is a table to a reader: tables, partitioned and foreign ones, views and stored views.
_TABLES = """\
SELECT n.nspname, c.relname
FROM pg_catalog.pg_class c JOIN pg_catalog.pg_namespace n ON n.oid = c.relnamespace
WHERE c.relkind IN ('r', 'p', 'v', 'm', 'f')
  AND n.nspname NOT IN ('pg_catalog', 'information_schema') AND n.nspname NOT LIKE 'pg\\_toast%'
  AND has_schema_privilege(n.oid, 'USAGE') AND has_table_privilege(c.oid, 'SELECT')
"""
# Columns whose type is no plain one, and what it is made of; null means text.
_OWN_TYPES = """\
SELECT a.attname, CASE
  WHEN t.typname = 'money' THEN 'numeric(20, 4)'
  WHEN t.typtype = 'd' AND b.typtype = 'b' AND b.typname NOT IN ('bpchar', 'name', 'citext')
    THEN pg_catalog.format_type(t.typbasetype, t.typtypmod)
  END
FROM pg_catalog.pg_attribute a
JOIN pg_catalog.pg_class c ON c.oid = a.attrelid
JOIN pg_catalog.pg_namespace n ON n.oid = c.relnamespace
JOIN pg_catalog.pg_type t ON t.oid = a.atttypid
LEFT JOIN pg_catalog.pg_type b ON b.oid = t.typbasetype
WHERE n.nspname = %s AND c.relname = %s AND a.attnum > 0 AND NOT a.attisdropped
  AND (t.typtype IN ('e', 'd') OR t.typname IN ('money', 'bpchar', 'name', 'citext'))
"""


@contextmanager
def open_postgresql(url: str, table: str | None) -> Iterator[Opened]:
    """Open a table of a PostgreSQL database.

    Raises
    ------
    DataError
        ``data-credentials`` where the URL may hold a password, ``data-no-connection`` where the server cannot be
        reached or refuses, ``data-no-table`` and ``data-table-ambiguous``, ``data-connection-lost`` where the server
        goes away while the caller counts, and ``data-refused`` where it will not answer a question.
    """
    _refuse(url)
    import ibis
    import psycopg

    place = scrubbed(url)
    connection = _connect(url)
    try:
        engine = ibis.postgres.from_connection(connection)
        connection.execute("SELECT 1")  # the transaction begins here
        schema, name = _choose(connection, table, place)
        yield Opened(_readable(connection, engine.table(name, database=schema), schema, name))
    except psycopg.Error as error:
        raise _lost(place) if _is_gone(connection, error) else _refused(error, place) from None  # it may show values
    finally:
        with suppress(psycopg.Error):
            connection.close()


def _refuse(url: str) -> None:
    """DataError for a URL that may hold a secret, or that is no PostgreSQL one."""
    place, scheme = scrubbed(url), url.partition(":")[0].lower()
    if holds_secret(url):
        message = "The connection URL holds a password, or what looks like one."
        remedy = "Take it out and change it; set PGPASSWORD, or write it into the password file (~/.pgpass)."
        raise data_error("data-credentials", message, remedy, place)
    if scheme not in ("postgresql", "postgres"):
        message = f"Data cannot be read from “{scheme}://”."
        raise data_error("data-unknown-format", message, "Name a file, or a postgresql:// URL.", place)


def _connect(url: str) -> psycopg.Connection[Any]:
    import psycopg
    from psycopg.conninfo import conninfo_to_dict

    place = scrubbed(url)
    try:
        given = conninfo_to_dict(url)
    except psycopg.ProgrammingError:
        message = "The connection URL is malformed."
        remedy = "Write postgresql://host:port/database; percent-encode what is no letter, digit, “-”, “.” or “_”."
        raise data_error("data-no-connection", message, remedy, place) from None  # the driver repeats the URL
    settings: dict[str, Any] = _PATIENCE | {"fallback_application_name": "adjustplan"}
    if "PGCONNECT_TIMEOUT" not in os.environ:
        settings["connect_timeout"] = _SECONDS_TO_CONNECT
    settings = {key: value for key, value in settings.items() if key not in given}
    try:
        connection = psycopg.connect(url, **settings)
    except psycopg.Error as error:
        said = _scrub(str(error))
        remedy = "Check the URL, the network, and PGUSER and PGPASSWORD or the password file."
        raise data_error("data-no-connection", f"No connection to the database: {said}", remedy, place) from None
    connection.read_only = True
    connection.isolation_level = psycopg.IsolationLevel.REPEATABLE_READ
    return connection


def _scrub(said: str) -> str:
    """What the driver said about a connection in one line, without the password."""
    secret = os.environ.get("PGPASSWORD", "")
    shown = " ".join((said.replace(secret, "…") if secret else said).split())
    shown = shown.removeprefix("connection failed: ")
    shown = shown if len(shown) <= _LONGEST else f"{shown[:_LONGEST]}…"
    return shown if shown.endswith((".", "?", "!")) else f"{shown}."


def _choose(connection: psycopg.Connection[Any], wanted: str | None, place: str) -> tuple[str, str]:
    tables = connection.execute(_TABLES).fetchall()
    usual = connection.execute("SELECT current_schema()").fetchone()
    return choose_table(tables, wanted, (usual and usual[0]) or "public", place, needed=True)


def _readable(connection: psycopg.Connection[Any], table: Any, schema: str, name: str) -> Any:
    """The table with types of the database's own making as what they are made of.

    ibis takes an enumeration, a domain over numbers and blank-padded text all for text, and then writes what the server
    refuses. Here they are called unknown first, so that the casts that follow are really written.
    """
    import ibis
    from ibis.expr.datatypes import unknown

    mapper = table.get_backend().compiler.type_mapper
    found = connection.execute(_OWN_TYPES, (schema, name)).fetchall()
    casts = {column: "string" if base is None else mapper.from_string(base) for column, base in found}
    if not casts:
        return table
    known = {column: unknown if column in casts else dtype for column, dtype in table.schema().items()}
    plain = table.op().copy(schema=ibis.schema(known)).to_expr()
    return plain.mutate(**{column: plain[column].cast(dtype) for column, dtype in casts.items()})


def _is_gone(connection: psycopg.Connection[Any], error: psycopg.Error) -> bool:
    return connection.closed or connection.broken or (error.sqlstate or "").startswith(("08", "57P"))


def _lost(place: str) -> DataError:
    message = "The connection to the database was lost before the counting was done."
    return data_error("data-connection-lost", message, "Run the same command again; nothing was written.", place)


def _refused(error: psycopg.Error, place: str) -> DataError:
    """What the server would not do, by the name of the error alone: its text may show a value."""
    said = re.sub(r"(?<=.)(?=[A-Z])", " ", type(error).__name__).lower()
    code = f" (SQLSTATE {error.sqlstate})" if error.sqlstate else ""
    remedy = "Look the code up, or ask whoever runs the server."
    if error.sqlstate == _NO_RIGHT:
        remedy = "Ask for the right to read the table."
    return data_error("data-refused", f"The server would not answer: {said}{code}.", remedy, place)
