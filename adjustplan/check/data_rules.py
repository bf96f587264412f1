"""Rules about the data, where there are any yet: only the names of its columns are looked at, never a row."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import DataError, Finding


@rule(
    "data-column",
    "error",
    finds="A variable of the plan that the data have no usable column for.",
    matters="The planned analysis cannot be run.",
    mend="Name the column in [analysis.columns], or mend the data.",
)
def column(subject: Subject) -> Iterator[Finding]:
    analysis = subject.plan.file.analysis
    if analysis is None or analysis.data is None or not subject.plan.data_path.exists():
        return
    from adjustplan.data import check_columns, open_data  # only where there are data

    needed = [subject.exposure, subject.outcome, *subject.members]
    measured = [name for name in needed if not subject.plan.graph[name].unmeasured]
    try:
        with open_data(subject.plan.data_path) as source:
            yield from check_columns(subject.plan, source, measured)
    except DataError as error:
        yield from error.findings


@rule(
    "data-awaited",
    "note",
    finds="A plan whose data are not there yet.",
    matters="Columns cannot be compared with the plan before they are.",
    mend="Nothing, while the plan is being written; else mend data = “…”.",
)
def awaited(subject: Subject) -> Iterator[Finding]:
    analysis = subject.plan.file.analysis
    if analysis and analysis.data and not subject.plan.data_path.exists():
        message = f"The data file {analysis.data} is not there yet."
        yield subject.finding(message, "Columns are checked once it is.", "analysis", "data")
