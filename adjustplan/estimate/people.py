"""The people from the source to the analysis: who was left out at each stage, and why (STROBE item 13)."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from adjustplan.data import Patterns
from adjustplan.data.flow import Flow
from adjustplan.errors import Finding
from adjustplan.estimate.results import aligned
from adjustplan.estimate.sets import ReportedSet


@dataclass(frozen=True)
class People:
    """The flow of people into the planned analysis.

    Attributes
    ----------
    flow : Flow
    """

    flow: Flow

    @property
    def findings(self) -> tuple[Finding, ...]:
        """None: who is missing is said where it is counted."""
        return ()

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""
        plain = asdict(self.flow)
        for step in plain["steps"]:
            step["left_out"] = list(step["left_out"])
        return {"steps": list(plain["steps"]), "changes": list(plain["changes"])}

    def lines(self) -> list[str]:
        """As text."""
        rows: list[tuple[str, str, str]] = []
        for step in self.flow.steps:
            rows += [("", f"-{part.rows}", part.reason) for part in step.left_out]
            rows.append((str(step.rows), "", step.label))
        lines = ["Rows from the source to the analysis", *aligned(rows)]
        lines += [
            f"  {change.column}: {change.what}, in {change.rows} rows ({change.eligible} of them eligible)"
            for change in self.flow.changes
        ]
        return lines


def into_the_analysis(flow: Flow, patterns: Patterns, exposure: str, planned: ReportedSet, *, used: int) -> People:
    """The flow with the steps from the eligible rows to those that the planned estimate is made from.

    Parameters
    ----------
    flow : Flow
        To the eligible rows.
    patterns : Patterns
        Of all eligible rows.
    exposure : str
    planned : ReportedSet
    used : int
        Rows that took part in the planned estimate.
    """
    exposed = patterns.values[exposure].notna().to_numpy()
    told = exposed & (patterns.observed > 0)
    rows = int(patterns.rows[exposed].sum())
    flow = flow.then("with the exposure", rows, "exposure missing")
    flow = flow.then("with the outcome", int(patterns.observed[told].sum()), "outcome missing")
    if planned.refused:
        return People(flow)
    complete = np.asarray(told & patterns.is_complete([exposure, *planned.members]))
    left = int(patterns.observed[complete].sum())
    if used > left:  # imputed
        return People(flow)
    return People(flow.then("in the planned analysis", left, "something that the analysis needs missing"))
