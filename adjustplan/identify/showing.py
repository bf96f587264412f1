"""How a result shows itself: as a frame, and as a table in a notebook."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from html import escape
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas as pd


class Tabular:
    """A result that is a table: a subclass says its records, and can be turned into a frame or shown in a notebook."""

    __slots__ = ()

    def records(self) -> Iterable[Mapping[str, Any]]:
        """The rows of the table, each a mapping from column to value; all have the same columns."""
        raise NotImplementedError

    def caption(self) -> str:
        """One line over the table."""
        raise NotImplementedError

    def to_frame(self) -> pd.DataFrame:
        """The rows as a pandas frame."""
        import pandas as pd

        return pd.DataFrame(list(self.records()))

    def _repr_html_(self) -> str:
        rows = list(self.records())
        heads = "".join(f"<th>{escape(column.replace('_', ' '))}</th>" for column in (rows[0] if rows else ()))
        body = "".join(
            "<tr>" + "".join(f"<td>{escape(cell_text(value))}</td>" for value in row.values()) + "</tr>" for row in rows
        )
        head = f"<thead><tr>{heads}</tr></thead>"
        return f"<table><caption>{escape(self.caption())}</caption>{head}<tbody>{body}</tbody></table>"


def cell_text(value: object) -> str:
    """A value as a cell of a table shows it."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.4g}"
    if isinstance(value, (list, tuple, set, frozenset)):
        return ", ".join(map(str, value))
    return str(value)


def set_text(members: Iterable[str]) -> str:
    """A set of variables as text: ``{age, site}``, in the order of the names."""
    return "{" + ", ".join(sorted(members)) + "}"


def list_text(words: Iterable[str], last: str = "and") -> str:
    """Words as a list in a sentence: ``a, b and c``."""
    *rest, final = list(words) or [""]
    return f"{', '.join(rest)} {last} {final}" if rest else final


def with_article(words: str) -> str:
    """Words with the indefinite article: ``an odds ratio``, ``a risk ratio``."""
    return f"{'an' if words[:1].lower() in 'aeiou' else 'a'} {words}"
