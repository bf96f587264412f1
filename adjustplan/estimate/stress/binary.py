"""A confounder with two levels: the bias that follows exactly from how common it is and what it does.

Let a share p₁ of the exposed and a share p₀ of the reference group have the confounder, and let it make the outcome R
times as frequent in either group, beyond the covariates adjusted for. Then the risk ratio is biased by the factor
(1 + p₁ (R − 1)) / (1 + p₀ (R − 1)) (Bross 1966, J Chronic Dis 19:637; Schlesselman 1978, Am J Epidemiol 108:3). It is
exact for ratios of risks, prevalences, rates and means, and close for odds and hazard ratios of a rare outcome. If it
adds a fixed amount δ to the outcome, a difference is biased by δ (p₁ − p₀).
"""

from __future__ import annotations

from typing import overload

from adjustplan.data import Floats


@overload
def bias_factor(among_exposed: float, among_reference: float, ratio: float) -> float: ...
@overload
def bias_factor(among_exposed: Floats, among_reference: Floats, ratio: Floats) -> Floats: ...
def bias_factor(
    among_exposed: float | Floats, among_reference: float | Floats, ratio: float | Floats
) -> float | Floats:
    """By what the risk ratio is multiplied; above 1 where it is made too large. Arrays go element by element."""
    return (1 + among_exposed * (ratio - 1)) / (1 + among_reference * (ratio - 1))


def tipping_prevalence(factor: float, among_reference: float, ratio: float) -> float | None:
    """The share among the exposed with which the bias is just ``factor``; None where no share does it.

    Parameters
    ----------
    factor : float
        The bias that is needed: the estimated ratio by the true one, so below 1 for a protective estimate.
    among_reference : float
        The share in the reference group.
    ratio : float
        What the confounder does to the outcome.
    """
    if ratio == 1:
        return None
    share = (factor * (1 + among_reference * (ratio - 1)) - 1) / (ratio - 1)
    return share if 0 <= share <= 1 else None


def tipping_prevalence_of_difference(bias: float, among_reference: float, difference: float) -> float | None:
    """The share among the exposed with which a difference is biased by just ``bias``; None where no share does it.

    Parameters
    ----------
    bias : float
        The estimated less the true difference.
    among_reference : float
        The share in the reference group.
    difference : float
        What the confounder adds to the outcome.
    """
    if difference == 0:
        return None
    share = among_reference + bias / difference
    return share if 0 <= share <= 1 else None
