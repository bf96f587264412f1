"""ibis's way of speaking to Spark, mended in two places where its answers would be wrong.

- A number such as 1.0 in an expression is written so that Spark takes it for a double. As ibis 12 writes it, Spark
  takes it for a decimal number of two digits, and then rounds the mean of a column made of such numbers to five.
- Whether a number is infinite is asked of Spark. ibis 12 always answers no.

The tests hold both against the embedded engine.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import ibis
import ibis.backends.pyspark
import sqlglot.expressions as sge
from ibis.backends.sql.compilers.pyspark import PySparkCompiler

if TYPE_CHECKING:
    from pyspark.sql import SparkSession


class _Compiler(PySparkCompiler):  # type: ignore[misc]
    __slots__ = ()

    def visit_NonNullLiteral(self, op: Any, *, value: Any, dtype: Any) -> Any:  # noqa: N802 (ibis's name)
        written = super().visit_NonNullLiteral(op, value=value, dtype=dtype)
        return self.cast(written, dtype) if dtype.is_floating() and math.isfinite(value) else written

    def visit_IsInf(self, op: Any, *, arg: Any) -> Any:  # noqa: N802
        if not op.arg.dtype.is_floating():
            return sge.false()
        return sge.or_(arg.eq(self.POS_INF), arg.eq(self.NEG_INF))


class _Backend(ibis.backends.pyspark.Backend):  # type: ignore[misc]
    compiler = _Compiler()


def engine_of(session: SparkSession) -> Any:
    """The ibis engine of a session."""
    if ibis.options.pyspark is None:
        _Backend.register_options()  # ibis does so only for the engines it lists itself
    return _Backend().connect(session)
