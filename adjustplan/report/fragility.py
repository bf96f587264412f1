"""The document's section on fragility: how strong biases that the data cannot show would have to be."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from adjustplan.report.markdown import table, text
from adjustplan.report.numbers import limits

if TYPE_CHECKING:
    from adjustplan.estimate.stress import Fragility


def fragility_section(fragility: Fragility | None) -> Iterator[str]:
    """The section, as paragraphs of Markdown; nothing where there is no estimate to put under stress."""
    if fragility is None:
        return
    from adjustplan.estimate.stress.results import CAUTIONS
    from adjustplan.estimate.stress.wording import said_of_unmeasured, summary

    yield "## How fragile the estimate is"
    yield " ".join(text(sentence) for sentence in summary(fragility))
    if fragility.unmeasured:
        yield "\n".join(f"- {text(said_of_unmeasured(fragility, name))}" for name in fragility.unmeasured)
    rows = [
        (
            text(str(row["assumption"])),
            text(str(row["name"])),
            limits(row["estimate"], row["lower"], row["upper"]) or "none",
        )
        for row in fragility.records()
    ]
    yield table(("Assumption", "", f"{fragility.measure.capitalize()} that is left"), rows)
    if fragility.findings:
        yield "\n".join(
            f"- **{finding.severity.capitalize()}.** {text(f'{finding.message} {finding.remedy}')}"
            for finding in fragility.findings
        )
    yield " ".join(text(caution) for caution in CAUTIONS)
