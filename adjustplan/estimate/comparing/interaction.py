"""Effect modification: does the effect of the exposure depend on another variable, and on which scale?

*Stratum by stratum.* A model with products of exposure and modifier gives one effect of the exposure at every level
of the modifier. The effect at one level against that at the reference level is a ratio of ratios, or a difference
of differences: interaction on the scale of the model.

*On the additive scale*, which is the one that says where most cases can be prevented, the joint effects of two
factors are compared: R10 of the exposure alone, R01 of the other factor alone, R11 of both, each against neither.
Without interaction the excesses would add up, and from ratios alone it can be said by how much they do not
(Rothman 1986, Modern Epidemiology, 1st edition):

* relative excess risk due to interaction: RERI = R11 - R10 - R01 + 1, which is 0 without interaction;
* attributable proportion: AP = RERI / R11;
* synergy index: S = (R11 - 1) / (R10 + R01 - 2), which is 1 without interaction.

Intervals come from the covariance of the three log ratios by the delta method, on the log scale for S (Hosmer and
Lemeshow 1992, Epidemiology 3:452). Odds ratios stand in for risk ratios only where the outcome is rare. If a factor
protects, the three measures mislead: take its other level as the reference (Knol and others 2011, Eur J Epidemiol
26:433).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.diagnostics.wald import WaldTest, wald_test
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.results import NORMAL_QUANTILE, Estimate, with_interval


@dataclass(frozen=True, slots=True)
class Modification:
    """The effect of the exposure at each level of a modifier.

    Attributes
    ----------
    effects : tuple of Estimate
        One for each level.
    against_reference : tuple of Estimate or None
        Each level's effect over (for a difference, minus) that at the reference level; None for that level itself.
    test : WaldTest
        Of no modification at all.
    """

    effects: tuple[Estimate, ...]
    against_reference: tuple[Estimate | None, ...]
    test: WaldTest


def modification(
    coefficients: Floats,
    covariance: Floats,
    contrasts: Floats,
    *,
    reference: int = 0,
    ratio: bool = True,
    quantile: float = NORMAL_QUANTILE,
) -> Modification:
    """Effects by level of a modifier, and how they differ.

    Parameters
    ----------
    coefficients : array of float, shape (parameters,)
        Of a model with the exposure, the modifier and their products.
    covariance : array of float, shape (parameters, parameters)
    contrasts : array of float, shape (levels, parameters)
        Linear predictor of an exposed minus that of a reference person, both at this level of the modifier.
    reference : int
        The level to compare with.
    ratio : bool
        Whether the effects are exponentials of contrasts.
    quantile : float
        Factor of the interval; that of t where the model is linear.

    Raises
    ------
    NotEstimableError
        If a number is not finite, a variance is not positive, or the levels cannot be told apart.
    ValueError
        With fewer than two levels.
    """
    if len(contrasts) < 2:
        raise ValueError("modification needs two levels or more")
    others = [level for level in range(len(contrasts)) if level != reference]
    apart = contrasts - contrasts[reference]
    effects = tuple(_linear(row, coefficients, covariance, ratio, quantile) for row in contrasts)
    against = tuple(
        _linear(apart[level], coefficients, covariance, ratio, quantile) if level != reference else None
        for level in range(len(contrasts))
    )
    test = wald_test(apart[others] @ coefficients, apart[others] @ covariance @ apart[others].T)
    return Modification(effects, against, test)


@dataclass(frozen=True, eq=False)
class JointEffects:
    """The logarithms of R10, R01 and R11, with their covariance.

    Attributes
    ----------
    values : array of float, shape (3,)
        Exposure alone, other factor alone, both; each against neither.
    covariance : array of float, shape (3, 3)
    """

    values: Floats
    covariance: Floats

    def __post_init__(self) -> None:
        if self.values.shape != (3,) or self.covariance.shape != (3, 3):
            raise ValueError("joint effects are three log ratios and their 3 by 3 covariance")


def joint_effects(coefficients: Floats, covariance: Floats, contrasts: Floats) -> JointEffects:
    """Joint effects from a model with a product.

    Parameters
    ----------
    coefficients : array of float, shape (parameters,)
    covariance : array of float, shape (parameters, parameters)
    contrasts : array of float, shape (3, parameters)
        Linear predictors with exposure alone, with the other factor alone, with both, minus that with neither.
    """
    return JointEffects(contrasts @ coefficients, contrasts @ covariance @ contrasts.T)


def ratio_of_ratios(joint: JointEffects) -> Estimate:
    """R11 / (R10 R01): interaction on the multiplicative scale; the standard error is that of its logarithm."""
    return _linear(np.array([-1.0, -1.0, 1.0]), joint.values, joint.covariance, True, NORMAL_QUANTILE)


def relative_excess_risk(joint: JointEffects) -> Estimate:
    """R11 - R10 - R01 + 1, with its standard error.

    Raises
    ------
    NotEstimableError
        If a number is not finite or the variance not positive.
    """
    r10, r01, r11 = _ratios(joint)
    return _delta(r11 - r10 - r01 + 1, np.array([-r10, -r01, r11]), joint)


def attributable_proportion(joint: JointEffects) -> Estimate:
    """The share of R11 that is due to interaction, RERI / R11; see :func:`relative_excess_risk`."""
    r10, r01, r11 = _ratios(joint)
    gradient = np.array([-r10, -r01, r10 + r01 - 1]) / r11
    return _delta((r11 - r10 - r01 + 1) / r11, gradient, joint)


def synergy_index(joint: JointEffects) -> Estimate:
    """(R11 - 1) / (R10 + R01 - 2); the standard error is that of its logarithm.

    Raises
    ------
    NotEstimableError
        If an excess, above or below the line, is not positive: the index then has no meaning.
    """
    r10, r01, r11 = _ratios(joint)
    both, sum_of_each = r11 - 1, r10 + r01 - 2
    if not (both > 0 and sum_of_each > 0):
        message = f"The synergy index needs excesses above 0; they are {both:.3g} together and {sum_of_each:.3g} added."
        remedy = "Compare with the level at which the outcome is rarest, or report the relative excess risk alone."
        raise NotEstimableError("estimate-synergy", message, remedy, "note")
    gradient = np.array([-r10 / sum_of_each, -r01 / sum_of_each, r11 / both])
    return _linear(gradient, joint.values, joint.covariance, True, NORMAL_QUANTILE, math.log(both / sum_of_each))


def _ratios(joint: JointEffects) -> tuple[float, float, float]:
    with np.errstate(over="ignore"):
        r10, r01, r11 = map(float, np.exp(joint.values))
    return r10, r01, r11


def _delta(value: float, gradient: Floats, joint: JointEffects) -> Estimate:
    return _linear(gradient, joint.values, joint.covariance, False, NORMAL_QUANTILE, value)


def _linear(
    gradient: Floats, values: Floats, covariance: Floats, ratio: bool, quantile: float, value: float | None = None
) -> Estimate:
    """An estimate from its gradient; its value is gradient · values where the function is linear."""
    with np.errstate(over="ignore", invalid="ignore"):
        centre = float(gradient @ values) if value is None else value
        variance = float(gradient @ covariance @ gradient)
        error = math.sqrt(variance) if variance > 0 else math.nan
        found = with_interval(centre, error, ratio=ratio, quantile=quantile)
    if not all(map(math.isfinite, (found.estimate, found.lower, found.upper))) or (ratio and found.lower == 0):
        message = "A measure of interaction or its interval is too large for the arithmetic, or has no variance."
        raise NotEstimableError("estimate-interaction", message, "Look for rare levels of the exposure or modifier.")
    return found
