"""What a fit gives back: one crude estimate, and one adjusted estimate for each set.

A crude and an adjusted estimate may only be compared when they come from the same people. Every adjusted
estimate therefore carries the crude one of its own rows. What could not be estimated is None, never a number
that looks like one, and the findings beside it say why.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any, Literal, Protocol

from adjustplan.errors import Finding
from adjustplan.plan.analysis_schema import Model, Way

Origin = Literal["planned", "alternative", "minimal"]


NORMAL_QUANTILE = 1.959963984540054
"""The factor of a 95 % interval by the normal distribution."""


class Section(Protocol):
    """A part of a fit beside its main table: it prints itself, and has a JSON form."""

    @property
    def findings(self) -> tuple[Finding, ...]:
        """What to know about it."""

    def lines(self) -> list[str]:
        """As text: a heading, and lines below it."""

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""


@dataclass(frozen=True, slots=True)
class Estimate:
    """A measure of effect with its 95 % confidence interval.

    Attributes
    ----------
    estimate, lower, upper : float
        On the scale of the measure: the unit of the outcome for a mean difference, a pure number for a ratio.
    standard_error : float
        For a mean difference in the unit of the outcome; for a ratio, of the natural logarithm of the ratio,
        as is usual, because the interval is symmetric there.
    """

    estimate: float
    lower: float
    upper: float
    standard_error: float


def with_interval(value: float, error: float, *, ratio: bool, quantile: float = NORMAL_QUANTILE) -> Estimate:
    """An estimate with its 95 % interval, from its value and standard error on the scale on which that is symmetric.

    Parameters
    ----------
    value, error : float
        For a ratio, of its natural logarithm.
    ratio : bool
        Whether the estimate and its limits are the exponentials; what is too large for the arithmetic is infinite.
    quantile : float
    """
    numbers = (value, value - quantile * error, value + quantile * error)
    estimate, lower, upper = map(_exponential, numbers) if ratio else numbers
    return Estimate(estimate, lower, upper, error)


def _exponential(number: float) -> float:
    try:
        return math.exp(number)
    except OverflowError:
        return math.inf


@dataclass(frozen=True, slots=True)
class AdjustedEstimate:
    """The effect estimated with one set of covariates in the model.

    Attributes
    ----------
    members : tuple of str
        The set, sorted.
    origins : tuple of {"planned", "alternative", "minimal"}
        Why it is reported: it is the planned set, an alternative, a minimal sufficient set of the graph.
    sufficient : bool
        Whether the graph calls it sufficient.
    rationale : str
        The plan's reason for it.
    estimate, lower, upper, standard_error : float or None
        As in :class:`Estimate`; None where the model cannot be estimated.
    rows : int
        Rows complete for outcome, exposure and the set.
    crude : Estimate or None
        The crude estimate on these same rows.
    findings : tuple of Finding
        Why there is no estimate, or what to know about it.
    """

    members: tuple[str, ...]
    origins: tuple[Origin, ...]
    sufficient: bool
    rationale: str = ""
    estimate: float | None = None
    lower: float | None = None
    upper: float | None = None
    standard_error: float | None = None
    rows: int = 0
    crude: Estimate | None = None
    findings: tuple[Finding, ...] = ()


@dataclass(frozen=True, slots=True)
class WayEstimate:
    """The planned set's effect, adjusted in one way.

    Attributes
    ----------
    way, model : str
        The way to adjust, and the outcome regression it uses (weighting and stratification use none).
    conditional : bool
        Whether people alike in the covariates are compared, rather than two states of the whole population.
    means : tuple of (float, float) or None
        Marginal ways: the mean outcome, risk or rate had everybody been exposed, and had nobody been.
    estimate : Estimate or None
    rows : int
    findings : tuple of Finding
    """

    way: Way
    model: Model | None
    conditional: bool
    means: tuple[float, float] | None
    estimate: Estimate | None
    rows: int
    findings: tuple[Finding, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values, with the numbers of the estimate beside the way."""
        plain = asdict(self)
        numbers = plain.pop("estimate") or dict.fromkeys(("estimate", "lower", "upper", "standard_error"))
        means = None if self.means is None else {"exposed": self.means[0], "reference": self.means[1]}
        return plain | numbers | {"means": means, "findings": [finding.to_dict() for finding in self.findings]}


def interval_text(result: Estimate | AdjustedEstimate | None) -> str:
    """``1.62 (1.30 to 2.02)``, or that there is no estimate."""
    if result is None or result.estimate is None:
        return "not estimated"
    return f"{result.estimate:.3g} ({result.lower:.3g} to {result.upper:.3g})"


def chi_square_text(statistic: float, degrees: int) -> str:
    """``χ² = 5.2, 3 degrees of freedom``."""
    return f"χ² = {statistic:.3g}, {degrees} degree{'' if degrees == 1 else 's'} of freedom"


def p_text(p: float) -> str:
    """``p = 0.04``, or that it is below 0.001."""
    return "p < 0.001" if p < 0.001 else f"p = {p:.2g}"


def aligned(rows: Sequence[Sequence[str]]) -> list[str]:
    """Rows of text with their columns under each other, indented."""
    widths = [max(len(cell) for cell in column) for column in zip(*rows, strict=True)] if rows else []
    return [
        "  " + "  ".join(f"{cell:<{width}}" for cell, width in zip(row, widths, strict=True)).rstrip() for row in rows
    ]
