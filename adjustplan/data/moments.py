"""What is kept of the outcomes of people who agree in everything the models see.

A model's estimates and their robust variances need of a pattern's people only sums. With the outcome y, the time at
risk t (1 where no time is counted) and the sampling weight w (1 where nobody is weighted), every score in this
package is of the form w (a + b y + c t) with a, b, c the same for the whole pattern. Its sum needs Σw, Σwy, Σwt; the
sum of its squares needs Σw² and the second moments of y and t under w². These are kept as means and as sums of
squares and products around the means, which lose no digits where the outcomes lie far from zero.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Moments:
    """Weighted moments of outcome and time at risk, one entry for each pattern.

    Attributes
    ----------
    people : array of int
        Rows that have an outcome, and a weight and a time where these are asked for.
    weight : array of float
        Sum of their weights.
    mean, time : array of float
        Weighted means of outcome and time; not a number where nobody was observed.
    deviations : array of float
        Weighted sum of squared deviations of the outcomes from their mean.
    square : array of float
        Sum of squared weights.
    mean_squared, time_squared : array of float
        Means of outcome and time under the squared weights.
    outcome_outcome, outcome_time, time_time : array of float
        Sums of squares and products around these means, under the squared weights.
    """

    people: NDArray[np.int64]
    weight: Floats
    mean: Floats
    time: Floats
    deviations: Floats
    square: Floats
    mean_squared: Floats
    time_squared: Floats
    outcome_outcome: Floats
    outcome_time: Floats
    time_time: Floats

    @classmethod
    def plain(cls, people: NDArray[np.int64], mean: Floats, deviations: Floats) -> Moments:
        """The moments of people without weights and times."""
        weight, one, zero = people.astype(np.float64), np.ones(len(people)), np.zeros(len(people))
        return cls(people, weight, mean, one, deviations, weight, mean, one, deviations, zero, zero)

    @classmethod
    def of_equals(cls, people: NDArray[np.int64], outcome: Floats, time: Floats, weight: Floats) -> Moments:
        """The moments of cells of people who do not differ in outcome, time and weight."""
        zero = np.zeros(len(people))
        total, square = people * weight, people * weight**2
        return cls(people, total, outcome, time, zero, square, outcome, time, zero, zero, zero)

    def __len__(self) -> int:
        return len(self.people)

    def of(self, chosen: NDArray[np.bool_] | NDArray[np.intp]) -> Moments:
        """Those of some patterns."""
        return Moments(*(getattr(self, field.name)[chosen] for field in fields(self)))

    def times(self, factor: Floats) -> Moments:
        """The same people with their weights multiplied; one factor for each pattern."""
        squared = factor**2
        return replace(
            self,
            weight=self.weight * factor,
            deviations=self.deviations * factor,
            square=self.square * squared,
            outcome_outcome=self.outcome_outcome * squared,
            outcome_time=self.outcome_time * squared,
            time_time=self.time_time * squared,
        )

    def pool(self, group: NDArray[np.intp], count: int) -> Moments:
        """Patterns put together: pattern i goes to ``group[i]``, of which there are ``count``.

        Means are averaged by their weights; what the means lie apart is added to the sums of squares and products.
        """

        def total(values: Floats) -> Floats:
            return np.bincount(group, weights=values, minlength=count).astype(np.float64)

        weight, square = total(self.weight), total(self.square)
        mean, time = total(self.weight * self.mean) / weight, total(self.weight * self.time) / weight
        mean_squared, time_squared = (
            total(self.square * self.mean_squared) / square,
            total(self.square * self.time_squared) / square,
        )
        outcome = self.mean_squared - mean_squared[group]
        elapsed = self.time_squared - time_squared[group]
        return Moments(
            total(self.people.astype(np.float64)).astype(np.int64),
            weight,
            mean,
            time,
            total(self.deviations + self.weight * (self.mean - mean[group]) ** 2),
            square,
            mean_squared,
            time_squared,
            total(self.outcome_outcome + self.square * outcome**2),
            total(self.outcome_time + self.square * outcome * elapsed),
            total(self.time_time + self.square * elapsed**2),
        )
