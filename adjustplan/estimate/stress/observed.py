"""What stress testing needs to know of a fit."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from adjustplan.estimate.stress.tables import TwoByTwo
from adjustplan.study import SCALES, Measure


@dataclass(frozen=True, slots=True)
class Yardstick:
    """A member of the planned set, by what it does in the model.

    Attributes
    ----------
    without : float or None
        The estimate on the same rows with all members but this one.
    with_exposure, with_outcome : float or None
        Linear models: its partial R² with the exposure (beyond the other members) and with the outcome (beyond the
        other members and the exposure).
    """

    without: float | None = None
    with_exposure: float | None = None
    with_outcome: float | None = None


@dataclass(frozen=True, slots=True)
class Observed:
    """The planned estimate, and what is known around it.

    Attributes
    ----------
    measure : str
    estimate, lower, upper : float
        Of the planned set, with 95 % limits.
    standard_error : float
        For a ratio, of its natural logarithm.
    crude : float or None
        The crude estimate on the same rows.
    outcome_sd : float or None
        The standard deviation of the outcome, for a mean difference.
    risks : tuple of (float, float) or None
        For a difference of risks, prevalences or rates: the two in the exposed and in the reference group, adjusted,
        whose difference is the estimate.
    sizes : tuple of (float, float) or None
        People, or for rates person-time, in the exposed and in the reference group.
    table : TwoByTwo or None
        The crude two-by-two table of a binary exposure and outcome.
    degrees_of_freedom : float or None
        Of the residuals of a linear regression with the variance of the model; None for any other estimate, and then
        nothing is said in shares of variance.
    yardsticks : mapping of str to Yardstick
        The members of the planned set.
    """

    measure: Measure
    estimate: float
    lower: float
    upper: float
    standard_error: float
    crude: float | None = None
    outcome_sd: float | None = None
    risks: tuple[float, float] | None = None
    sizes: tuple[float, float] | None = None
    table: TwoByTwo | None = None
    degrees_of_freedom: float | None = None
    yardsticks: Mapping[str, Yardstick] = field(default_factory=dict, hash=False)

    @property
    def is_ratio(self) -> bool:
        """Whether no effect is 1 and not 0."""
        return SCALES[self.measure] != "difference"

    @property
    def no_effect(self) -> float:
        """The value that says no effect."""
        return 1.0 if self.is_ratio else 0.0
