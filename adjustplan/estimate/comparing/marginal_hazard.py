"""A hazard ratio and the risks behind it: conditional against marginal, at the end of follow-up.

A hazard ratio is not collapsible either: among people alike in their covariates it lies further from 1 than in the
whole population, confounding or not, because the frail fail first and the groups grow unlike (Martinussen and
Vansteelandt 2013, Lifetime Data Anal 19:279). Averaging the survival curves that the Cox model predicts for everybody
at both levels of the exposure gives the marginal survival, S1 and S0 at the end of follow-up; log S1 / log S0, the
ratio of the marginal cumulative hazards, is the marginal counterpart of the hazard ratio over that time.
"""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from adjustplan.errors import Finding
from adjustplan.estimate.modelling import Modelled
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.results import Estimate, aligned, interval_text
from adjustplan.estimate.rows.survival import baseline_hazard, survival_at


@dataclass(frozen=True)
class MarginalHazard:
    """Crude, marginal and conditional hazard ratio, from the same rows.

    Attributes
    ----------
    crude, conditional : Estimate
    marginal : float
        Ratio of the marginal cumulative hazards up to ``time``.
    time : float
        In the unit of the data: the latest event that every stratum was followed to.
    risks : tuple of (float, float)
        By that time, had everybody been exposed, and had everybody been at the reference level.
    non_collapsibility : float
        The conditional ratio over the marginal one.
    """

    crude: Estimate
    conditional: Estimate
    marginal: float
    time: float
    risks: tuple[float, float]
    non_collapsibility: float

    @property
    def findings(self) -> tuple[Finding, ...]:
        """None: it is how the measure is, not a fault."""
        return ()

    @property
    def meaning(self) -> str:
        """What the numbers say, in a sentence."""
        return (
            f"Of the step from the crude {self.crude.estimate:.3g} to the adjusted {self.conditional.estimate:.3g}, a"
            f" factor of {self.marginal / self.crude.estimate:.3g} is the removal of confounding and a factor of"
            f" {self.non_collapsibility:.3g} is non-collapsibility, which no lack of confounding would undo."
        )

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""
        risks = {"exposed": self.risks[0], "reference": self.risks[1]}
        return asdict(self) | {"risks": risks, "meaning": self.meaning}

    def lines(self) -> list[str]:
        """As text."""
        rows = [
            ("crude", interval_text(self.crude)),
            (
                "marginal",
                f"{self.marginal:.3g}, from risks of {self.risks[0]:.3g} and {self.risks[1]:.3g} by {self.time:g}",
            ),
            ("conditional", interval_text(self.conditional)),
            ("conditional / marginal", f"{self.non_collapsibility:.3g}"),
        ]
        return ["Confounding and non-collapsibility", *aligned(rows), f"  {self.meaning}"]


def marginal_hazard(crude: Modelled, adjusted: Modelled) -> MarginalHazard | None:
    """Average the survival curves of an adjusted Cox model; None where that cannot be done.

    Parameters
    ----------
    crude, adjusted : Modelled
        Cox models of the same rows.
    """
    fitted = adjusted.row_fit
    if fitted is None or fitted.result is None or fitted.time is None:
        return None
    if crude.estimate is None or adjusted.estimate is None:
        return None
    columns, coefficients = fitted.matrix.columns, fitted.result.coefficients
    baseline = baseline_hazard(
        columns,
        fitted.time,
        fitted.event,
        coefficients,
        entry=fitted.entry,
        stratum=fitted.stratum,
        counts=fitted.counts,
    )
    followed = float(baseline.end.min())
    events = fitted.time[(fitted.event > 0) & (fitted.time <= followed)]
    if not len(events):
        return None
    end = float(events.max())
    try:
        alive = [
            survival_at(baseline, side, coefficients, end, fitted.stratum)
            for side in (fitted.matrix.exposed, fitted.matrix.reference)
        ]
    except NotEstimableError:
        return None
    exposed, reference = (float(np.average(part, weights=fitted.counts)) for part in alive)
    if not (0 < exposed < 1 and 0 < reference < 1):
        return None
    marginal = math.log(exposed) / math.log(reference)
    risks = (1 - exposed, 1 - reference)
    return MarginalHazard(
        crude.estimate, adjusted.estimate, marginal, end, risks, adjusted.estimate.estimate / marginal
    )
