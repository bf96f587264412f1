"""A plan's history: the seal that says what was agreed, and the amendments since.

Sealing writes a file beside the plan (``plan.toml`` -> ``plan.seal``) that people and programs can both read. It holds
an *entry* for the seal and one for each amendment: when, by whom, whether the data had been seen, what changed and why,
and the fingerprints of graph and plan at that time. Below stand the statements (see ``statements``) as last agreed, so
that a later change can be said in words.

Each entry carries the fingerprint of the one before it, and its own over all it holds; the statements must match the
last entry. So an edited word, an entry taken out of the middle, or statements that were quietly brought up to date are
found. What no hash without a key can show: that nobody worked the whole chain out afresh, took the last entries off
together with their statements, or wrote another day's date. Against that helps only a copy held elsewhere: version
control that others share, or the last entry's fingerprint sent to somebody or put into a registration. That is why it
is printed in full.
"""

from __future__ import annotations

import datetime
import hashlib
import json
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Field, StringConstraints

from adjustplan.errors import Finding, SealError
from adjustplan.files import read_text
from adjustplan.plan.changes import differences
from adjustplan.plan.places import Key, line_numbers, line_of
from adjustplan.plan.reading import Plan
from adjustplan.plan.statements import Statements, fingerprint, statements
from adjustplan.plan.table import Table

Digest = Annotated[str, StringConstraints(pattern=r"^[0-9a-f]{64}$")]


class Entry(Table):
    """One entry: the seal, or an amendment.

    Attributes
    ----------
    kind : {"seal", "amendment"}
    date : datetime.date
    by : str
        Who, as given; empty: not stated.
    data_seen : bool
        Whether the data had been seen by then, by the team's own word.
    reason : str
        Why the plan was amended; empty for the seal.
    changes : list of str
        What changed since the entry before, in words.
    graph, plan : str
        The fingerprints of what was agreed.
    before : str
        The fingerprint of the entry before; empty for the seal.
    fingerprint : str
        SHA-256 of all of the above.
    """

    kind: Literal["seal", "amendment"]
    date: datetime.date
    by: str
    data_seen: bool
    reason: str
    changes: list[str]
    graph: Digest
    plan: Digest
    before: Digest | Literal[""]
    fingerprint: Digest

    @property
    def timing(self) -> str:
        """When it was made, relative to the data."""
        return "after the data had been seen" if self.data_seen else "before the data were seen"

    @property
    def label(self) -> str:
        """What it is and of which day."""
        return f"{self.kind} of {self.date}"

    def to_dict(self) -> dict[str, Any]:
        """The entry as JSON has it."""
        return self.model_dump(mode="json")


class Agreed(Table):
    """The statements as last agreed."""

    graph: list[str]
    plan: list[str]


class SealFile(Table):
    """The whole seal file."""

    format: Literal[1]
    entry: list[Entry] = Field(min_length=1)
    agreed: Agreed


@dataclass(frozen=True)
class History:
    """The entries of a seal file, first to last, and the statements as last agreed."""

    path: Path
    entries: tuple[Entry, ...]
    agreed: Statements

    @property
    def last(self) -> Entry:
        """The entry that holds now."""
        return self.entries[-1]

    def line(self, *key: str | int) -> int | None:
        """The line of a key of the seal file, such as ``history.line("entry", 0, "date")``."""
        return line_of(key, self._lines)

    @cached_property
    def _lines(self) -> dict[Key, int]:
        return line_numbers(read_text(self.path, SealError, "seal"))

    def to_dict(self) -> dict[str, Any]:
        """The history as JSON has it."""
        return {"seal": str(self.path), "entries": [entry.to_dict() for entry in self.entries]}

    def __str__(self) -> str:
        entry, number = self.last, len(self.entries) - 1
        what = f"Amendment {number}" if number else "Sealed"
        by = f", by {entry.by}" if entry.by else ""
        lines = [f"{what} on {entry.date}, {entry.timing}{by}.", *(f"- {change}" for change in entry.changes)]
        lines.append(f"Fingerprint {entry.fingerprint}")
        return "\n".join([*lines, "Keep it elsewhere too: a copy shows whether this history was rewritten."])


def entry_fingerprint(entry: Entry) -> str:
    """SHA-256, in hexadecimal, of all that an entry holds but its own fingerprint."""
    told = entry.model_dump(mode="json", exclude={"fingerprint"})
    return hashlib.sha256(json.dumps(told, sort_keys=True).encode("ascii")).hexdigest()


def changes_since(plan: Plan, history: History) -> list[str]:
    """What the plan and its graph say otherwise than was last agreed, a sentence for each; empty where nothing."""
    return differences(history.agreed, statements(plan))


def faults(history: History) -> list[Finding]:
    """Everything in which a history does not hold: an entry edited, the chain broken, statements that do not match."""
    found: list[Finding] = []
    remedy = f"Get {history.path.name} back from version control."

    def complain(code: str, message: str, *key: str | int) -> None:
        found.append(Finding(code, message, remedy, file=str(history.path), line=history.line(*key)))

    for place, entry in enumerate(history.entries):
        earlier = history.entries[place - 1] if place else None
        if entry.fingerprint != entry_fingerprint(entry):
            complain("seal-entry-edited", f"The {entry.label} was edited after it was written.", "entry", place)
        if entry.before != (earlier.fingerprint if earlier else ""):
            message = f"The {entry.label} does not follow on what stands before it: an entry is missing or changed."
            complain("seal-chain-broken", message, "entry", place, "before")
        if entry.kind != ("amendment" if earlier else "seal"):
            message = "The first entry is no seal." if earlier is None else "A second seal stands among the entries."
            complain("seal-order", message, "entry", place, "kind")
        if earlier and entry.date < earlier.date:
            complain("seal-order", f"The {entry.label} stands after the {earlier.label}.", "entry", place, "date")
        if earlier and earlier.data_seen and not entry.data_seen:
            message = f"By the {entry.label} the data had not been seen, by the {earlier.label} they had."
            complain("seal-order", message, "entry", place, "data_seen")
    for part in ("graph", "plan"):
        sentences: tuple[str, ...] = getattr(history.agreed, part)
        broken = any("\n" in sentence for sentence in sentences)  # two statements and one in two lines hash alike
        if broken or fingerprint(sentences) != getattr(history.last, part):
            message = f"The statements of the {part} are not those that the {history.last.label} agreed."
            complain("seal-statements-edited", message, "agreed", part)
    return found
