"""The document's sections on the plan as a contract: its revisions, and the rules it does not follow.

The revision table has what a statistical analysis plan is asked for (Hiemstra et al. 2019, BMC Med Res Methodol 19:233,
items 4a to 4c): every revision with its date, its timing relative to the data, what changed, why, and by whom.
"""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.errors import SealError
from adjustplan.plan import Plan
from adjustplan.plan.history import Entry, History, changes_since, faults
from adjustplan.plan.seal_file import read_history
from adjustplan.report.markdown import code, table, text


def waiver_section(plan: Plan) -> Iterator[str]:
    """The rules that the plan waives and why, as paragraphs of Markdown; nothing where it waives none."""
    if plan.file.waiver:
        yield "## Rules waived"
        yield "The plan knowingly does not follow these rules of “adjustplan check”."
        yield table(("Rule", "Reason"), [(code(waiver.rule), text(waiver.reason)) for waiver in plan.file.waiver])


def revision_section(plan: Plan) -> Iterator[str]:
    """When the plan was sealed and what was amended since, as paragraphs of Markdown."""
    yield "## Revisions"
    try:
        history = read_history(plan.path)
    except SealError as error:
        yield from _broken([finding.message for finding in error.findings])
        return
    if history is None:
        yield "The plan is **not sealed**: nothing shows that it was written before the data were seen."
        return
    if found := faults(history):
        yield from _broken([finding.message for finding in found])
    yield from _table(history)
    if changes := changes_since(plan, history):
        yield f"**The plan has changed since the {history.last.label}, and no amendment says why:**"
        yield "\n".join(f"- {text(change)}" for change in changes)


def _broken(messages: list[str]) -> Iterator[str]:
    yield "**The seal file does not hold**, so the history of the plan is not known for certain:"
    yield "\n".join(f"- {text(message)}" for message in messages)


def _table(history: History) -> Iterator[str]:
    heads = ("Revision", "Date", "Timing", "What changed", "Why", "By")
    yield table(heads, [_row(number, entry) for number, entry in enumerate(history.entries, start=1)])
    yield (
        "Dates, and whether the data had been seen, are as the team stated them. The last revision has the fingerprint"
        f" {code(history.last.fingerprint)}."
    )


def _row(number: int, entry: Entry) -> tuple[str, ...]:
    sealed = entry.kind == "seal"
    changed = "; ".join(map(text, entry.changes)) or "–"
    return (
        str(number),
        entry.date.isoformat(),
        entry.timing,
        "First sealed version" if sealed else changed,
        "–" if sealed else text(entry.reason),
        text(entry.by) or "not stated",
    )
