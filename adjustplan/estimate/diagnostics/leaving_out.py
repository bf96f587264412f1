"""Leaving one person out, when only sums over people are known.

Of the people of a pattern their number, the sum of their influences and the sum of the squares of these are known. If
they are one or two, or if the outcome is 0 or 1, that gives each person's influence. Otherwise it gives bounds:
somebody has at least the root of the mean square, and nobody lies further from the mean than the standard deviation
times the root of their number less one (Samuelson 1968, J Am Stat Assoc 63:1522).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Moments
from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.influence import Influence as Moved
from adjustplan.estimate.diagnostics.influence import influence_findings, largest_influence
from adjustplan.estimate.kernel import Influence

_ROUNDING = 1e-6


@dataclass(frozen=True, slots=True)
class LeavingOut:
    """The largest change of the estimate when one person is left out, to first order and in standard errors.

    Attributes
    ----------
    at_least, at_most : float
        The same number where it is known.
    """

    at_least: float
    at_most: float

    @property
    def known(self) -> bool:
        """Whether the sums leave nothing open."""
        return self.at_most - self.at_least <= _ROUNDING * self.at_most

    @property
    def findings(self) -> tuple[Finding, ...]:
        """A warning where one person moves the estimate much for certain."""
        return influence_findings(Moved(self.at_least, 0, 1.0))


def leaving_out(influence: Influence, moments: Moments, standard_error: float, *, binary: bool) -> LeavingOut:
    """The largest change by one person.

    Parameters
    ----------
    influence : Influence
        Of each person on the estimate, on the scale of its standard error.
    moments : Moments
    standard_error : float
    binary : bool
        Whether every outcome is 0 or 1.
    """
    people = moments.people.astype(np.float64)
    seen = (people > 0) & (moments.weight > 0)
    part, count = moments.of(seen), people[seen]
    constant, outcome, time = (each[seen] for each in (influence.constant, influence.outcome, influence.time))
    mean = part.weight * (constant + outcome * part.mean + time * part.time) / count
    middle = constant + outcome * part.mean_squared + time * part.time_squared
    squares = part.square * middle**2 + outcome**2 * part.outcome_outcome
    squares = (squares + 2 * outcome * time * part.outcome_time + time**2 * part.time_time) / count
    squares = np.maximum(squares, mean**2)
    least, most = np.sqrt(squares), np.abs(mean) + np.sqrt((count - 1) * (squares - mean**2))
    if binary:
        alike = (part.square * count - part.weight**2 <= 1e-9 * part.weight**2) & (part.time_time == 0)
        ends = [np.abs(part.weight / count * (constant + outcome * end + time * part.time)) for end in (0.0, 1.0)]
        somebody = [part.mean < 1 - 1e-12, part.mean > 1e-12]
        exact = np.maximum(*(np.where(here, end, 0.0) for here, end in zip(somebody, ends, strict=True)))
        least, most = np.where(alike, exact, least), np.where(alike, exact, most)
    # a person's influence in the sense of ``influence.py`` is what they add to the estimate, times all people
    whole = float(count.sum())
    low, high = (largest_influence(each * whole, count, standard_error).largest for each in (least, most))
    return LeavingOut(abs(low), abs(high))
