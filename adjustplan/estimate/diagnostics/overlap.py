"""Overlap: are there people of both exposures wherever the estimate needs them?

To compare exposed with reference people who are alike, both have to exist (*positivity*). Where they do not, in a
stratum of the covariates or at one end of the *propensity score* (the probability of being exposed given the
covariates), a regression fills the gap by extrapolation (Westreich and Cole 2010, Am J Epidemiol 171:674).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.errors import Finding, Severity
from adjustplan.estimate.diagnostics.balance import Marks

SMALLEST_COUNT = 5
"""No bar of a histogram stands for fewer people of a group, unless for none (common practice in disclosure control)."""
MOST_OUTSIDE = 0.05
"""Share of people outside the common range of the score above which the finding is a warning (a choice of ours)."""


@dataclass(frozen=True, slots=True)
class Positivity:
    """Strata of the covariates in which one exposure never occurs.

    Attributes
    ----------
    strata, people : int, float
        All that hold somebody of either group.
    without_exposed, without_reference : int
        Strata that lack a group.
    people_without_exposed, people_without_reference : float
        People in them.
    """

    strata: int
    people: float
    without_exposed: int
    without_reference: int
    people_without_exposed: float
    people_without_reference: float


def positivity(strata: NDArray[np.int64], exposed: Marks, reference: Marks, rows: Floats) -> Positivity:
    """Count the strata that lack one of the groups.

    Parameters
    ----------
    strata : array of int, shape (patterns,)
        A code from 0 up for the combination of covariate levels.
    exposed, reference : array of bool, shape (patterns,)
        The groups; patterns in neither take no part.
    rows : array of float, shape (patterns,)
        People per pattern.
    """
    count = int(strata.max()) + 1
    people = [np.bincount(strata[group], weights=rows[group], minlength=count) for group in (exposed, reference)]
    both = people[0] + people[1]
    lack = [(group == 0) & (both > 0) for group in people]
    return Positivity(
        int(np.sum(both > 0)),
        float(both.sum()),
        int(lack[0].sum()),
        int(lack[1].sum()),
        float(both[lack[0]].sum()),
        float(both[lack[1]].sum()),
    )


def positivity_findings(result: Positivity) -> tuple[Finding, ...]:
    """A warning with the number of strata and people that lack a group."""
    strata = result.without_exposed + result.without_reference
    if not strata:
        return ()
    people = result.people_without_exposed + result.people_without_reference
    message = (
        f"{strata} of {result.strata} strata of the covariates lack a group ({result.without_exposed} have nobody"
        f" exposed, {result.without_reference} nobody in the reference group); they hold {people:.0f} of"
        f" {result.people:.0f} people ({100 * people / result.people:.3g} %)."
    )
    remedy = "There the model alone decides: merge levels, or restrict the population to where both occur."
    return (Finding("estimate-positivity", message, remedy, "warning"),)


@dataclass(frozen=True, slots=True)
class ScoreOverlap:
    """The propensity score in both groups.

    Attributes
    ----------
    edges : tuple of float
        Ends of the bins, from 0 to 1; one more than there are counts. Empty where a group is too small to show.
    exposed, reference : tuple of float
        People per bin; each count is 0 or at least :data:`SMALLEST_COUNT`.
    exposed_range, reference_range : tuple of (float, float)
        Lowest and highest score. These belong to single people: round them before they leave a protected place.
    people, outside : float
        Everybody, and those outside the range that both groups share.
    """

    edges: tuple[float, ...]
    exposed: tuple[float, ...]
    reference: tuple[float, ...]
    exposed_range: tuple[float, float]
    reference_range: tuple[float, float]
    people: float
    outside: float

    @property
    def share_outside(self) -> float:
        """Share of people outside the common range."""
        return self.outside / self.people


def score_overlap(score: Floats, exposed: Marks, reference: Marks, rows: Floats, bins: int = 20) -> ScoreOverlap:
    """Distribution of the propensity score by group.

    Neighbouring bins are merged from the left until none shows fewer than :data:`SMALLEST_COUNT` people of a group.

    Parameters
    ----------
    score : array of float, shape (patterns,)
        Probability of being exposed, between 0 and 1.
    exposed, reference : array of bool, shape (patterns,)
    rows : array of float, shape (patterns,)
    bins : int
        Before merging.

    Raises
    ------
    ValueError
        If a group is empty or a score is no probability.
    """
    groups = [group & (rows > 0) for group in (exposed, reference)]
    if not all(group.any() for group in groups):
        raise ValueError("overlap needs people in both groups")
    if not np.all((score >= 0) & (score <= 1)):
        raise ValueError("a propensity score lies between 0 and 1")
    ends = np.linspace(0.0, 1.0, bins + 1)
    counts = np.array([np.histogram(score[group], ends, weights=rows[group])[0] for group in groups])
    edges, merged = _merged(ends, counts)
    ranges = [(float(score[group].min()), float(score[group].max())) for group in groups]
    low, high = max(ranges[0][0], ranges[1][0]), min(ranges[0][1], ranges[1][1])
    either = groups[0] | groups[1]
    outside = either & ((score < low) | (score > high))
    return ScoreOverlap(
        edges,
        tuple(merged[0]),
        tuple(merged[1]),
        ranges[0],
        ranges[1],
        float(rows[either].sum()),
        float(rows[outside].sum()),
    )


def _merged(ends: Floats, counts: Floats) -> tuple[tuple[float, ...], list[list[float]]]:
    """Bins joined with their right neighbours until every count is safe; a rest at the end joins the last."""

    def safe(pair: Floats) -> bool:
        return bool(np.all((pair == 0) | (pair >= SMALLEST_COUNT)))

    edges: list[float] = [float(ends[0])]
    kept: list[Floats] = []
    open_bin = np.zeros(2)
    for right, pair in zip(ends[1:], counts.T, strict=True):
        open_bin = open_bin + pair
        if safe(open_bin):
            kept.append(open_bin)
            edges.append(float(right))
            open_bin = np.zeros(2)
    while kept and not safe(open_bin):
        open_bin = open_bin + kept.pop()
        edges.pop()
    if open_bin.any():
        if not safe(open_bin):
            return (), [[], []]
        kept.append(open_bin)
        edges.append(float(ends[-1]))
    edges[-1] = float(ends[-1])
    return tuple(edges), [[float(pair[group]) for pair in kept] for group in (0, 1)]


def overlap_findings(result: ScoreOverlap) -> tuple[Finding, ...]:
    """How many people have a propensity score that nobody of the other group reaches."""
    if result.outside == 0:
        return ()
    message = (
        f"{result.outside:.0f} of {result.people:.0f} people ({100 * result.share_outside:.3g} %) have a propensity"
        " score outside the range that both groups share."
    )
    remedy = "For them the model extrapolates; consider restricting the population, or truncating the weights."
    severity: Severity = "warning" if result.share_outside > MOST_OUTSIDE else "note"
    return (Finding("estimate-positivity", message, remedy, severity),)
