"""A real PostgreSQL server, started by the tests, in a folder of its own, that lets nobody in without a password.

``from data.sources.postgres_server import postgres`` in a test file (or a conftest) gives the fixture: one server for a
session. A test that kills it starts one of its own with :func:`running_server`. Where the server is not installed the
tests skip, except under CI=true, where they fail.
"""

from __future__ import annotations

import getpass
import os
import secrets
import shutil
import signal
import socket
import subprocess
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import psycopg
import pytest
from psycopg import sql

OWNER = "postgres"  # the server refuses to run as root, so Debian's user runs it
SECONDS_TO_START = 30


@dataclass(frozen=True)
class Server:
    """A running server.

    Attributes
    ----------
    url : str
        Of its database, without a password.
    user, password : str
        Who may read and write everything.
    port : int
    process : subprocess.Popen
    """

    url: str
    user: str
    password: str
    port: int
    process: subprocess.Popen[bytes]

    @property
    def environment(self) -> dict[str, str]:
        """What a program that connects must have in its environment."""
        return {"PGUSER": self.user, "PGPASSWORD": self.password}

    def connect(self) -> psycopg.Connection[Any]:
        return psycopg.connect(self.url, user=self.user, password=self.password, autocommit=True)

    def write(self, table: str, rows: pd.DataFrame, types: dict[str, str]) -> None:
        """Make a table, in the order of ``types``; ``table`` may name its schema."""
        schema, _, name = table.rpartition(".")
        place = sql.Identifier(*([schema] if schema else []), name)
        columns = [sql.SQL("{} {}").format(sql.Identifier(column), sql.SQL(kind)) for column, kind in types.items()]
        with self.connect() as connection:
            if schema:
                connection.execute(sql.SQL("CREATE SCHEMA IF NOT EXISTS {}").format(sql.Identifier(schema)))
            connection.execute(sql.SQL("DROP TABLE IF EXISTS {} CASCADE").format(place))
            connection.execute(sql.SQL("CREATE TABLE {} ({})").format(place, sql.SQL(", ").join(columns)))
            with connection.cursor().copy(sql.SQL("COPY {} FROM STDIN").format(place)) as copy:
                for row in (
                    rows[list(types)].astype(object).where(rows[list(types)].notna(), None).itertuples(index=False)
                ):
                    copy.write_row(row)

    def kill(self) -> None:
        """End the server and everybody's connection at once, as a crash does."""
        self.process.send_signal(signal.SIGQUIT)
        self.process.wait(timeout=SECONDS_TO_START)


def programs() -> Path | None:
    """The folder with the server's programs, of the newest version."""
    found = sorted(Path("/usr/lib/postgresql").glob("*/bin/postgres"), key=lambda path: int(path.parts[-3]))
    if found:
        return found[-1].parent
    on_path = shutil.which("postgres")
    return Path(on_path).resolve().parent if on_path else None


@contextmanager
def running_server() -> Iterator[Server]:
    """Start a server; it is ended and its folder removed afterwards."""
    folder_of_programs = programs()
    if folder_of_programs is None:
        if os.environ.get("CI") == "true":
            pytest.fail("CI has no PostgreSQL server: .ci/run must install Debian's package postgresql.")
        pytest.skip("The PostgreSQL server is not installed (Debian's package postgresql).")
    as_owner: dict[str, Any] = {"user": OWNER, "group": OWNER, "extra_groups": []} if os.geteuid() == 0 else {}
    with tempfile.TemporaryDirectory(prefix="adjustplan-postgres-", ignore_cleanup_errors=True) as name:
        folder, user, password = Path(name), "reader", secrets.token_hex(12)
        owner = OWNER if as_owner else getpass.getuser()
        (folder / "password").write_text(password, encoding="utf-8")
        if as_owner:
            for place in (folder, folder / "password"):
                shutil.chown(place, OWNER, OWNER)
        quiet: dict[str, Any] = {"cwd": folder, "stdout": subprocess.DEVNULL, "stderr": subprocess.STDOUT, **as_owner}
        data = str(folder / "data")
        made = [str(folder_of_programs / "initdb"), "--pgdata", data, "--username", user, "--encoding", "UTF8"]
        made += ["--auth", "scram-sha-256", "--pwfile", str(folder / "password"), "--no-sync", "--locale", "C.UTF-8"]
        subprocess.run(made, check=True, timeout=120, **quiet)
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            port = free.getsockname()[1]
        command = [str(folder_of_programs / "postgres"), "-D", data, "-k", str(folder), "-h", "127.0.0.1"]
        process = subprocess.Popen([*command, "-p", str(port), "-F"], **quiet)
        server = Server(f"postgresql://127.0.0.1:{port}/postgres", user, password, port, process)
        try:
            _wait(server, owner)
            yield server
        finally:
            if process.poll() is None:
                server.kill()


def _wait(server: Server, owner: str) -> None:
    deadline = time.monotonic() + SECONDS_TO_START
    while True:
        try:
            server.connect().close()
            return
        except psycopg.OperationalError as error:
            if server.process.poll() is not None or time.monotonic() > deadline:
                pytest.fail(f"The PostgreSQL server run by {owner} did not start: {error}")
            time.sleep(0.05)


@pytest.fixture(scope="session")
def postgres() -> Iterator[Server]:
    """One server for all tests of a session."""
    with running_server() as server:
        yield server
