"""A real Spark session, started by the tests on this machine.

``from data.spark.spark_session import spark`` in a test file (or a conftest) gives the fixture: one session with four
threads for all tests; whatever opens a ``spark:`` place while it is there uses it. A test that kills Spark does so in a
process of its own. Where Java or pyspark is not installed the tests skip, except under CI=true, where they fail.
"""

from __future__ import annotations

import importlib.util
import os
import shutil
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from typing import Any

import pytest

from adjustplan.data.source import Source, _source
from adjustplan.data.spark import open_spark
from adjustplan.data.spark.session import spark_session

QUICK = "-XX:TieredStopAtLevel=1 -XX:+UseSerialGC"  # for small work, Java starts faster than it runs


def require_spark() -> None:
    """Skip, or under CI=true fail, where Spark cannot start."""
    lacking = [] if importlib.util.find_spec("pyspark") else ["pyspark"]
    if shutil.which("java") is None and "JAVA_HOME" not in os.environ:
        lacking.append("a Java runtime")
    if not lacking:
        return
    reason = f"Spark needs {' and '.join(lacking)}."
    if os.environ.get("CI") == "true":
        pytest.fail(reason)
    pytest.skip(reason)


@pytest.fixture(scope="session")
def spark() -> Iterator[Any]:
    """One session for all tests."""
    require_spark()
    with ExitStack() as stack:
        with pytest.MonkeyPatch.context() as patch:
            patch.setenv("MASTER", "local[4]")
            patch.setenv("JAVA_TOOL_OPTIONS", QUICK)
            session = stack.enter_context(spark_session("spark:tests")).session
        session.conf.set("spark.sql.shuffle.partitions", "4")
        yield session


@contextmanager
def opened(place: str, folder: Path | None = None) -> Iterator[Source]:
    """A ``spark:`` place as the reduction sees it."""
    with open_spark(place, folder) as found:
        yield _source(None, place, place, found)
