"""Keeps Spark's and its gateway's own words away from a reader: pages of Java and Python, with values in them."""

from __future__ import annotations

import logging
import warnings
from collections.abc import Iterator
from contextlib import contextmanager

_LOGGERS = ("SQLQueryContextLogger", "DataFrameQueryContextLogger")


@contextmanager
def quiet() -> Iterator[None]:
    """While this lasts, what the gateway to Java logs, and what Spark logs of queries, is dropped; nothing else is."""
    from pyspark.logger import PySparkLogger

    root, gateway, stands_in = logging.getLogger(), logging.getLogger("py4j"), logging.NullHandler()
    gateway.addHandler(stands_in)
    root.addFilter(_is_not_the_gateways)
    # Without a handler the gateway's first word would make one, which stays.
    usual = None if root.handlers else logging.lastResort
    if usual is not None:
        root.addHandler(usual)
    queries = [PySparkLogger.getLogger(name) for name in _LOGGERS]
    before = [logger.disabled for logger in queries]
    try:
        for logger in queries:
            logger.disabled = True
        with warnings.catch_warnings():
            warnings.filterwarnings("ignore", "toPandas attempted Arrow optimization")
            yield
    finally:
        for logger, disabled in zip(queries, before, strict=True):
            logger.disabled = disabled
        if usual is not None:
            root.removeHandler(usual)
        root.removeFilter(_is_not_the_gateways)
        gateway.removeHandler(stands_in)


def _is_not_the_gateways(record: logging.LogRecord) -> bool:
    return "py4j" not in record.pathname.replace("\\", "/").split("/")
