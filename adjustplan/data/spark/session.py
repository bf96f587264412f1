"""A Spark session: the one that is there, a cluster's that the environment names, or one on this machine.

Tried in this order:

1. A session that this Python process has already (a notebook's, say): it is used, and left as it was.
2. ``SPARK_REMOTE``: a Spark Connect server, such as ``sc://host``.
3. ``PYSPARK_GATEWAY_PORT``, ``PYSPARK_SUBMIT_ARGS``, ``SPARK_CONF_DIR`` or a ``MASTER`` that is not local: a cluster,
   by Spark's own settings.
4. Otherwise Spark starts on this machine, with as many threads as there are processors, or as ``MASTER`` says
   (``local[4]``). It listens on the loopback address alone, shows no page, and keeps its files in a temporary folder.

Spark's own words go to a file that is thrown away; a reader hears only what concerns them.
"""

from __future__ import annotations

import importlib.util
import os
import shutil
import signal
import subprocess
import sys
import tempfile
import threading
import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from adjustplan.data.sources.opened import data_error
from adjustplan.data.spark.quiet import quiet

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

_CLUSTER = ("PYSPARK_GATEWAY_PORT", "PYSPARK_SUBMIT_ARGS", "SPARK_CONF_DIR")
_SECONDS_TO_STOP = 20
_MOST_RETRIES = 6  # about a minute, where Spark would go on for ten
_OWN_SETTINGS: Mapping[str, str] = {
    # Spark tells columns apart by capitals, so that two that differ in nothing else can be found and reported.
    "spark.sql.caseSensitive": "true",
    "spark.sql.execution.arrow.pyspark.enabled": "true",
    "spark.sql.execution.arrow.pyspark.fallback.enabled": "false",
    "spark.sql.execution.arrow.maxRecordsPerBatch": "65536",
    # One part may lack a column that others have, and then has it missing; else the first part would decide.
    "spark.sql.parquet.mergeSchema": "true",
    # A file that goes away or is broken is an error, never fewer people.
    "spark.sql.files.ignoreMissingFiles": "false",
    "spark.sql.files.ignoreCorruptFiles": "false",
}


@dataclass(frozen=True, eq=False)
class Running:
    """A session that can be used.

    Attributes
    ----------
    session : pyspark.sql.SparkSession
        With settings of its own.
    process : subprocess.Popen or None
        The Java process, where it was started here.
    """

    session: SparkSession
    process: subprocess.Popen[bytes] | None = None

    def is_alive(self) -> bool:
        """Whether Spark still answers."""
        if self.process is not None and self.process.poll() is not None:
            return False
        try:
            if _is_remote(self.session):
                return not self.session.is_stopped  # type: ignore[attr-defined]
            context = self.session.sparkContext._jsc
            return context is not None and not context.sc().isStopped()
        except Exception:  # whatever it says, it is no answer
            return False


@contextmanager
def spark_session(place: str) -> Iterator[Running]:
    """Find or start a session; one that was started here is stopped afterwards.

    Raises
    ------
    DataError
        ``data-extra-missing`` without pyspark, ``data-spark-start`` where Spark does not start or answer.
    """
    if importlib.util.find_spec("pyspark") is None:
        message = "Reading from Spark needs the Python package pyspark."
        raise data_error("data-extra-missing", message, "Run: pip install 'adjustplan[spark]'", place)
    with quiet():
        if (present := _present(place)) is not None:
            yield Running(_apart(present))
        elif "SPARK_REMOTE" in os.environ:
            with _joined(place) as running:
                yield running
        else:
            with _started(place) as running:
                yield running


def _present(place: str) -> SparkSession | None:
    """The session that this process has already, in this thread or another."""
    from pyspark import SparkContext
    from pyspark.sql import SparkSession

    try:
        active = SparkSession.getActiveSession()
        if active is None and SparkContext._active_spark_context is not None:
            active = SparkSession.builder.getOrCreate()
    except Exception:  # the process behind it is gone
        message = "The Spark session of this Python process no longer answers."
        raise data_error("data-connection-lost", message, "Start a new one, or a new process.", place) from None
    return active


def _apart(session: SparkSession) -> SparkSession:
    """The same Spark with settings of our own, so that those of whoever started it stay as they are."""
    if not _is_remote(session):
        session = session.newSession()
    for name, value in _OWN_SETTINGS.items():
        if _is_remote(session) and ".pyspark." in name:
            continue  # a server always sends Arrow, and has no such settings
        session.conf.set(name, value)
    return session


def _is_remote(session: SparkSession) -> bool:
    return type(session).__module__.startswith("pyspark.sql.connect")


@contextmanager
def _joined(place: str) -> Iterator[Running]:
    from pyspark.sql import SparkSession

    try:
        from pyspark.sql.connect.client.retries import DefaultPolicy

        joined: Any = SparkSession.builder.remote(os.environ["SPARK_REMOTE"]).getOrCreate()
        joined.client.set_retry_policies([DefaultPolicy(max_retries=_MOST_RETRIES)])
        session = _apart(joined)
    except Exception:  # gRPC has exceptions of its own; what they say may hold a token
        message = "The Spark Connect server that SPARK_REMOTE names does not answer."
        remedy = "Check SPARK_REMOTE and the network, and install pyspark[connect] of the server's version."
        raise data_error("data-no-connection", message, remedy, place) from None
    try:
        yield Running(session)
    finally:
        with suppress(Exception):
            session.stop()


@contextmanager
def _started(place: str) -> Iterator[Running]:
    """Spark in a Java process of its own, which ends with the session."""
    from pyspark import SparkContext
    from pyspark.java_gateway import launch_gateway
    from pyspark.sql import SparkSession

    scratch = Path(tempfile.mkdtemp(prefix="adjustplan-spark-"))
    interrupt = signal.getsignal(signal.SIGINT)
    gateway: Any = None
    context: SparkContext | None = None
    try:
        try:
            configuration = _configuration(scratch)
            if SparkContext._gateway is None:  # else a session that was stopped has left one
                with (scratch / "spark.log").open("wb") as log:
                    said = {"stdout": log, "stderr": log}
                    gateway = launch_gateway(configuration, said)  # type: ignore[no-untyped-call]
            context = SparkContext(gateway=gateway, conf=configuration)
            if str(context.master).startswith("local"):
                context.pythonExec = sys.executable
            # It would print a traceback where Java ends.
            context._accumulatorServer.handle_error = lambda *_: None  # type: ignore[method-assign]
            session = _apart(SparkSession(context))
        except Exception as error:
            raise _not_started(error, place) from None
        yield Running(session, gateway and gateway.proc)
    finally:
        _stop(context, gateway)
        if interrupt is not None and threading.current_thread() is threading.main_thread():
            signal.signal(signal.SIGINT, interrupt)
        shutil.rmtree(scratch, ignore_errors=True)


def _configuration(scratch: Path) -> Any:
    from pyspark import SparkConf

    configuration = SparkConf(loadDefaults=False).setAppName("adjustplan")
    settings = {"spark.ui.showConsoleProgress": "false"}
    master = os.environ.get("MASTER", "")
    if master.startswith("local") or not (master or any(name in os.environ for name in _CLUSTER)):
        settings |= {
            "spark.master": master or "local[*]",
            "spark.ui.enabled": "false",
            "spark.driver.bindAddress": "127.0.0.1",
            "spark.driver.host": "127.0.0.1",
            "spark.local.dir": str(scratch / "local"),
            "spark.sql.warehouse.dir": str(scratch / "warehouse"),
            "spark.sql.catalogImplementation": "in-memory",
            "spark.driver.extraJavaOptions": f"-Djava.io.tmpdir={scratch} -Dderby.system.home={scratch}",
            "spark.executorEnv.OMP_NUM_THREADS": "1",
            "spark.executorEnv.OPENBLAS_NUM_THREADS": "1",
        }
    elif master:
        settings["spark.master"] = master
    for name, value in settings.items():
        configuration.set(name, value)
    return configuration


def _not_started(error: Exception, place: str) -> Exception:
    if "JAVA_GATEWAY_EXITED" in str(error) and shutil.which("java") is None and "JAVA_HOME" not in os.environ:
        message = "Spark needs a Java runtime, and there is none on the PATH."
        remedy = "Install Java 17 or 21 (Debian: apt-get install default-jre-headless), or set JAVA_HOME."
    else:
        message = "Spark did not start."
        remedy = "Check Java (17 or 21), MASTER, and Spark's own settings (SPARK_CONF_DIR, PYSPARK_SUBMIT_ARGS)."
    return data_error("data-spark-start", message, remedy, place)


def _stop(context: Any, gateway: Any) -> None:
    """Stop Spark, end its Java process, and let the next session start one anew."""
    from pyspark import SparkContext
    from pyspark.sql import SparkSession

    with warnings.catch_warnings(), suppress(Exception):
        warnings.simplefilter("ignore")  # it would warn that a process which is gone cannot be stopped
        if context is not None:
            context.stop()
    if gateway is not None:
        with suppress(Exception):
            gateway.shutdown()
        if gateway.proc is not None:
            gateway.proc.stdin.close()
            try:
                gateway.proc.wait(_SECONDS_TO_STOP)
            except subprocess.TimeoutExpired:
                gateway.proc.kill()
                gateway.proc.wait()
        SparkContext._gateway = SparkContext._jvm = None
    SparkContext._active_spark_context = None
    SparkSession._instantiatedSession = SparkSession._activeSession = None
