"""The influence of each person on an estimate, from which every robust variance follows.

An estimate from a sample behaves, up to what vanishes in large samples, like a sum over people: each adds ψ, how far
the estimate moves because of them (Huber 1967; Tsiatis 2006, Semiparametric Theory and Missing Data, chapter 3). Its
variance is then Σψ², the covariance of two estimates from the same people is Σψ₁ψ₂, and where people come in clusters
the sums of ψ within clusters take the place of ψ. For a regression this is the sandwich of Huber and White; for an
estimate made in several steps (weights first, then means) it is what stacked estimating equations give.

In this package every ψ is w (a + b y + c t), with the outcome y, the time at risk t and the sampling weight w of the
person and with a, b, c the same for the whole pattern. So the sums over people follow from the moments of the patterns.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats, Moments


@dataclass(frozen=True, eq=False)
class Influence:
    """a, b and c of one estimate, for each pattern; shape (patterns,) each."""

    constant: Floats
    outcome: Floats
    time: Floats

    def __add__(self, other: Influence) -> Influence:
        return Influence(self.constant + other.constant, self.outcome + other.outcome, self.time + other.time)

    def __sub__(self, other: Influence) -> Influence:
        return self + other.scaled(-1.0)

    def scaled(self, factor: float | Floats) -> Influence:
        """Every part times a number, or times a number for each pattern."""
        return Influence(self.constant * factor, self.outcome * factor, self.time * factor)


def of_residual(factor: Floats, fitted: Floats) -> Influence:
    """The influence ``factor (y - fitted t)``."""
    return Influence(np.zeros(len(factor)), factor, -factor * fitted)


def covariance(parts: Sequence[Influence], moments: Moments, cluster: NDArray[np.intp] | None = None) -> Floats:
    """The covariance matrix of estimates.

    Parameters
    ----------
    parts : sequence of Influence
        One for each estimate, on the same patterns.
    moments : Moments
    cluster : array of int, shape (patterns,), optional
        The cluster of each pattern, numbered from 0; without it people are independent.

    Returns
    -------
    array of float, shape (estimates, estimates)
    """
    if cluster is not None:
        sums = cluster_sums(parts, moments, cluster, int(cluster.max()) + 1)
        return np.asarray(sums.T @ sums)
    constant, outcome, time = _stacked(parts)
    middle = constant + outcome * _known(moments.mean_squared) + time * _known(moments.time_squared)
    total = (middle * moments.square[:, None]).T @ middle
    total = total + (outcome * moments.outcome_outcome[:, None]).T @ outcome
    if moments.time_time.any():
        crossed = (outcome * moments.outcome_time[:, None]).T @ time
        total = total + crossed + crossed.T + (time * moments.time_time[:, None]).T @ time
    return np.asarray(total)


def cluster_sums(parts: Sequence[Influence], moments: Moments, cluster: NDArray[np.intp], clusters: int) -> Floats:
    """The sums of influences within each cluster, shape (clusters, estimates); they add up over blocks of rows."""
    each = pattern_sums(parts, moments)
    return np.column_stack([np.bincount(cluster, weights=column, minlength=clusters) for column in each.T])


def pattern_sums(parts: Sequence[Influence], moments: Moments) -> Floats:
    """The sums of influences over the people of each pattern, shape (patterns, estimates)."""
    constant, outcome, time = _stacked(parts)
    return (constant + outcome * _known(moments.mean) + time * _known(moments.time)) * moments.weight[:, None]


def _stacked(parts: Sequence[Influence]) -> tuple[Floats, Floats, Floats]:
    return (
        np.column_stack([part.constant for part in parts]),
        np.column_stack([part.outcome for part in parts]),
        np.column_stack([part.time for part in parts]),
    )


def _known(values: Floats) -> Floats:
    return np.nan_to_num(values)[:, None]
