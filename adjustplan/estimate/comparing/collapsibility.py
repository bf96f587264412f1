"""How much of the step from crude to adjusted is confounding, and how much is the odds ratio itself.

An odds ratio is *not collapsible*: the odds ratio among people alike in their covariates (conditional) lies further
from 1 than that of the whole population (marginal), even where nothing confounds, as long as the covariates predict
the outcome (Greenland, Robins and Pearl 1999, Stat Sci 14:29). So the step from a crude to an adjusted odds ratio mixes
two things. Averaging the predictions of the very model that gave the conditional odds ratio gives the marginal one,
and parts them: crude to marginal is confounding, marginal to conditional is non-collapsibility (Janes, Dominici and
Zeger 2010, Biostatistics 11:572). Hazard ratios behave alike.
"""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass, replace
from typing import Any

from adjustplan.data import Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.modelling import estimate_effect
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.results import Estimate, aligned, interval_text, with_interval
from adjustplan.estimate.standard_errors import joint_covariance


@dataclass(frozen=True)
class Collapsibility:
    """Crude, marginal and conditional, from the same rows.

    Attributes
    ----------
    crude, marginal, conditional : Estimate
    confounding : float
        The crude ratio over the marginal one.
    non_collapsibility : Estimate
        The conditional ratio over the marginal one; 1 where the two agree. Its limits are not a number where they are
        not known.
    """

    crude: Estimate
    marginal: Estimate
    conditional: Estimate
    confounding: float
    non_collapsibility: Estimate

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""
        return asdict(self) | {"meaning": self.meaning}

    @property
    def findings(self) -> tuple[Finding, ...]:
        """None: it is how the measure is, not a fault."""
        return ()

    def lines(self) -> list[str]:
        """As text."""
        rows = [
            ("crude", interval_text(self.crude)),
            ("marginal", interval_text(self.marginal)),
            ("conditional", interval_text(self.conditional)),
            ("conditional / marginal", interval_text(self.non_collapsibility)),
        ]
        return ["Confounding and non-collapsibility", *aligned(rows), f"  {self.meaning}"]

    @property
    def meaning(self) -> str:
        """What the numbers say, in a sentence."""
        return (
            f"Of the step from the crude {self.crude.estimate:.3g} to the adjusted {self.conditional.estimate:.3g}, a"
            f" factor of {1 / self.confounding:.3g} is the removal of confounding and a factor of"
            f" {self.non_collapsibility.estimate:.3g} is non-collapsibility, which no lack of confounding would undo."
        )


def collapsibility(patterns: Patterns, setting: Setting, members: tuple[str, ...]) -> Collapsibility | None:
    """Part the two, for an odds ratio from a logistic regression; None where something cannot be estimated.

    Parameters
    ----------
    patterns : Patterns
        Of the rows complete for the exposure and ``members``.
    setting : Setting
        The planned regression.
    members : tuple of str
    """
    # without products of exposure and modifier, which would make the marginal ratio one of another model
    setting = replace(setting, modifier=None)
    crude = estimate_effect(patterns.complete([setting.exposure]), setting, [])
    conditional = estimate_effect(patterns, setting, members)
    marginal = estimate_effect(patterns, setting.by("standardisation", "logistic"), members)
    if not (crude.estimate and conditional.estimate and marginal.estimate and marginal.problem):
        return None
    assert conditional.solution is not None
    assert marginal.solution is not None
    one, other = conditional.solution.influence, marginal.solution.influence
    assert one is not None
    assert other is not None
    value = conditional.solution.value - marginal.solution.value
    error = math.sqrt(max(float(joint_covariance(marginal.problem, [one - other])[0, 0]), 0.0))
    return Collapsibility(
        crude.estimate,
        marginal.estimate,
        conditional.estimate,
        crude.estimate.estimate / marginal.estimate.estimate,
        with_interval(value, error, ratio=True),
    )
