"""Rules about the data, where there are any yet: only the names of its columns are looked at, never a row."""

from __future__ import annotations

from collections.abc import Iterator
from glob import glob, has_magic
from pathlib import Path

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
    if analysis is None or analysis.data is None or not _there(subject):
        return
    from adjustplan.data import check_columns, open_data  # only where there are data
    from adjustplan.data.eligibility import data_problems, eligible_rows

    plan = subject.plan
    if plan.file.data is not None and data_problems(plan.file.data):
        return  # the rule below says so
    needed = [subject.exposure, subject.outcome, *subject.members]
    measured = [name for name in needed if not subject.plan.graph[name].unmeasured]
    try:
        with open_data(plan.data_place, table=plan.data_table, folder=plan.path.parent) as source:
            yield from check_columns(plan, eligible_rows(plan, source)[0], measured)
    except DataError as error:
        yield from error.findings


@rule(
    "data-rows",
    "error",
    finds="Something in [data] that cannot be done: an expression that cannot be read, a derived column that is not"
    " fully stated, columns that use each other in a circle.",
    matters="Nobody can say who is eligible or what a column holds.",
    mend="Follow the advice of the message; “explain” has a paragraph for each.",
    source="STROBE item 6 and item 13 (von Elm et al. 2007, PLoS Med 4:e296).",
)
def rows(subject: Subject) -> Iterator[Finding]:
    data = subject.plan.file.data
    if data is None:
        return
    from adjustplan.data.eligibility import data_problems
    from adjustplan.data.expressions.faults import in_plan

    yield from map(in_plan(subject.plan), data_problems(data))


@rule(
    "data-credentials",
    "error",
    finds="A password, or what may be one, in the place of the data.",
    matters="A plan is under version control and is sent around, and so the password is. It must count as known.",
    mend="Take it out, change it, and name it in the environment (PGPASSWORD) or in the password file of the server.",
)
def credentials(subject: Subject) -> Iterator[Finding]:
    analysis = subject.plan.file.analysis
    if analysis is None or analysis.data is None or isinstance(subject.plan.data_place, Path):
        return
    from adjustplan.data.sources.urls import holds_secret

    if holds_secret(analysis.data.removeprefix("spark:")):
        message = "The place of the data holds a password or a key, or what looks like one."
        remedy = "Take it out and change it; name it in the environment or the password file."
        yield subject.finding(message, remedy, "analysis", "data")


@rule(
    "data-awaited",
    "note",
    finds="A plan whose data are not there yet.",
    matters="Columns cannot be compared with the plan before they are.",
    mend="Nothing, while the plan is being written; else mend data = “…”.",
)
def awaited(subject: Subject) -> Iterator[Finding]:
    analysis = subject.plan.file.analysis
    if analysis and analysis.data and isinstance(subject.plan.data_place, Path) and not _there(subject):
        message = f"The data file {analysis.data} is not there yet."
        yield subject.finding(message, "Columns are checked once it is.", "analysis", "data")


def _there(subject: Subject) -> bool:
    """Whether there are data to look at: a file, a folder or a pattern of files; never a server."""
    place = subject.plan.data_place
    if not isinstance(place, Path):
        return False
    return place.exists() or (has_magic(str(place)) and bool(glob(str(place))))  # noqa: PTH207
