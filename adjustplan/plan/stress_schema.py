"""The plan's ``[stress]``: what is assumed about biases that the data cannot show.

Nothing in the data says how strong an unmeasured confounder is, how often the exposure is written down wrongly, or who
stayed away. The team must assume it, and an assumption that stands in the plan before the data are seen cannot be
chosen to please. ::

    [stress]
    seed = 1

    [[stress.confounder]]                       # how strong at most
    name          = "chronotype"
    with_exposure = 2.0
    with_outcome  = 1.8

    [[stress.binary_confounder]]                # how common, and what it does
    name            = "evening type"
    among_exposed   = { low = 0.3, high = 0.6 }
    among_reference = 0.2
    outcome_ratio   = { low = 1.2, mode = 1.5, high = 2.0 }

A quantity that is not known exactly is a distribution, and its keys say which: ``{ low, high }`` is uniform,
``{ low, mode, high }`` triangular, ``{ low, from, to, high }`` a trapezium that is flat between from and to,
``{ mean, sd }`` normal (cut off where the quantity cannot be), ``{ alpha, beta }`` beta. A plain number is that number.
"""

from __future__ import annotations

import math
from typing import Annotated, Any, ClassVar, Literal

from pydantic import ConfigDict, Field, model_validator
from pydantic_core import PydanticCustomError

from adjustplan.plan.analysis_schema import Seed
from adjustplan.plan.table import Name, Share, Table

Ratio = Annotated[float, Field(ge=1, le=1000)]
Number = Annotated[float, Field(allow_inf_nan=False)]
Shape = Literal["fixed", "uniform", "triangular", "trapezoidal", "normal", "beta"]

_SHAPES: dict[frozenset[str], Shape] = {
    frozenset({"value"}): "fixed",
    frozenset({"low", "high"}): "uniform",
    frozenset({"low", "mode", "high"}): "triangular",
    frozenset({"low", "from", "to", "high"}): "trapezoidal",
    frozenset({"mean", "sd"}): "normal",
    frozenset({"alpha", "beta"}): "beta",
}
_CHOICES = "a number, { low, high }, { low, mode, high }, { low, from, to, high }, { mean, sd } or { alpha, beta }"


def _or_number(schema: dict[str, Any]) -> None:
    """Tell editors that a plain number may stand in place of the table."""
    table = dict(schema)
    schema.clear()
    schema.update({"anyOf": [{"type": "number"}, table]})


class Distribution(Table):
    """What is assumed of one quantity: a number, or a distribution that its keys name."""

    model_config = ConfigDict(json_schema_extra=_or_number)
    least: ClassVar[float] = -math.inf
    most: ClassVar[float] = math.inf

    value: Number | None = Field(None, description="Exactly this; a plain number means the same.")
    low: Number | None = Field(None, description="The least it can be.")
    from_: Number | None = Field(None, alias="from", description="Where the flat part of a trapezium begins.")
    mode: Number | None = Field(None, description="The most likely value of a triangle.")
    to: Number | None = Field(None, description="Where the flat part of a trapezium ends.")
    high: Number | None = Field(None, description="The most it can be.")
    mean: Number | None = Field(None, description="Normal: its mean, before it is cut off at what is possible.")
    sd: Number | None = Field(None, description="Normal: its standard deviation, before it is cut off.")
    alpha: Number | None = Field(None, description="Beta: its first parameter.")
    beta: Number | None = Field(None, description="Beta: its second parameter.")

    @model_validator(mode="before")
    @classmethod
    def _number_as_table(cls, given: Any) -> Any:
        return {"value": given} if isinstance(given, int | float) and not isinstance(given, bool) else given

    @model_validator(mode="after")
    def _is_one(self) -> Distribution:
        if reason := self._fault():
            raise PydanticCustomError("distribution", "{reason}", {"reason": reason})
        return self

    @property
    def parameters(self) -> dict[str, float]:
        """The keys that are given, as the file writes them, with their numbers."""
        named = {info.alias or name: getattr(self, name) for name, info in type(self).model_fields.items()}
        return {key: number for key, number in named.items() if number is not None}

    @property
    def shape(self) -> Shape:
        """Which distribution it is."""
        return _SHAPES[frozenset(self.parameters)]

    def __str__(self) -> str:
        numbers = self.parameters
        if "value" in numbers:
            return f"{numbers['value']:.6g}"
        return "{ " + ", ".join(f"{key} = {number:.6g}" for key, number in numbers.items()) + " }"

    def _fault(self) -> str | None:
        numbers = self.parameters
        if frozenset(numbers) not in _SHAPES:
            return f"Give {_CHOICES}"
        shape = self.shape
        if shape == "beta":
            if min(numbers.values()) <= 0:
                return "alpha and beta must be above 0"
            return (
                None if (self.least, self.most) == (0, 1) else "A beta distribution lies between 0 and 1; give another"
            )
        if shape == "normal" and numbers.pop("sd") <= 0:
            return "sd must be above 0; write a plain number for a known value"
        in_order = list(numbers.values())
        if in_order != sorted(in_order):
            return f"The numbers must rise in the order {', '.join(numbers)}"
        if len(in_order) > 1 and in_order[0] == in_order[-1]:
            return "low must be below high; write a plain number for a known value"
        if in_order[0] < self.least or in_order[-1] > self.most:
            return f"It must lie between {self.least:g} and {self.most:g}"
        return None


class Probability(Distribution):
    """A distribution of a quantity between 0 and 1."""

    least: ClassVar[float] = 0.0
    most: ClassVar[float] = 1.0


class Factor(Distribution):
    """A distribution of a ratio: above 0, and not beyond 1000."""

    least: ClassVar[float] = 0.001
    most: ClassVar[float] = 1000.0


class Confounder(Table):
    """A confounder that is not measured, with the strengths it has at most."""

    name: Name = Field(description="An unmeasured variable of the graph, or a name for it.")
    with_exposure: Ratio = Field(
        description="How many times as common its levels are, at most, in one exposure group as in the other."
    )
    with_outcome: Ratio = Field(
        description="How many times as frequent the outcome is, at most, in one of its levels as in another."
    )


class BinaryConfounder(Table):
    """A confounder with two levels that is not measured: how common it is, and what it does to the outcome."""

    name: Name = Field(description="An unmeasured variable of the graph, or a name for it.")
    among_exposed: Probability = Field(description="The share of the exposed who have it.")
    among_reference: Probability = Field(description="The share of the reference group who have it.")
    outcome_ratio: Factor | None = Field(
        None, description="Ratio measures, and differences of risks: how many times as frequent it makes the outcome."
    )
    outcome_difference: Distribution | None = Field(
        None, description="Difference measures: how much it adds to the outcome."
    )

    @model_validator(mode="after")
    def _has_one_effect(self) -> BinaryConfounder:
        if (self.outcome_ratio is None) == (self.outcome_difference is None):
            raise PydanticCustomError("effect", "Give either outcome_ratio or outcome_difference")
        return self


class LinearConfounder(Table):
    """A confounder that is not measured, by the share of what is left unexplained that it would explain."""

    name: Name = Field(description="An unmeasured variable of the graph, or a name for it.")
    share_of_exposure: Share = Field(description="Of the variance of the exposure that the set leaves.")
    share_of_outcome: Annotated[float, Field(gt=0, le=1)] = Field(
        description="Of the variance of the outcome that the set and the exposure leave."
    )


class Misclassified(Table):
    """How well something is recorded."""

    name: Name = Field(description="What is recorded, and how.")
    sensitivity: Probability = Field(description="The share of those who have it that is recorded as having it.")
    specificity: Probability = Field(description="The share of those who have it not that is recorded so.")
    correlation: float = Field(
        0, ge=0, le=1, description="Of the values of the two groups, where they differ: 1 moves them together."
    )


class MisclassifiedExposure(Misclassified):
    """How well the exposure is recorded."""

    sensitivity_with_outcome: Probability | None = Field(
        None, description="In those with the outcome, where it differs; sensitivity is then that of the others."
    )
    specificity_with_outcome: Probability | None = Field(
        None, description="In those with the outcome, where it differs; specificity is then that of the others."
    )


class MisclassifiedOutcome(Misclassified):
    """How well the outcome is recorded."""

    sensitivity_in_exposed: Probability | None = Field(
        None, description="In the exposed, where it differs; sensitivity is then that of the reference group."
    )
    specificity_in_exposed: Probability | None = Field(
        None, description="In the exposed, where it differs; specificity is then that of the reference group."
    )


class Selection(Table):
    """How people came into the data: the probability for each of the four groups, or the factor that follows."""

    name: Name = Field(description="What selects.")
    factor: Factor | None = Field(None, description="How many times too large the selection makes the ratio.")
    exposed_with_outcome: Probability | None = Field(None, description="Probability of being in the data.")
    exposed_without_outcome: Probability | None = Field(None, description="Probability of being in the data.")
    reference_with_outcome: Probability | None = Field(None, description="Probability of being in the data.")
    reference_without_outcome: Probability | None = Field(None, description="Probability of being in the data.")

    @property
    def probabilities(self) -> tuple[Probability | None, ...]:
        """Of the exposed with and without the outcome, and of the reference group with and without it."""
        return (
            self.exposed_with_outcome,
            self.exposed_without_outcome,
            self.reference_with_outcome,
            self.reference_without_outcome,
        )

    @model_validator(mode="after")
    def _is_complete(self) -> Selection:
        given = [probability is not None for probability in self.probabilities]
        if any(given) == (self.factor is not None) or any(given) != all(given):
            raise PydanticCustomError("selection", "Give either factor or all four probabilities")
        return self


class Stress(Table):
    """How fragile the planned estimate is, under stated assumptions."""

    target: Number | None = Field(
        None, description="The value to which the estimate is asked to be moved; by default no effect."
    )
    yardsticks: list[Name] | None = Field(
        None, description="Members of the planned set to measure confounding by; by default all of them."
    )
    draws: int = Field(20_000, ge=100, le=1_000_000, description="How many draws from the distributions.")
    seed: Seed = Field(1, description="Where the random numbers start; the same seed gives the same result.")
    confounder: list[Confounder] = Field([], description="Confounders by their strengths.")
    binary_confounder: list[BinaryConfounder] = Field([], description="Confounders by how common they are.")
    linear_confounder: list[LinearConfounder] = Field([], description="Linear models: by explained variance.")
    misclassified_exposure: list[MisclassifiedExposure] = Field([], description="Errors in recording the exposure.")
    misclassified_outcome: list[MisclassifiedOutcome] = Field([], description="Errors in recording the outcome.")
    selection: list[Selection] = Field([], description="Who came into the data.")
