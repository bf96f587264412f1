"""The flow of people from the source to the analysis, as numbers: who is left after each step, and why others are not.

STROBE (von Elm and others 2007, item 13) asks how many people there were at each stage and why people left. A flow
starts with the rows of the source; each step says how many are left and accounts for everybody it left out. Beside the
people, it counts the values that were changed on the way: missing codes taken out, values without a new one.
"""

from __future__ import annotations

from dataclasses import dataclass, replace


@dataclass(frozen=True, slots=True)
class LeftOut:
    """People who went no further, and why."""

    reason: str
    rows: int


@dataclass(frozen=True, slots=True)
class FlowStep:
    """One stage.

    Attributes
    ----------
    label : str
        Who is left here: “eligible”, “with outcome”.
    rows : int
        How many they are.
    left_out : tuple of LeftOut
        Who was left out on the way here, each reason once; empty for the first step.
    """

    label: str
    rows: int
    left_out: tuple[LeftOut, ...] = ()

    @property
    def lost(self) -> int:
        """How many were left out on the way here."""
        return sum(part.rows for part in self.left_out)


@dataclass(frozen=True, slots=True)
class Change:
    """Values of a column that were changed.

    Attributes
    ----------
    column : str
    what : str
        What was done to them: “999 counts as missing”.
    rows : int
        In how many rows of the source.
    eligible : int
        In how many rows that are eligible.
    """

    column: str
    what: str
    rows: int
    eligible: int


@dataclass(frozen=True, slots=True)
class Flow:
    """The stages in order, and the changes of values."""

    steps: tuple[FlowStep, ...]
    changes: tuple[Change, ...] = ()

    @classmethod
    def start(cls, rows: int, label: str = "in the source") -> Flow:
        """A flow of one stage."""
        return cls((FlowStep(label, rows),))

    @property
    def rows(self) -> int:
        """How many are left at the end."""
        return self.steps[-1].rows

    def then(self, label: str, rows: int, reason: str) -> Flow:
        """The flow with one more stage, at which whoever is missing was left out for one reason."""
        lost = self.rows - rows
        return self.then_without(label, (LeftOut(reason, lost),) if lost else ())

    def then_without(self, label: str, left_out: tuple[LeftOut, ...]) -> Flow:
        """The flow with one more stage, given who is left out.

        Raises
        ------
        ValueError
            If more are left out than there were, or fewer than none.
        """
        if any(part.rows < 0 for part in left_out) or sum(part.rows for part in left_out) > self.rows:
            raise ValueError(f"cannot leave {[part.rows for part in left_out]} out of {self.rows}")
        rows = self.rows - sum(part.rows for part in left_out)
        return replace(self, steps=(*self.steps, FlowStep(label, rows, left_out)))
