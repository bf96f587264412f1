"""The two acts that write a plan's history: sealing it, and amending it.

A seal is made once. After it the plan may still change, for studies meet the world; but each change is written down
with its reason, and with whether the data had been seen, which decides what a reader makes of it. Neither act judges
the plan: that only a plan in which ``check`` finds no error is sealed, the command line sees to.
"""

from __future__ import annotations

import datetime
from dataclasses import replace

from adjustplan.errors import Finding, SealError
from adjustplan.plan.history import Entry, History, changes_since, entry_fingerprint, faults
from adjustplan.plan.reading import Plan
from adjustplan.plan.seal_file import is_sealed, read_history, seal_path, write_history
from adjustplan.plan.statements import Statements, statements
from adjustplan.plan.toml_text import collapsed, refuse_undecodable

_UNSIGNED = "0" * 64


def refuse_sealed(plan: Plan) -> None:
    """SealError where the plan is sealed already."""
    if is_sealed(plan.path):
        message = "The plan is sealed already."
        remedy = 'Record what changed since with “adjustplan amend … --reason "…"”.'
        raise SealError(Finding("seal-exists", message, remedy, file=str(seal_path(plan.path))))


def seal(plan: Plan, by: str = "", date: datetime.date | None = None, data_seen: bool = False) -> History:
    """Seal a plan: write what it and its graph say, and their fingerprints, to the seal file beside it.

    Parameters
    ----------
    plan : Plan
    by : str
        Who seals it, in any words.
    date : datetime.date, optional
        By default today.
    data_seen : bool
        Whether the data have been seen already.

    Returns
    -------
    History
        With the seal as its only entry.

    Raises
    ------
    SealError
        If the plan is sealed already, or the date is in the future.
    OutputError
        If the file cannot be written.
    """
    refuse_sealed(plan)
    agreed = statements(plan)
    first = _entry("seal", agreed, by=by, date=date, data_seen=data_seen)
    history = History(seal_path(plan.path), (first,), agreed)
    write_history(history, plan.path.name)
    return history


def amend(plan: Plan, reason: str, by: str = "", date: datetime.date | None = None, *, data_seen: bool) -> History:
    """Record that a sealed plan has changed, what changed, and why.

    Parameters
    ----------
    plan : Plan
        As it is now.
    reason : str
        Why it was changed.
    by : str
        Who changed it, in any words.
    date : datetime.date, optional
        By default today.
    data_seen : bool
        Whether the data had been seen when the change was decided.

    Returns
    -------
    History
        With the amendment as its last entry.

    Raises
    ------
    SealError
        If the plan is not sealed, the seal file was tampered with, nothing changed, the reason is empty, or the date
        or ``data_seen`` contradicts the entry before.
    OutputError
        If the file cannot be written; it is then as it was.
    """
    history = _sound_history(plan)
    changes = changes_since(plan, history)
    if not changes:
        message = f"Nothing has changed since the {history.last.label}: plan and graph say what was agreed."
        raise _refusal(plan, "seal-nothing-changed", message, "There is nothing to record.")
    if not reason.strip():
        raise _refusal(plan, "seal-no-reason", "The reason is empty.", "Say why the plan changed.")
    agreed = statements(plan)
    entry = _entry("amendment", agreed, by=by, date=date, data_seen=data_seen, reason=reason, changes=changes)
    entry = _signed(entry.model_copy(update={"before": history.last.fingerprint}))
    if entry.date < history.last.date:
        message = f"The amendment's date, {entry.date}, is before that of the {history.last.label}."
        raise _refusal(plan, "seal-bad-date", message, "Give the day on which the change was decided.")
    if history.last.data_seen and not data_seen:
        message = f"By the {history.last.label} the data had been seen."
        raise _refusal(plan, "seal-unseen", message, "What was seen stays seen: say --data-seen.")
    history = replace(history, entries=(*history.entries, entry), agreed=agreed)
    write_history(history, plan.path.name, force=True)
    return history


def _sound_history(plan: Plan) -> History:
    history = read_history(plan.path)
    if history is None:
        message = "The plan is not sealed yet, so there is nothing to amend."
        raise SealError(Finding("seal-missing", message, "Seal it: “adjustplan seal”.", file=str(plan.path)))
    if found := faults(history):
        raise SealError(found)
    return history


def _entry(
    kind: str,
    agreed: Statements,
    *,
    by: str,
    date: datetime.date | None,
    data_seen: bool,
    reason: str = "",
    changes: list[str] | None = None,
) -> Entry:
    today = datetime.date.today()
    refuse_undecodable(by, "name", SealError)
    refuse_undecodable(reason, "reason", SealError)
    if date is not None and date > today:
        raise SealError(Finding("seal-bad-date", f"The date, {date}, is in the future.", "Give today's or an earlier."))
    told = {
        "kind": kind,
        "date": date or today,
        "by": collapsed(by),
        "data_seen": data_seen,
        "reason": collapsed(reason),
        "changes": changes or [],
        "graph": agreed.graph_fingerprint,
        "plan": agreed.plan_fingerprint,
        "before": "",
        "fingerprint": _UNSIGNED,
    }
    return _signed(Entry.model_validate(told))


def _signed(entry: Entry) -> Entry:
    return entry.model_copy(update={"fingerprint": entry_fingerprint(entry)})


def _refusal(plan: Plan, code: str, message: str, remedy: str) -> SealError:
    return SealError(Finding(code, message, remedy, file=str(seal_path(plan.path))))
