"""The document's crosswalk: published recommendations, met or not, and where the plan answers them."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.crosswalk import crosswalk
from adjustplan.check.subject import Subject
from adjustplan.plan import Plan
from adjustplan.report.markdown import table, text


def recommendations_section(plan: Plan) -> Iterator[str]:
    """The section, as paragraphs of Markdown."""
    rows = [
        (
            text(f"{item.source}, {item.number}"),
            text(item.words),
            f"**{item.status}**" if item.status == "not met" else item.status,
            text(item.remark) + (f" Line {item.line} of the plan." if item.line else ""),
        )
        for item in crosswalk(Subject(plan))
    ]
    yield "## Published recommendations"
    yield table(("From", "In our words", "Here", "Where and how"), rows)
