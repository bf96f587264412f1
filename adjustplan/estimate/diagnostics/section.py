"""The diagnostics of a fit as they are read: a table of balance, and a line for every other question.

Text and JSON say the same. What belongs to single people is rounded to three digits, and no bar of the histogram stands
for fewer than five people of a group (see ``overlap.py``).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.collinearity import Inflation
from adjustplan.estimate.diagnostics.covariates import CovariateBalance
from adjustplan.estimate.diagnostics.leaving_out import LeavingOut
from adjustplan.estimate.diagnostics.linearity import Departure
from adjustplan.estimate.diagnostics.outcomes import OutcomesPerParameter
from adjustplan.estimate.diagnostics.overlap import Positivity, ScoreOverlap
from adjustplan.estimate.diagnostics.wald import WaldTest
from adjustplan.estimate.diagnostics.weights import WeightSummary
from adjustplan.estimate.results import aligned

MOST_ROWS = 12
"""Rows of the balance table that the text shows; JSON has all."""


@dataclass(frozen=True, slots=True)
class NamedTest:
    """A test of one thing that has a name, such as whether the hazard ratio of a covariate stays the same."""

    name: str
    test: WaldTest


@dataclass(frozen=True, slots=True)
class Absent:
    """A diagnostic that is not given, and why."""

    diagnostic: str
    reason: str


@dataclass(frozen=True, slots=True)
class WeightDiagnostics:
    """The weights of inverse probability, sampling weights aside.

    Attributes
    ----------
    summary : WeightSummary
        Of the people at the two levels compared.
    effective_exposed, effective_reference : float
        Effective sample size of each group (Kish 1965).
    exposed, reference : float
        People in each.
    """

    summary: WeightSummary
    effective_exposed: float
    effective_reference: float
    exposed: float
    reference: float


@dataclass(frozen=True)
class Diagnostics:
    """What could be wrong with the planned estimate.

    Attributes
    ----------
    balance : CovariateBalance or None
    positivity : Positivity or None
        Over the strata of the covariates that are categories.
    overlap : ScoreOverlap or None
        Of the probability of the exposed level given the covariates.
    weights : WeightDiagnostics or None
    outcomes : OutcomesPerParameter or None
    influence : LeavingOut or None
    linearity : tuple of Departure, or None
        One for each covariate that enters as a straight line and has more than five values.
    inflation : Inflation or None
        Weighted by people.
    proportional_hazards : tuple of NamedTest, or None
    absent : tuple of Absent
        What is None above, or left out, and why.
    findings : tuple of Finding
    """

    balance: CovariateBalance | None
    positivity: Positivity | None
    overlap: ScoreOverlap | None
    weights: WeightDiagnostics | None
    outcomes: OutcomesPerParameter | None
    influence: LeavingOut | None
    linearity: tuple[Departure, ...] | None
    inflation: Inflation | None
    proportional_hazards: tuple[NamedTest, ...] | None
    absent: tuple[Absent, ...]
    findings: tuple[Finding, ...]

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""
        return {
            "balance": _balance_dict(self.balance),
            "positivity": None if self.positivity is None else asdict(self.positivity),
            "overlap": _overlap_dict(self.overlap),
            "weights": None if self.weights is None else _weights_dict(self.weights),
            "outcomes_per_parameter": None
            if self.outcomes is None
            else asdict(self.outcomes) | {"ratio": self.outcomes.ratio},
            "influence": None
            if self.influence is None
            else {
                "at_least": _rounded(self.influence.at_least),
                "at_most": _rounded(self.influence.at_most),
                "known": self.influence.known,
            },
            "linearity": None if self.linearity is None else [_departure_dict(each) for each in self.linearity],
            "variance_inflation": None
            if self.inflation is None
            else asdict(self.inflation) | {"per_column": self.inflation.per_column},
            "proportional_hazards": None
            if self.proportional_hazards is None
            else [{"name": each.name, **asdict(each.test)} for each in self.proportional_hazards],
            "absent": [asdict(each) for each in self.absent],
            "findings": [finding.to_dict() for finding in self.findings],
        }

    def lines(self) -> list[str]:
        """As text."""
        lines = ["Diagnostics", *_balance_lines(self.balance)]
        if self.positivity:
            lines.append(f"  Positivity: {_positivity_text(self.positivity)}")
        if self.overlap:
            lines.append(f"  Overlap: {_overlap_text(self.overlap)}")
        if self.weights:
            lines.append(f"  Weights: {_weights_text(self.weights)}")
        if self.outcomes:
            counted, parameters = f"{self.outcomes.outcomes:.0f}", self.outcomes.parameters
            lines.append(f"  Outcomes per parameter: {self.outcomes.ratio:.3g} ({counted} over {parameters})")
        if self.influence:
            lines.append(f"  Influence: {_influence_text(self.influence)}")
        for each in self.linearity or ():
            lines.append(f"  Linearity of {each.variable}: {_departure_text(each)}")
        if self.inflation:
            lines.append(f"  Variance inflation of the exposure: {self.inflation.contrast:.3g}")
        for named in self.proportional_hazards or ():
            lines.append(f"  Proportional hazards, {named.name}: {named.test.text}")
        return [*lines, *(f"  {each.diagnostic}: not given, for {each.reason}" for each in self.absent)]


def _balance_dict(found: CovariateBalance | None) -> dict[str, Any] | None:
    if found is None:
        return None
    rows = [{"covariate": row.name, "before": row.before, "after": row.after} for row in found.rows]
    return {"measure": found.measure, "weighted": found.weighted, "rows": rows}


def _balance_lines(found: CovariateBalance | None) -> list[str]:
    if found is None:
        return []
    what = (
        "standardised differences, exposed minus reference"
        if found.measure == "standardised difference"
        else "correlations with the exposure"
    )
    if not found.rows:
        return [f"  Balance ({what}): no covariate varies"]
    ordered = sorted(found.rows, key=lambda row: (round(found.size(row), 2), abs(row.before or 0.0)), reverse=True)
    table = [("covariate", "before", "after weighting")[: 2 + found.weighted]]
    for row in ordered[:MOST_ROWS]:
        table.append((row.name, _signed(row.before), _signed(row.after))[: 2 + found.weighted])
    lines = [f"  Balance ({what})", *(f"  {line}" for line in aligned(table))]
    if len(ordered) > MOST_ROWS:
        rest = ordered[MOST_ROWS:]
        lines.append(f"    and {len(rest)} more, none further than {found.size(rest[0]):.2f}")
    return lines


def _signed(value: float | None) -> str:
    return "none" if value is None else f"{value:+.2f}"


def _positivity_text(found: Positivity) -> str:
    return (
        f"{found.strata} strata of the categories with {found.people:.0f} people; {found.without_exposed} without"
        f" exposed ({found.people_without_exposed:.0f} people), {found.without_reference} without reference"
        f" ({found.people_without_reference:.0f} people)"
    )


def _overlap_dict(found: ScoreOverlap | None) -> dict[str, Any] | None:
    if found is None:
        return None
    return {
        "edges": list(found.edges),
        "exposed": list(found.exposed),
        "reference": list(found.reference),
        "exposed_range": [round(end, 3) for end in found.exposed_range],
        "reference_range": [round(end, 3) for end in found.reference_range],
        "people": found.people,
        "outside": found.outside,
        "share_outside": found.share_outside,
    }


def _overlap_text(found: ScoreOverlap) -> str:
    ranges = [f"{low:.3f} to {high:.3f}" for low, high in (found.exposed_range, found.reference_range)]
    return (
        f"propensity score {ranges[0]} in the exposed, {ranges[1]} in the reference group;"
        f" {found.outside:.0f} of {found.people:.0f} people outside the common range"
    )


def _weights_dict(found: WeightDiagnostics) -> dict[str, Any]:
    summary = found.summary
    return {
        "people": summary.people,
        "mean": summary.mean,
        "largest": _rounded(summary.largest),
        "percentile_99": _rounded(summary.percentile_99),
        "held_by_one_percent": summary.held_by_one_percent,
        "effective": summary.effective,
        "exposed": found.exposed,
        "effective_exposed": found.effective_exposed,
        "reference": found.reference,
        "effective_reference": found.effective_reference,
    }


def _weights_text(found: WeightDiagnostics) -> str:
    summary = found.summary
    return (
        f"effective size {found.effective_exposed:.0f} of {found.exposed:.0f} exposed and"
        f" {found.effective_reference:.0f} of {found.reference:.0f} reference people; mean {summary.mean:.3g}, largest"
        f" {summary.largest:.3g}, the largest 1 % hold {100 * summary.held_by_one_percent:.3g} %"
    )


def _influence_text(found: LeavingOut) -> str:
    if found.known:
        return f"leaving out one person moves the estimate by up to {found.at_most:.3g} standard errors"
    return (
        "leaving out one person moves the estimate by up to somewhere between"
        f" {found.at_least:.3g} and {found.at_most:.3g} standard errors"
    )


def _departure_dict(found: Departure) -> dict[str, Any]:
    return {"variable": found.variable, **asdict(found.test), "shift": found.shift}


def _departure_text(found: Departure) -> str:
    shift = "" if found.shift is None else f"; a curve moves the estimate by {found.shift:+.2f} standard errors"
    return found.test.text + shift


def _rounded(value: float) -> float:
    """To three digits: it belongs to one person."""
    return float(f"{value:.3g}") if math.isfinite(value) else value


def gathered(parts: Sequence[tuple[Finding, ...]]) -> tuple[Finding, ...]:
    """All findings, each once."""
    return tuple(dict.fromkeys(finding for part in parts for finding in part))
