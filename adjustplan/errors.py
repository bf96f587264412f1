"""What can be wrong, and how it is said.

Everything the package has to say about somebody's work is a *finding*: what is wrong, where it stands, and what
mends it. A check returns findings. Input that cannot be used at all raises an :class:`AdjustplanError` that carries
them, all those of one file at once. Something worth knowing that stops nothing is a warning of the class
:class:`AdjustplanWarning`.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Literal

Severity = Literal["error", "warning", "note"]


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing found wrong or worth knowing.

    Attributes
    ----------
    code : str
        Stable name of the kind of finding, its subject first: ``graph-cycle``, ``data-missing-column``.
    message : str
        What is the case, in one sentence.
    remedy : str
        What to do about it, in one sentence.
    severity : {"error", "warning", "note"}
        An error stands in the way of a right answer, a warning may, a note is for the record.
    file, line, column : str or int, optional
        Where it stands; lines and columns count from 1.
    excerpt : str, optional
        The line of the file itself.
    """

    code: str
    message: str
    remedy: str = ""
    severity: Severity = "error"
    file: str | None = None
    line: int | None = None
    column: int | None = None
    excerpt: str | None = None

    @property
    def place(self) -> str:
        """``file:line:column``, as far as known; empty where nothing is."""
        parts = [self.file, self.line, self.column]
        return ":".join(str(part) for part in parts if part is not None)

    def at(self, file: str) -> Finding:
        """The same finding, said to be in ``file``."""
        return replace(self, file=file)

    def to_dict(self) -> dict[str, str | int | None]:
        """The finding as JSON has it."""
        keys = ("code", "severity", "message", "file", "line", "remedy")
        return {key: getattr(self, key) for key in keys}

    def __str__(self) -> str:
        head = f"{self.place}: {self.message}" if self.place else self.message
        text = f"{head} {self.remedy}".rstrip()
        if self.excerpt is None:
            return text
        shown = f"{text}\n    {self.excerpt}"
        if self.column is None:
            return shown
        indent = "".join("\t" if letter == "\t" else " " for letter in self.excerpt[: self.column - 1])
        return f"{shown}\n    {indent}^"


class AdjustplanError(Exception):
    """Root of every exception the package raises; ``findings`` holds at least one finding."""

    def __init__(self, findings: Finding | Iterable[Finding]) -> None:
        self.findings: tuple[Finding, ...] = (findings,) if isinstance(findings, Finding) else tuple(findings)
        if not self.findings:
            raise ValueError("an error needs at least one finding")
        super().__init__("\n".join(map(str, self.findings)))


class GraphError(AdjustplanError):
    """A causal graph cannot be read, written, or is none (a cycle, an arrow back in time)."""


class QuestionError(AdjustplanError):
    """A question cannot be asked of this graph (an unknown variable, exposure and outcome the same)."""


class PlanError(AdjustplanError):
    """A plan file cannot be read or does not fit together."""


class SealError(AdjustplanError):
    """A plan's seal cannot be read, does not hold, or cannot be made or amended (nothing changed, sealed already)."""


class DataError(AdjustplanError):
    """The data cannot serve the plan (a missing column, an outcome with one level)."""


class OutputError(AdjustplanError):
    """A result cannot be written (the file exists, the folder cannot be made)."""


class AdjustplanWarning(UserWarning):
    """Something the reader should know that stops nothing."""


def nearest(word: str, known: Iterable[str]) -> str | None:
    """The known word that ``word`` was probably meant to be, or None where nothing is close."""
    candidates = list(known)
    folded = {candidate.casefold(): candidate for candidate in reversed(candidates)}
    matches = difflib.get_close_matches(word.casefold(), folded, n=1, cutoff=0.7)
    return folded[matches[0]] if matches else None


def did_you_mean(word: str, known: Iterable[str], otherwise: str = "") -> str:
    """A remedy: the near miss of ``word`` among ``known``, else the sentence ``otherwise``."""
    match = nearest(word, known)
    return f"Did you mean “{match}”?" if match else otherwise
