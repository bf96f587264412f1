"""Intervals from resampled people in place of formulas.

A standard error says how much an estimate would vary over samples from the same population. The bootstrap watches it
vary: it draws new samples from the one there is (``resampling``), estimates in each, and takes the spread of these
*replicates* for the spread over samples. The 95 % percentile interval reaches from their 2.5 % to their 97.5 % quantile
(Efron 1979, Ann Stat 7:1; Davison and Hinkley 1997, Bootstrap Methods and their Application, chapter 5).

The same people are drawn for every model, so that the difference of two estimates can be judged too. What is drawn for
a replicate depends on the seed and the number of the replicate alone: any number of processes gives the same numbers.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from contextlib import closing
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem
from adjustplan.estimate.resampling import Counts, Estimate, People, estimator
from adjustplan.estimate.workers import Run, processors, share

MOST_FAILED = 0.05
"""Share of replicates without an estimate up to which the others are taken to speak for all."""

_SMALL = 5.0  # seconds of work, roughly, for which starting helpers does not pay
_LONGEST_PIECE = 50


@dataclass(frozen=True, eq=False)
class Job:
    """A model on covariate patterns that is estimated in every replicate.

    Attributes
    ----------
    problem : Problem
    places : array of int, shape (atoms,)
        The pattern of the problem that each atom belongs to (``Patterns.place``); -1 for none.

    Raises
    ------
    ValueError
        If the problem's weights were estimated from the sample: they must be estimated again in every replicate, which
        takes a ``RowJob``.
    """

    problem: Problem
    places: NDArray[np.intp]

    def __post_init__(self) -> None:
        if self.problem.projection is not None:
            raise ValueError("weights of complete rows must be estimated again in every replicate")

    def begin(self, people: People) -> Estimate:
        """The function from counts of atoms to the estimate."""
        return estimator(self.problem, self.places, people)

    def seconds(self, atoms: int) -> float:
        """Roughly how long one estimate takes."""
        patterns, parameters = self.problem.matrix.columns.shape
        return float(4e-4 + 3e-8 * atoms + patterns * (3e-7 + 4e-8 * parameters))


@dataclass(frozen=True, eq=False)
class RowJob:
    """Any other estimate, such as one from a model that needs rows.

    Attributes
    ----------
    estimate : function of an array of int, shape (atoms,)
        From how many people of each atom were drawn to the estimate, on a scale on which it is symmetric. It must
        survive pickling, and raises NotEstimableError, or returns what is not finite, where there is no estimate.
    """

    estimate: Estimate

    def begin(self, people: People) -> Estimate:  # noqa: ARG002 — the signature of every job
        """The function from counts of atoms to the estimate."""
        return self.estimate

    def seconds(self, atoms: int) -> float:
        """Roughly how long one estimate takes."""
        return 2e-3 + 1e-6 * atoms


@dataclass(frozen=True, eq=False)
class Replicates:
    """What each job estimated in each replicate.

    Attributes
    ----------
    values : array of float, shape (replicates, jobs)
        On the scale of the solution's value; not a number where a replicate had no estimate.
    failed : array of int, shape (jobs,)
        How many of them had none.
    """

    values: Floats
    failed: Counts


@dataclass(frozen=True, slots=True)
class PercentileInterval:
    """A 95 % interval from replicates.

    Attributes
    ----------
    lower, upper : float
    standard_error : float
        The standard deviation of the replicates.
    findings : tuple of Finding
        What to know of it.
    """

    lower: float
    upper: float
    standard_error: float
    findings: tuple[Finding, ...] = ()


def resample(
    atoms: Patterns,
    jobs: Sequence[Job | RowJob],
    replicates: int,
    seed: int,
    progress: Callable[[int], None] | None = None,
    processes: int | None = None,
) -> Replicates:
    """Draw new samples and estimate every job in each.

    Parameters
    ----------
    atoms : Patterns
        Of which each is one kind of person (``Wanted.atoms``). Samples have as many people as the file has rows with an
        outcome. With a key "cluster", or else "matched_set", as many clusters or sets are drawn as there are.
    jobs : sequence of Job or RowJob
    replicates : int
    seed : int
        At least 0.
    progress : function of int, optional
        Called now and then with the number of replicates done so far.
    processes : int, optional
        How many to use; by default all processors, or one where that is faster. The result does not depend on it.

    Raises
    ------
    ValueError
        If there is nobody to draw, or nothing to estimate.
    """
    if not jobs or replicates < 1 or (processes is not None and processes < 1):
        raise ValueError("a bootstrap needs a job, a replicate and a process")
    people = People.of(atoms)
    drawn = people.people if people.unit is None else people.people[people.unit >= 0]
    if not drawn.sum():
        raise ValueError("there is nobody to draw")
    work = _Work(people, tuple(jobs), seed)
    if processes is None:
        each = 3e-5 + min(1e-7 * len(atoms), 2e-8 * people.people.sum())
        each += sum(job.seconds(len(atoms)) for job in jobs)
        processes = processors() if replicates * each > _SMALL else 1
    longest = min(_LONGEST_PIECE, max(1, replicates // (8 * processes)))
    pieces = [range(first, min(first + longest, replicates)) for first in range(0, replicates, longest)]
    values, done = np.full((replicates, len(jobs)), np.nan), 0
    with closing(share(work, pieces, processes)) as results:
        for piece, found in results:
            values[piece.start : piece.stop] = found
            done += len(piece)
            if progress is not None:
                progress(done)
    return Replicates(values, np.isnan(values).sum(axis=0))


@dataclass(frozen=True, eq=False)
class _Work:
    """Everything that a process needs to estimate any replicate."""

    people: People
    jobs: tuple[Job | RowJob, ...]
    seed: int

    def begin(self) -> Run:
        draw, estimates = self.people.drawer(), [job.begin(self.people) for job in self.jobs]

        def run(piece: range) -> Floats:
            values = np.full((len(piece), len(estimates)), np.nan)
            for line, number in enumerate(piece):
                random = np.random.Generator(np.random.PCG64(np.random.SeedSequence(self.seed, spawn_key=(number,))))
                counts = draw(random)
                values[line] = [_finite(estimate, counts) for estimate in estimates]
            return values

        return run


def _finite(estimate: Estimate, counts: Counts) -> float:
    try:
        value = estimate(counts)
    except NotEstimableError:
        return np.nan
    return value if np.isfinite(value) else np.nan


def percentile_interval(values: Floats) -> PercentileInterval:
    """The 95 % percentile interval of replicates.

    Of R replicates in order it takes those at the places 0.025 (R + 1) and 0.975 (R + 1), between two where these are
    not whole numbers.

    Parameters
    ----------
    values : array of float, shape (replicates,)
        Not a number where a replicate had no estimate; a few of these are passed over, with a warning.

    Raises
    ------
    NotEstimableError
        If more than 5 % of the replicates had no estimate, or fewer than two had one.
    """
    found = values[np.isfinite(values)]
    failed, count = len(values) - len(found), len(values)
    if failed > MOST_FAILED * count or len(found) < 2:
        message = f"{failed} of {count} bootstrap replicates had no estimate, so there is no interval."
        remedy = (
            "Merge rare levels or adjust for less; or take [analysis.bootstrap] out to have the interval of a formula."
        )
        raise NotEstimableError("estimate-bootstrap-failed", message, remedy)
    findings: tuple[Finding, ...] = ()
    if failed:
        message = f"{failed} of {count} bootstrap replicates had no estimate; the interval is that of the others."
        remedy = "Look for rare levels, and compare the interval with that of the formula."
        findings = (Finding("estimate-bootstrap-failed", message, remedy, "warning"),)
    lower, upper = np.quantile(found, [0.025, 0.975], method="weibull")
    return PercentileInterval(float(lower), float(upper), float(found.std(ddof=1)), findings)
