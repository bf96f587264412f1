"""The effect by level of a modifier: what is reported, and at which levels."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from adjustplan.data import Patterns
from adjustplan.data.checks import show
from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.wald import WaldTest
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.results import Estimate, aligned, interval_text


@dataclass(frozen=True)
class StratumEffect:
    """The effect at one level of the modifier.

    Attributes
    ----------
    level : str
    rows : int
        Rows at this level (where it is a number: all rows).
    effect : Estimate or None
    against_reference : Estimate or None
        This level's effect over that at the reference level (for differences: minus it); None at that level itself.
    relative_excess_risk, attributable_proportion, synergy_index : Estimate or None
        Interaction with the reference level on the additive scale, for ratios by regression.
    """

    level: str
    rows: int
    effect: Estimate | None
    against_reference: Estimate | None = None
    relative_excess_risk: Estimate | None = None
    attributable_proportion: Estimate | None = None
    synergy_index: Estimate | None = None


@dataclass(frozen=True)
class EffectModification:
    """The effect by level of a modifier.

    Attributes
    ----------
    modifier : str
    strata : tuple of StratumEffect
        The reference level first; for categories the most frequent one.
    test : WaldTest or None
        Of the same effect in all strata.
    findings : tuple of Finding
    """

    modifier: str
    strata: tuple[StratumEffect, ...]
    test: WaldTest | None
    findings: tuple[Finding, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""
        plain = asdict(self)
        return plain | {"strata": list(plain["strata"]), "findings": [finding.to_dict() for finding in self.findings]}

    def lines(self) -> list[str]:
        """As text."""
        rows = [("level", "rows", "effect", "against the first", "RERI")] if self.strata else []
        rows += [
            (
                stratum.level,
                str(stratum.rows),
                interval_text(stratum.effect),
                interval_text(stratum.against_reference) if stratum.against_reference else "",
                interval_text(stratum.relative_excess_risk) if stratum.relative_excess_risk else "",
            )
            for stratum in self.strata
        ]
        lines = [f"Effect by level of {self.modifier}", *aligned(rows)]
        for stratum in self.strata:
            if stratum.attributable_proportion and stratum.synergy_index:
                lines.append(
                    f"  {stratum.level}: attributable proportion {interval_text(stratum.attributable_proportion)},"
                    f" synergy index {interval_text(stratum.synergy_index)}"
                )
        if self.test:
            lines.append(f"  Same effect in all levels: {self.test.text}")
        return lines


def places_of(patterns: Patterns, setting: Setting, modifier: str) -> tuple[list[str], list[int]]:
    """The levels at which the effect is shown, in words, and a pattern at each; the reference first."""
    values = patterns.values[modifier].to_numpy()
    counts = patterns.levels(modifier)
    if setting.forms[modifier] in ("category", "stratum"):
        ordered = [counts.idxmax(), *(level for level in counts.index if level != counts.idxmax())]
        return [show([level])[1:-1] for level in ordered], [
            int(np.flatnonzero(values == level)[0]) for level in ordered
        ]
    reached = np.cumsum(counts.to_numpy()) / counts.sum()
    chosen = [float(counts.index[int(np.searchsorted(reached, share))]) for share in (0.25, 0.5, 0.75)]
    words = [f"{value:.4g} ({name})" for value, name in zip(chosen, ("25 %", "median", "75 %"), strict=True)]
    unique = list(dict.fromkeys(chosen))
    if len(unique) < 2:
        message = f"The middle half of the rows has the same “{modifier}”, so its quartiles cannot be compared."
        raise NotEstimableError(
            "estimate-modification", message, 'State it as "cut(…)" in [analysis.forms].', "warning"
        )
    return [words[chosen.index(value)] for value in unique], [
        int(np.flatnonzero(values == value)[0]) for value in unique
    ]


def rows_at(patterns: Patterns, modifier: str, places: Sequence[int], setting: Setting) -> list[int]:
    if setting.forms[modifier] not in ("category", "stratum"):
        return [patterns.people] * len(places)
    counts = patterns.levels(modifier)
    return [int(counts[patterns.values[modifier].iloc[place]]) for place in places]
