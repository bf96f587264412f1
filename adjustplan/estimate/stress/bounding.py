"""The bounding factor: the most that a confounder of given strengths can bias an estimate.

Let a confounder be related to the exposure by at most a (the largest ratio, over its levels, of how common a level is
in the one and in the other exposure group) and to the outcome by at most b (the largest ratio of risks between two of
its levels, in either exposure group), beyond the covariates adjusted for. Then a risk ratio is biased by no more than
B = a b / (a + b − 1), whatever number of levels it has and however it is distributed (Ding and VanderWeele 2016,
Epidemiology 27:368). An estimate on the far side is divided by B; the true one lies no nearer to no effect than that.

Turned round: to bias by N, a confounder with strength a > N needs b = N (a − 1) / (a − N). With a ≤ N no b is enough.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

from adjustplan.estimate.stress.scales import Moved, Position

_LADDER = (
    *(1.05, 1.1, 1.2, 1.3, 1.5, 1.7, 2.0, 2.5, 3.0, 4.0, 5.0, 7.0, 10.0, 15.0, 20.0, 30.0, 50.0, 70.0, 100.0, 150.0),
    *(200.0, 300.0, 500.0, 700.0, 1000.0),
)
_STEPS = 6


@dataclass(frozen=True, slots=True)
class Bounded:
    """An estimate moved by a confounder of given strengths.

    Attributes
    ----------
    with_exposure, with_outcome : float
        The strengths, at least 1.
    factor : float
        The bounding factor.
    moved : Moved
        The estimate and limits that remain.
    explains : bool
        Whether the estimate gets to the value that is asked for, or beyond.
    """

    with_exposure: float
    with_outcome: float
    factor: float
    moved: Moved
    explains: bool


@dataclass(frozen=True, slots=True)
class Tipping:
    """For one strength with the exposure, the strength with the outcome that is just enough.

    Attributes
    ----------
    with_exposure : float
    for_estimate, for_limit : float or None
        None where no strength with the outcome is enough.
    """

    with_exposure: float
    for_estimate: float | None
    for_limit: float | None


def bounding_factor(with_exposure: float, with_outcome: float) -> float:
    """The most that a risk ratio can be biased; ValueError where a strength is below 1."""
    if min(with_exposure, with_outcome) < 1:
        raise ValueError("a strength is a ratio of at least 1; invert it")
    return with_exposure / (1 + (with_exposure - 1) / with_outcome)


def partner_strength(factor: float | None, strength: float) -> float | None:
    """The other strength with which a bounding factor is just reached; None where none is enough."""
    if factor is None or (factor > 1 and strength <= factor):
        return None
    return 1.0 if factor <= 1 else factor * (strength - 1) / (strength - factor)


def bounded(position: Position, target: float, with_exposure: float, with_outcome: float) -> Bounded:
    """What a confounder of these strengths could leave of the estimate, at most moved towards ``target``."""
    factor = bounding_factor(with_exposure, with_outcome)
    down = position.estimate >= target
    moved = position.moved(factor, down)
    there = position.needed(target).estimate
    return Bounded(with_exposure, with_outcome, factor, moved, there is not None and factor >= there)


def strengths(evalue: float | None) -> tuple[float, ...]:
    """Six round strengths among which the E-value lies, so that a table shows where the estimate tips."""
    if evalue is None:
        return _LADDER[-_STEPS:]
    above = next((place for place, step in enumerate(_LADDER) if step >= evalue), len(_LADDER) - 1)
    start = min(max(0, above - _STEPS // 2), len(_LADDER) - _STEPS)
    return _LADDER[start : start + _STEPS]


def bounded_array(position: Position, target: float, steps: Sequence[float]) -> tuple[tuple[Bounded, ...], ...]:
    """The estimate that remains for every pair of strengths: a row for each with the exposure."""
    return tuple(tuple(bounded(position, target, first, second) for second in steps) for first in steps)


def tipping_points(position: Position, target: float, steps: Sequence[float]) -> tuple[Tipping, ...]:
    """For each strength with the exposure, that with the outcome which moves estimate and limit to ``target``."""
    if any(first >= second for first, second in pairwise(steps)):
        raise ValueError("strengths rise")
    needed = position.needed(target)
    return tuple(
        Tipping(step, partner_strength(needed.estimate, step), partner_strength(needed.limit, step)) for step in steps
    )
