"""Differences of risks, prevalences and rates, and how far confounding of a given strength can move them.

Let p₁ be the risk among the exposed, p₀ that in the reference group, and f the share of exposed. Confounding with the
bounding factor B may have made p₀ too small by up to B to stand for the exposed without exposure, and p₁ too large by
up to B to stand for the reference group with it. The true difference is then at least f (p₁ − B p₀) + (1 − f) (p₁/B −
p₀) (Ding and VanderWeele 2016, Epidemiology 27:368). It meets zero where B = p₁/p₀, whatever f is.

The lower limit is this bound less 1.96 standard errors. B counts as a known number, and the error of the difference is
split between the two groups as p (1 − p) / n, for rates as r / time; for zero that gives Fieller's limit of the ratio
p₁/p₀. Where f is not known, the bound is that of the reference group (f = 0), which moves more readily. A negative
difference is looked at with the groups exchanged.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy.optimize import brentq

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.stress.scales import LARGEST, Moved, Needed
from adjustplan.study import Measure


@dataclass(frozen=True, slots=True)
class DifferencePosition:
    """A difference of two risks, prevalences or rates.

    Attributes
    ----------
    exposed, reference : float
        The two, of which the difference is the estimate.
    lower, upper : float
        Its limits.
    share : float or None
        The share of exposed.
    variance_share : float
        How much of the variance of the difference comes from the exposed.
    words : str
    """

    exposed: float
    reference: float
    lower: float
    upper: float
    share: float | None
    variance_share: float
    words: str

    @property
    def estimate(self) -> float:
        """The difference."""
        return self.exposed - self.reference

    def needed(self, value: float) -> Needed:
        """What moves the difference, and its limit, to ``value``."""
        down = self.estimate >= value
        first, second, share, reach, _ = self._facing(down)
        target = value if down else -value
        linear = target + (1 - share) * second - share * first
        square, constant = share * second, -(1 - share) * first
        root = math.sqrt(linear * linear - 4 * square * constant)
        if linear > 0:
            factor = -2 * constant / (linear + root)
        else:
            factor = (root - linear) / (2 * square) if square > 0 else math.inf
        side = "lower" if down else "upper"
        if first - second - reach <= target:
            return Needed(_or_none(factor), 1.0, side)

        def above(logarithm: float) -> float:
            tried = math.exp(logarithm)
            return self._bound(tried, down) - self._reach(tried, down, reach) - target

        end = math.log(min(factor, LARGEST))
        limit = math.exp(brentq(above, 0.0, end, xtol=1e-14, rtol=1e-14)) if above(end) <= 0 else factor
        return Needed(_or_none(factor), _or_none(limit), side)

    def moved(self, factor: float, down: bool) -> Moved:
        """The bound of Ding and VanderWeele, with its limits."""
        *_, near, far = self._facing(down)
        value = self._bound(factor, down)
        ends = [value - self._reach(factor, down, near), value + self._reach(factor, down, far)]
        return Moved(value, *ends) if down else Moved(-value, -ends[1], -ends[0])

    def _facing(self, down: bool) -> tuple[float, float, float, float, float]:
        """Both values, the share of the first, and how far the limits reach, seen so that the bound goes down."""
        below, above = self.estimate - self.lower, self.upper - self.estimate
        if down:
            return self.exposed, self.reference, 0.0 if self.share is None else self.share, below, above
        return self.reference, self.exposed, 0.0 if self.share is None else 1 - self.share, above, below

    def _bound(self, factor: float, down: bool) -> float:
        first, second, share, *_ = self._facing(down)
        return share * (first - factor * second) + (1 - share) * (first / factor - second)

    def _reach(self, factor: float, down: bool, reach: float) -> float:
        share = self._facing(down)[2]
        of_first = self.variance_share if down else 1 - self.variance_share
        slope_first, slope_second = share + (1 - share) / factor, share * factor + 1 - share
        return reach * math.sqrt(of_first * slope_first**2 + (1 - of_first) * slope_second**2)


def difference_position(
    measure: Measure,
    exposed: float,
    reference: float,
    lower: float,
    upper: float,
    *,
    sizes: tuple[float, float] | None = None,
) -> DifferencePosition:
    """Where a difference of two risks, prevalences or rates stands.

    Parameters
    ----------
    measure : str
    exposed, reference : float
        The adjusted risks, prevalences or rates whose difference is the estimate.
    lower, upper : float
        The 95 % limits of the difference.
    sizes : tuple of (float, float), optional
        People, or person-time, among the exposed and in the reference group. They give the share of exposed, and how
        the variance is split: as p (1 − p) / n for risks, as r / time for rates.

    Raises
    ------
    NotEstimableError
        If a risk does not lie between 0 and 1, or a rate not above 0.
    """
    rates = measure == "rate difference"
    if not all(0 < each < (math.inf if rates else 1) for each in (exposed, reference)):
        what = "Both rates must be above 0" if rates else "Both risks must lie between 0 and 1"
        message = f"{what} for a difference to be put as a ratio; they are {exposed:.3g} and {reference:.3g}."
        raise NotEstimableError("stress-no-conversion", message, "Plan a ratio measure beside the difference.")
    first, second = sizes or (1.0, 1.0)
    spread = [each if rates else each * (1 - each) for each in (exposed, reference)]
    of_exposed = spread[0] / first / (spread[0] / first + spread[1] / second)
    noun = {"rate difference": "rates", "prevalence difference": "prevalences"}.get(measure, "risks")
    words = f"the ratio of the two {noun}, {exposed:.3g} / {reference:.3g}"
    return DifferencePosition(exposed, reference, lower, upper, sizes and first / (first + second), of_exposed, words)


def _or_none(factor: float) -> float | None:
    return factor if math.isfinite(factor) else None
