"""Where Spark does not start, is killed or is stopped in the middle: one line, nothing left behind, and a retry works.

These run in a process of their own, since what they do to Spark must not happen to other tests.
"""

from __future__ import annotations

import os
import subprocess
import sys

import pandas as pd
from data.spark.spark_session import QUICK, require_spark

PROGRAM = """\
import os, signal, sys
from adjustplan.data.spark import frame_of, open_spark, sum_over_rows
from adjustplan.errors import DataError

def total(opened):
    return sum_over_rows(frame_of(opened.table), ["age"], lambda block, _: block.sum(axis=0), None)[0]

def kill():
    from pyspark import SparkContext
    os.kill(SparkContext._gateway.proc.pid, signal.SIGKILL)

def stop():
    from pyspark.sql import SparkSession
    SparkSession.getActiveSession().stop()

for end in [kill, stop][:int(sys.argv[1])]:
    try:
        with open_spark("spark:rows.parquet") as opened:
            print(total(opened))
            end()
            print(total(opened))
    except DataError as error:
        (finding,) = error.findings
        print(finding.code)
        assert "\\n" not in str(finding)
"""


def ran(tmp_path, ends, **environment):
    """The program's lines, after it ended by itself without a word on stderr and without leaving files."""
    require_spark()
    (tmp_path / "temporary").mkdir()
    settings = {
        **os.environ,
        "MASTER": "local[2]",
        "JAVA_TOOL_OPTIONS": QUICK,
        "TMPDIR": str(tmp_path / "temporary"),
        **environment,
    }
    settings.pop("SPARK_CONF_DIR", None)
    done = subprocess.run(
        [sys.executable, "-c", PROGRAM, str(ends)],
        cwd=tmp_path,
        env=settings,
        capture_output=True,
        text=True,
        timeout=300,
    )
    assert (done.returncode, done.stderr) == (0, "")
    assert list((tmp_path / "temporary").iterdir()) == []
    return done.stdout.splitlines()


def test_a_killed_or_stopped_spark_gets_one_line_and_a_retry_gives_the_numbers(tmp_path):
    pd.DataFrame({"age": [40.0, 50.5, 61.0]}).to_parquet(tmp_path / "rows.parquet")
    assert ran(tmp_path, 2) == ["151.5", "data-connection-lost", "151.5", "data-connection-lost"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["rows.parquet", "temporary"]


def test_without_java_spark_does_not_start(tmp_path):
    pd.DataFrame({"age": [40.0]}).to_parquet(tmp_path / "rows.parquet")
    assert ran(tmp_path, 1, JAVA_HOME=str(tmp_path / "nowhere")) == ["data-spark-start"]
