"""Rules about the plan as a contract: is it sealed, has it changed since, does its history hold?"""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding, SealError
from adjustplan.plan.history import History, changes_since, faults
from adjustplan.plan.seal_file import is_sealed, read_history

_SHOWN = 6
_ITEMS = "Hiemstra et al. 2019, BMC Med Res Methodol 19:233, SAP items 4a to 4c (revision history)."


@rule(
    "registration-not-sealed",
    "note",
    finds="A plan that has not been sealed.",
    matters="Only a plan whose content was fixed on a stated day can be shown to have come before the results.",
    mend="Run “adjustplan seal” once the plan is agreed, before the data are seen.",
    source=_ITEMS,
)
def not_sealed(subject: Subject) -> Iterator[Finding]:
    if not is_sealed(subject.plan.path):
        yield subject.finding("The plan is not sealed.", "Once it is agreed, run “adjustplan seal”.")


@rule(
    "registration-changed",
    "error",
    finds="A sealed plan that says, itself or in its graph, something else than was last agreed.",
    matters="A change that nobody recorded cannot be told from one that was made because of the results.",
    mend="Undo the change, or record it and its reason with “adjustplan amend”.",
    source=_ITEMS,
)
def changed(subject: Subject) -> Iterator[Finding]:
    history = _sound_history(subject)
    changes = changes_since(subject.plan, history) if history else []
    if history and changes:
        more = f"; and {len(changes) - _SHOWN} more" if len(changes) > _SHOWN else ""
        message = f"Changed since the {history.last.label}: {'; '.join(changes[:_SHOWN])}{more}."
        yield subject.finding(message, 'Undo it, or record it: “adjustplan amend … --reason "…"”.')


@rule(
    "registration-tampered",
    "error",
    finds="A seal file that was edited, has lost an entry, or cannot be read.",
    matters="It no longer shows what was agreed, and when.",
    mend="Get the seal file back from version control.",
    source="Common practice: a chain of fingerprints, each over the entry before.",
)
def tampered(subject: Subject) -> Iterator[Finding]:
    try:
        history = read_history(subject.plan.path)
    except SealError as error:
        yield from error.findings
        return
    if history:
        yield from faults(history)


@rule(
    "registration-after-data",
    "warning",
    finds="A plan that was sealed, or amended, after the data had been seen.",
    matters="What was decided then may have been decided because of what the data showed; readers need to know which"
    " parts those are.",
    mend="Nothing mends it; say so where the results stand, as the document does, or waive it with the reason.",
    source=_ITEMS,
)
def after_data(subject: Subject) -> Iterator[Finding]:
    history = _sound_history(subject)
    for place, entry in enumerate(history.entries if history else ()):
        if entry.data_seen and history:
            act = "amended" if entry.kind == "amendment" else "sealed"
            message = f"The plan was {act} on {entry.date}, after the data had been seen."
            line = history.line("entry", place, "data_seen")
            remedy = "Say so where the results stand, as the document does."
            yield Finding("", message, remedy, file=str(history.path), line=line)


def _sound_history(subject: Subject) -> History | None:
    """The plan's history; None where there is none, or where another rule says that it does not hold."""
    try:
        history = read_history(subject.plan.path)
    except SealError:
        return None
    return history if history and not faults(history) else None
