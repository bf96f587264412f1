"""Outcomes per parameter: are there enough people with the outcome for so large a model?

The old rule asks for ten people with the outcome (or without it, whichever are fewer) per parameter, because
coefficients of logistic models were biased and their intervals wrong below (Peduzzi and others 1996, J Clin Epidemiol
49:1373). It is contested: five to nine did hardly worse elsewhere (Vittinghoff and McCulloch 2007, Am J Epidemiol
165:710), and much of what it guards against is separation (van Smeden and others 2016, BMC Med Res Methodol 16:163).
"""

from __future__ import annotations

from dataclasses import dataclass

from adjustplan.errors import Finding

ENOUGH = 10.0
"""Peduzzi and others 1996; contested."""
FEW = 5.0
"""Vittinghoff and McCulloch 2007."""


@dataclass(frozen=True, slots=True)
class OutcomesPerParameter:
    """People with the outcome, parameters of the model beside the intercept, and the one over the other."""

    outcomes: float
    parameters: int

    @property
    def ratio(self) -> float:
        """Outcomes per parameter."""
        return self.outcomes / self.parameters


def outcomes_per_parameter(outcomes: float, others: float | None, parameters: int) -> OutcomesPerParameter:
    """Count what the rule asks for.

    Parameters
    ----------
    outcomes : float
        People with the outcome, or events.
    others : float or None
        People without it; None where only events count, as for rates and hazards.
    parameters : int
        Of the model, without the intercept.

    Raises
    ------
    ValueError
        If the model has no parameter.
    """
    if parameters < 1:
        raise ValueError("a model has at least one parameter")
    return OutcomesPerParameter(outcomes if others is None else min(outcomes, others), parameters)


def outcomes_findings(result: OutcomesPerParameter) -> tuple[Finding, ...]:
    """A note below ten outcomes per parameter, a warning below five."""
    if result.ratio >= ENOUGH:
        return ()
    message = (
        f"The model has {result.ratio:.3g} outcomes per parameter ({result.outcomes:.0f} outcomes,"
        f" {result.parameters} parameters); the customary, contested rule asks for {ENOUGH:.0f}."
    )
    remedy = "Adjust for less, state simpler forms, or fit a penalised model."
    return (Finding("estimate-few-outcomes", message, remedy, "warning" if result.ratio < FEW else "note"),)
