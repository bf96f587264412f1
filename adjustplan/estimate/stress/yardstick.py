"""A covariate of the study as a yardstick for what is not measured.

Nobody can say what a risk ratio of 2.3 for an unmeasured confounder looks like, but everybody who knows the field can
say whether something as important as age has been forgotten. So: what would an unmeasured confounder as strong as a
covariate that *is* in the model do?

*Linear models.* Benchmark bounds of Cinelli and Hazlett (2020, J R Stat Soc B 82:39, section 4.4). A confounder that is
k times as strong as covariate j, with exposure and outcome alike, and unrelated to it beyond the others, explains

    R²(D~Z|X) = k r/(1 − r)   of the exposure,   R²(Y~Z|D,X) ≤ (√k + ρ)²/(1 − ρ²) · s/(1 − s)   of the outcome,

where r and s are the shares that j itself explains of the exposure and of the outcome, beyond the rest, and
ρ² = k r² / ((1 − k r)(1 − r)).

*Ratios and other models.* The covariate is left out, the estimate moves, and the move is made once more in the same
direction: with it the ratio is W, without it V, and a confounder that does again what the covariate did would leave
W · W/V. For a difference it would leave W − (V − W). This is our plain reading of a common practice; we know no source
that proves a bound of this kind. It assumes that the unmeasured confounder biases the estimate beyond the whole set as
the covariate does beyond the others, and in the same direction. An odds or hazard ratio also changes when a covariate
that does not confound is left out (it is not collapsible), and that change is part of the move.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from adjustplan.estimate.stress.robustness import LinearMove, moved_by
from adjustplan.estimate.stress.scales import Moved


@dataclass(frozen=True, slots=True)
class LeftOut:
    """What leaving a covariate out did, and what doing it once more would leave.

    Attributes
    ----------
    without : float
        The estimate without the covariate, on the same rows.
    change : float
        The ratio of the estimates without and with it; for a difference, their difference.
    moved : Moved
        The estimate and limits after the same change once more.
    """

    without: float
    change: float
    moved: Moved


@dataclass(frozen=True, slots=True)
class Shares:
    """The shares that a confounder would explain; ``capped`` where the bound is above 1 and so says nothing."""

    of_exposure: float
    of_outcome: float
    capped: bool


def as_strong_as(covariate_of_exposure: float, covariate_of_outcome: float, times: float = 1) -> Shares | None:
    """The shares that a confounder some times as strong as a covariate would explain.

    Parameters
    ----------
    covariate_of_exposure, covariate_of_outcome : float
        The partial R² of the covariate with the exposure (beyond the other covariates) and with the outcome (beyond
        the other covariates and the exposure); from 0 to below 1.
    times : float
        How many times as strong.

    Returns
    -------
    Shares or None
        None where nothing can be so strong: it would explain more of the exposure than there is.
    """
    r, s = covariate_of_exposure, covariate_of_outcome
    if not (0 <= r < 1 and 0 <= s < 1 and times >= 0):
        raise ValueError("a partial R² is from 0 to below 1, and a strength not negative")
    of_exposure = times * r / (1 - r)
    if times * r >= 1 or of_exposure >= 1:
        return None
    square = times * r * r / ((1 - times * r) * (1 - r))
    if square >= 1:
        return None
    of_outcome = (math.sqrt(times) + math.sqrt(square)) ** 2 / (1 - square) * s / (1 - s)
    return Shares(of_exposure, min(of_outcome, 1.0), of_outcome > 1)


def moved_like(
    estimate: float,
    standard_error: float,
    degrees_of_freedom: float,
    covariate_of_exposure: float,
    covariate_of_outcome: float,
    *,
    times: float = 1,
    target: float = 0,
) -> LinearMove | None:
    """The estimate of a linear model with a confounder as strong as a covariate in it; None where none can be."""
    shares = as_strong_as(covariate_of_exposure, covariate_of_outcome, times)
    if shares is None:
        return None
    return moved_by(
        estimate,
        standard_error,
        degrees_of_freedom,
        shares.of_exposure,
        shares.of_outcome,
        target=target,
    )


def left_out(estimate: float, lower: float, upper: float, without: float, *, ratio: bool) -> LeftOut:
    """What leaving the covariate out did, done once more.

    Parameters
    ----------
    estimate, lower, upper : float
        With the covariate.
    without : float
        Without it.
    ratio : bool
        Whether the measure is a ratio.
    """
    if ratio:
        change = without / estimate
        return LeftOut(without, change, Moved(estimate / change, lower / change, upper / change))
    change = without - estimate
    return LeftOut(without, change, Moved(estimate - change, lower - change, upper - change))
