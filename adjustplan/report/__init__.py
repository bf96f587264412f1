"""Documents and pictures made from results."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from adjustplan.report.document import write_document as write_document

__all__ = ["write_document"]


def __getattr__(name: str) -> Any:
    if name == "write_document":  # loaded late: a graph command does not need it
        from adjustplan.report.document import write_document

        return write_document
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
