"""Where an estimate stands, and how far an unmeasured confounder of a given strength can move it.

The theory of the E-value and of the bounding factor is about risk ratios: a confounder whose bounding factor is B can
turn a true risk ratio into one at most B times as large, or as small (Ding and VanderWeele 2016, Epidemiology 27:368).
So every other measure needs a bridge to the risk ratio. For ratios and mean differences it is a function from the
measure to (about) a risk ratio; the estimate and both limits go through it, are divided by B there, and come back. The
functions are those of VanderWeele and Ding (2017, Ann Intern Med 167:268, table 2):

* risk, prevalence, rate and mean ratio: taken as it is; for rates and means the confounder's effect on the outcome is
  then a ratio of rates or of means;
* odds ratio: taken as it is where the outcome is rare, its square root where it is common;
* hazard ratio: taken as it is where rare, else (1 − 0.5^√HR) / (1 − 0.5^√(1/HR));
* mean difference: exp(0.91 d), where d is the difference in standard deviations of the outcome. Its limits are
  exp(0.91 d ± 1.78 s) with s the standard error of d, which is the same function of the limits: 1.78 = 0.91 × 1.96.

Differences of risks, prevalences and rates have a file of their own, ``differences``.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

from scipy.optimize import brentq

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.study import Measure

RARE = 0.15  # VanderWeele and Ding 2017
_DIRECT: frozenset[Measure] = frozenset({"risk ratio", "prevalence ratio", "rate ratio", "mean ratio"})
LARGEST = 1e100


@dataclass(frozen=True, slots=True)
class Moved:
    """An estimate with its limits after something moved it."""

    estimate: float
    lower: float
    upper: float


@dataclass(frozen=True, slots=True)
class Needed:
    """The bounding factors that move an estimate, and its limit on that side, to a value; 1 where none is needed.

    Attributes
    ----------
    estimate, limit : float or None
        At least 1; None where no confounder could do it.
    side : {"lower", "upper"}
        The limit that meets the value first.
    """

    estimate: float | None
    limit: float | None
    side: str


class Position(Protocol):
    """Where an estimate stands, on a measure that has a bridge to the risk ratio."""

    @property
    def estimate(self) -> float: ...
    @property
    def lower(self) -> float: ...
    @property
    def upper(self) -> float: ...
    @property
    def words(self) -> str:
        """Which bridge it is."""

    def needed(self, value: float) -> Needed:
        """What moves the estimate, and its limit, to ``value``."""

    def moved(self, factor: float, down: bool) -> Moved:
        """The estimate that would be left if a confounder with this bounding factor had raised (lowered) it most."""


@dataclass(frozen=True, slots=True)
class RatioPosition:
    """An estimate with a function to the risk ratio.

    Attributes
    ----------
    estimate, lower, upper : float
        On the scale of the measure.
    to_ratio, from_ratio : callable
        The function, which rises, and its inverse.
    words : str
        Which function it is.
    """

    estimate: float
    lower: float
    upper: float
    to_ratio: Callable[[float], float]
    from_ratio: Callable[[float], float]
    words: str

    def needed(self, value: float) -> Needed:
        """What moves the estimate, and its limit, to ``value``."""
        there, here = self.to_ratio(value), self.to_ratio(self.estimate)
        if here >= there:
            return Needed(here / there, max(1.0, self.to_ratio(self.lower) / there), "lower")
        return Needed(there / here, max(1.0, there / self.to_ratio(self.upper)), "upper")

    def moved(self, factor: float, down: bool) -> Moved:
        """The estimate and limits, divided (or multiplied) by ``factor`` as risk ratios."""
        scale = 1 / factor if down else factor
        new = [self.from_ratio(scale * self.to_ratio(each)) for each in (self.estimate, self.lower, self.upper)]
        return Moved(*new)


def ratio_position(
    measure: Measure,
    estimate: float,
    lower: float,
    upper: float,
    *,
    common: bool = True,
    outcome_sd: float | None = None,
) -> RatioPosition:
    """Where a ratio or a mean difference stands.

    Parameters
    ----------
    measure : str
        A ratio measure or the mean difference.
    estimate, lower, upper : float
        The estimate and its 95 % limits.
    common : bool
        Odds and hazard ratio: whether the outcome is common (15 % or more).
    outcome_sd : float, optional
        Mean difference: the standard deviation of the outcome, in its unit.

    Raises
    ------
    NotEstimableError
        If a ratio is not positive and finite, or the mean difference lacks a standard deviation.
    """
    numbers = (estimate, lower, upper)
    if measure == "mean difference":
        if outcome_sd is None or not 0 < outcome_sd < math.inf:
            message = "A mean difference needs the standard deviation of the outcome to be put as a risk ratio."
            raise NotEstimableError("stress-no-conversion", message, "Look whether the outcome varies in the data.")
        slope = 0.91 / outcome_sd
        if not all(abs(slope * each) < 200 for each in numbers):
            raise _beyond_reach(measure)
        words = f"risk ratio ≈ exp(0.91 × difference / {outcome_sd:.4g}), the standard deviation of the outcome"
        return RatioPosition(
            *numbers, lambda given: math.exp(slope * given), lambda ratio: math.log(ratio) / slope, words
        )
    if not all(1 / LARGEST < each < LARGEST for each in numbers):
        raise _beyond_reach(measure)
    if measure in _DIRECT:
        meant = {"rate ratio": " of rates", "mean ratio": " of means"}.get(measure, "")
        also = f"; “with the outcome” is then a ratio{meant}" if meant else ""
        return RatioPosition(*numbers, _same, _same, f"the {measure} is taken as it is{also}")
    if not common:
        return RatioPosition(*numbers, _same, _same, f"the {measure} is taken as a risk ratio, the outcome being rare")
    if measure == "odds ratio":
        return RatioPosition(*numbers, math.sqrt, _squared, "risk ratio ≈ √(odds ratio), the outcome being common")
    words = "risk ratio ≈ (1 − 0.5^√HR) / (1 − 0.5^√(1/HR)), the outcome being common"
    return RatioPosition(*numbers, _from_hazard, _to_hazard, words)


def _beyond_reach(measure: Measure) -> NotEstimableError:
    message = f"The {measure} or a limit of it is 0 or too large to be put as a risk ratio."
    return NotEstimableError("stress-no-conversion", message, "Look for rare levels in the data.")


def _same(given: float) -> float:
    return given


def _squared(ratio: float) -> float:
    return ratio * ratio


def _from_hazard(hazard: float) -> float:
    root = math.sqrt(hazard)
    return math.expm1(-math.log(2) * root) / math.expm1(-math.log(2) / root)


def _to_hazard(ratio: float) -> float:
    """The inverse of :func:`_from_hazard`, found on the logarithmic scale."""

    def off(logarithm: float) -> float:
        return math.log(_from_hazard(math.exp(logarithm))) - math.log(ratio)

    return math.exp(brentq(off, -600.0, 600.0, xtol=1e-14, rtol=1e-14)) if ratio != 1 else 1.0
