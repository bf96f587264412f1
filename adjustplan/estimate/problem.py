"""What a way to adjust is given: the settings of the planned analysis, and one set's patterns and model matrix.

All ways to adjust answer the same question from the same :class:`Problem`, and give back the same :class:`Solution`:
the effect on the scale on which its error is symmetric (a difference as it is, a ratio as its logarithm), and the
influence of each person on it, from which its standard error follows.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, ClassVar, Literal, Protocol, TypeVar

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats, Moments
from adjustplan.errors import Finding
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.kernel import Family, Influence, Regression, regress
from adjustplan.estimate.matrix import ModelMatrix
from adjustplan.plan.analysis_schema import Model, Way, Weighting
from adjustplan.study import KINDS, SCALES, Measure, MeasureKind, Scale

if TYPE_CHECKING:
    from adjustplan.estimate.ways.propensity import Propensity

Variance = Literal["model", "robust", "cluster"]
T = TypeVar("T")
Picking = Callable[["Problem"], tuple[Floats, Floats, Floats]]
"""From a block of rows to the columns, the weights and the mean outcomes of a regression."""


@dataclass(frozen=True)
class Setting:
    """The planned analysis, with every choice made.

    Attributes
    ----------
    exposure : str
    measure : str
    model : str
        The outcome regression.
    way : str
    variance : {"model", "robust", "cluster"}
    coding : ExposureCoding
    forms : mapping of str to str
        The form of each covariate that any set uses.
    modifier : str or None
    weighting : Weighting
    ties : str
        Of a Cox model.
    """

    exposure: str
    measure: Measure
    model: Model
    way: Way
    variance: Variance
    coding: ExposureCoding
    forms: Mapping[str, str]
    modifier: str | None = None
    weighting: Weighting = field(default_factory=lambda: Weighting.model_validate({}))
    ties: Literal["efron", "breslow"] = "efron"

    @property
    def scale(self) -> Scale:
        """How two means become the measure."""
        return SCALES[self.measure]

    @property
    def kind(self) -> MeasureKind:
        """What is compared."""
        return KINDS[self.measure]

    def by(self, way: Way, model: Model) -> Setting:
        """The same analysis, adjusted another way; only a regression has the variance of its model."""
        variance: Variance = "robust" if self.variance == "model" and way != "regression" else self.variance
        return replace(self, way=way, model=model, variance=variance)


@dataclass(frozen=True, eq=False)
class Projection:
    """What estimating the weights of complete rows takes off a variance (Robins, Rotnitzky and Zhao 1994).

    Attributes
    ----------
    scores : array of float, shape (patterns, parameters)
        A person's score in the model of being complete.
    inverse : array of float, shape (parameters, parameters)
        Inverse of that model's information, over complete and incomplete rows.
    """

    scores: Floats
    inverse: Floats


@dataclass(frozen=True, eq=False)
class Problem:
    """One set's patterns, ready for any way to adjust.

    Attributes
    ----------
    matrix : ModelMatrix
    moments : Moments
    cluster : array of int or None, shape (patterns,)
        Numbered from 0.
    is_exposed, is_reference : array of bool, shape (patterns,)
        Who has the two levels that are compared; nobody, where the exposure is no category.
    setting : Setting
    projection : Projection or None
        Where rows are weighted for being complete.
    """

    matrix: ModelMatrix
    moments: Moments
    cluster: NDArray[np.intp] | None
    is_exposed: NDArray[np.bool_]
    is_reference: NDArray[np.bool_]
    setting: Setting
    projection: Projection | None = None

    @property
    def weight(self) -> Floats:
        """Weight of each pattern in an outcome regression: people, weights and time at risk together."""
        time = self.moments.time
        return np.where(self.moments.weight > 0, self.moments.weight * time, 0.0)

    @property
    def mean(self) -> Floats:
        """Mean outcome of each pattern, for rates per unit of time."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray(self.moments.mean / self.moments.time)

    in_memory: ClassVar[bool] = True

    def total(self, summing: Callable[[Problem], T]) -> T:
        """The sums over all rows of what ``summing`` makes of a block of them; here one block holds them all."""
        return summing(self)

    def regress(self, model: Picking, family: Family, start: Floats | None = None) -> Regression:
        """Fit a regression; ``model`` gives its columns, weights and mean outcomes."""
        columns, weight, mean = model(self)
        return regress(columns, weight, mean, family, start)

    def with_moments(self, moments: Moments) -> Problem:
        """The same patterns with other people in them."""
        return replace(self, moments=moments)


class Rows(Protocol):
    """What a way to adjust asks of its data: a :class:`Problem` in memory, or one whose rows come in blocks."""

    @property
    def setting(self) -> Setting:
        """The planned analysis."""

    @property
    def matrix(self) -> ModelMatrix:
        """The model matrix; without lines where the rows come in blocks."""

    @property
    def in_memory(self) -> bool:
        """Whether the arrays of all rows are at hand."""

    def total(self, summing: Callable[[Problem], T]) -> T:
        """The sums over all rows of what ``summing`` makes of a block of them."""

    def regress(self, model: Picking, family: Family, start: Floats | None = None) -> Regression:
        """Fit a regression."""


@dataclass(frozen=True, eq=False)
class Solution:
    """What a way to adjust found.

    Attributes
    ----------
    value : float
        The effect: a difference, or the logarithm of a ratio.
    means : tuple of (float, float) or None
        The mean outcome had everybody been exposed, and had everybody been at the reference level (marginal ways).
    influence : Influence or None
        Of each person on ``value``; None where it was not asked for, or the rows come in blocks.
    rule : function of a Problem, or None
        The influence of the people of any block of rows.
    regression : Regression or None
        The outcome regression.
    propensity : Propensity or None
        The models of the exposure.
    balance : array of float or None, shape (patterns,)
        The weights, where there are any, of the people at the two levels.
    scores : array of float or None, shape (patterns,)
        The estimated probability of the exposed level.
    standard_error : float or None
        Of ``value``, where a way has a formula of its own for it.
    findings : tuple of Finding
        What the way has to say besides.
    """

    value: float
    means: tuple[float, float] | None = None
    influence: Influence | None = None
    rule: Callable[[Problem], Influence] | None = None
    regression: Regression | None = None
    propensity: Propensity | None = None
    balance: Floats | None = None
    scores: Floats | None = None
    standard_error: float | None = None
    findings: tuple[Finding, ...] = ()

    def showing(self, balance: Floats, scores: Floats) -> Solution:
        """The same with the weights and the probabilities of all rows."""
        return replace(self, balance=balance, scores=scores)

    def ruled(self, rule: Callable[[Problem], Influence], rows: Rows) -> Solution:
        """The same with each person's influence."""
        return replace(self, rule=rule, influence=rule(rows) if isinstance(rows, Problem) else None)
