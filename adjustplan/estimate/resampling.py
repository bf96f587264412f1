"""One replicate of the bootstrap: new people from the same population, and what each model makes of them.

The best picture of the population is the sample itself, so a new sample of the same size is drawn from it with
replacement (Efron 1979, Ann Stat 7:1). Only how often each kind of person was drawn matters to the models; these counts
follow a multinomial distribution, so they are drawn at once, without drawing people. Where people belong together, in
clusters or matched sets, whole clusters are drawn, for only they are independent of each other (Davison and Hinkley
1997, Bootstrap Methods and their Application, section 3.8).

The counts of the *atoms* are then summed to the patterns of each model, and the model is solved again. A replicate may
have no estimate: nobody with the outcome was drawn, or the model separates. It then has no number, rather than a huge
one.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from adjustplan.data import Floats, Moments, Patterns
from adjustplan.estimate.existence import independent_columns, looks_separated, null_directions, separating_direction
from adjustplan.estimate.kernel import Regression
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Solution
from adjustplan.estimate.ways import doubly_robust, regression, solve, standardisation, weighting
from adjustplan.estimate.ways.propensity import propensity

Counts = NDArray[np.int64]
Estimate = Callable[[Counts], float]

_FEW_FOR_EACH = 8  # people for each atom, below which drawing people is faster than drawing counts
_CLEARLY_INDEPENDENT = 1e-8
_TOUCHED = 1e-8
_EDGE = float(np.exp(-25.0))
_BROKEN = (NotEstimableError, np.linalg.LinAlgError, ZeroDivisionError)


@dataclass(frozen=True, eq=False)
class People:
    """The atoms as the draws need them; one entry for each atom.

    Attributes
    ----------
    people : array of int
        Rows of the file that have an outcome.
    unit : array of int or None
        The cluster or matched set of each atom, numbered from 0; -1 where it is not known. None where people are
        independent.
    outcome, time, weight : array of float
        Of each person of the atom.
    """

    people: Counts
    unit: NDArray[np.intp] | None
    outcome: Floats
    time: Floats
    weight: Floats

    @classmethod
    def of(cls, atoms: Patterns) -> People:
        """Those of a file."""
        moments = atoms.moments
        with np.errstate(invalid="ignore", divide="ignore"):
            weight = np.nan_to_num(moments.weight / moments.people)
        return cls(moments.people, _units(atoms), np.nan_to_num(moments.mean), np.nan_to_num(moments.time), weight)

    def drawer(self) -> Callable[[np.random.Generator], Counts]:
        """The function that draws how many people of each atom a new sample has."""
        if self.unit is None:
            return _multinomial(self.people)
        unit, here = self.unit, self.unit >= 0
        of_units = _multinomial(np.ones(int(unit.max()) + 1, dtype=np.int64))
        people = np.where(here, self.people, 0)
        return lambda random: people * of_units(random)[unit]


def _units(atoms: Patterns) -> NDArray[np.intp] | None:
    """The clusters, or else the matched sets, of atoms that have people."""
    name = next((name for name in ("cluster", "matched_set") if name in atoms.keys), None)
    if name is None:
        return None
    known = atoms.keys[name].notna().to_numpy() & (atoms.moments.people > 0)
    unit = np.full(len(atoms), -1, dtype=np.intp)
    unit[known] = pd.factorize(atoms.keys.loc[known, name], sort=True)[0]
    return unit


def _multinomial(people: Counts) -> Callable[[np.random.Generator], Counts]:
    """As many people as there are, each of a cell with a probability in proportion to the people in it."""
    total, some = int(people.sum()), np.flatnonzero(people)
    if total < _FEW_FOR_EACH * len(some):
        cell = np.repeat(np.arange(len(people)), people)
        return lambda random: np.bincount(cell[random.integers(0, total, total)], minlength=len(people))
    probability = people[some] / total

    def draw(random: np.random.Generator) -> Counts:
        counts = np.zeros(len(people), dtype=np.int64)
        counts[some] = random.multinomial(total, probability)
        return counts

    return draw


def estimator(problem: Problem, places: NDArray[np.intp], people: People) -> Estimate:
    """The function from counts of atoms to the effect that the problem asks for.

    Parameters
    ----------
    problem : Problem
    places : array of int, shape (atoms,)
        The pattern of the problem that each atom belongs to; -1 for none.
    people : People
    """
    pooled = _pooling(places, people, len(problem.moments))
    start = _start(problem)

    def estimate(counts: Counts) -> float:
        with np.errstate(all="ignore"):
            return _value(problem.with_moments(pooled(counts)), start)

    return estimate


def _pooling(places: NDArray[np.intp], people: People, patterns: int) -> Callable[[Counts], Moments]:
    """The function from counts of atoms to moments of patterns, as far as an estimate without its error needs them."""
    kept = np.flatnonzero((places >= 0) & (people.people > 0))
    place, weight = places[kept], people.weight[kept]
    outcome, time = weight * people.outcome[kept], weight * people.time[kept]
    weighted, timed = bool((weight != 1).any()), bool((people.time[kept] != 1).any())
    zero, one = np.zeros(patterns), np.ones(patterns)

    def pooled(counts: Counts) -> Moments:
        drawn = counts[kept].astype(np.float64)

        def total(values: Floats) -> Floats:
            return np.asarray(np.bincount(place, weights=values, minlength=patterns), dtype=np.float64)

        number = total(drawn)
        whole = total(drawn * weight) if weighted else number
        mean = total(drawn * outcome) / whole
        elapsed = total(drawn * time) / whole if timed else one
        return Moments(number.astype(np.int64), whole, mean, elapsed, zero, whole, mean, elapsed, zero, zero, zero)

    return pooled


@dataclass(frozen=True, eq=False)
class _Start:
    """Where the iterations of every replicate begin: at the solution of the sample itself."""

    outcome: Regression | None = None
    exposure: tuple[Regression, Regression] | None = None


def _start(problem: Problem) -> _Start:
    try:
        with np.errstate(all="ignore"):
            exposure = None
            if problem.setting.way in ("weighting", "doubly robust"):
                exposure = propensity(problem).regressions
            found = solve(problem).regression
    except _BROKEN:
        return _Start()
    return _Start(found if found is not None and found.converged else None, exposure)


def _value(problem: Problem, start: _Start) -> float:
    """The effect; not a number where there is none."""
    try:
        if problem.setting.way != "stratification":  # there a stratum without people counts for nothing by itself
            problem, start = _seen(problem, start)
        found = _solved(problem, start)
        if found.regression is not None and looks_separated(found.regression):
            found = _sure(problem, found, found.regression)
    except _BROKEN:
        return np.nan
    return found.value if np.isfinite(found.value) else np.nan


def _solved(problem: Problem, start: _Start) -> Solution:
    way = problem.setting.way
    if way == "regression":
        return regression.solve(problem, start.outcome)
    if way == "standardisation":
        return standardisation.solve(problem, start.outcome)
    if way == "weighting":
        return weighting.solve(problem, start.exposure)
    if way == "doubly robust":
        return doubly_robust.solve(problem, start.outcome, start.exposure)
    return solve(problem)


def _seen(problem: Problem, start: _Start) -> tuple[Problem, _Start]:
    """The problem of the patterns that were drawn.

    Where a level of a covariate was not drawn, or two covariates became one, columns are dropped as they are for the
    sample itself, if the effect is not touched by it.

    Raises
    ------
    NotEstimableError
        If it is, or nobody was drawn.
    """
    here = np.flatnonzero(problem.moments.weight > 0)
    if len(here) == len(problem.moments):
        return problem, start
    if not len(here):
        raise _lost()
    whole = problem.matrix
    problem = replace(
        problem,
        matrix=replace(
            whole,
            columns=whole.columns.take(here, axis=0),
            exposed=whole.exposed.take(here, axis=0),
            reference=whole.reference.take(here, axis=0),
        ),
        moments=problem.moments.of(here),
        cluster=None if problem.cluster is None else problem.cluster[here],
        is_exposed=problem.is_exposed[here],
        is_reference=problem.is_reference[here],
    )
    matrix = problem.matrix
    if _clearly_independent(matrix.columns):
        return problem, start
    directions = null_directions(matrix.columns)
    if not directions.shape[1]:
        return problem, start
    needed = (
        matrix.contrast[None] if problem.setting.way == "regression" else np.vstack([matrix.exposed, matrix.reference])
    )
    if np.abs(needed @ directions).max() > _TOUCHED * np.abs(needed).max():
        raise _lost()
    kept = independent_columns(matrix.columns, np.ones(len(matrix.columns)))
    return replace(problem, matrix=matrix.keep(kept)), _Start()


def _lost() -> NotEstimableError:
    return NotEstimableError("estimate-collinear", "The people drawn do not tell the effect.", "")


def _clearly_independent(columns: Floats) -> bool:
    """Whether the columns are far from collinear, by the correlations between them; False says nothing."""
    products = columns.T @ columns
    lengths = np.sqrt(np.diag(products))
    if not lengths.all():
        return False
    return bool(np.linalg.eigvalsh(products / np.outer(lengths, lengths))[0] > _CLEARLY_INDEPENDENT)


def _sure(problem: Problem, found: Solution, fitted: Regression) -> Solution:
    """The solution, once it is sure that there is one; as for the sample itself, log-binomial falls back to Poisson.

    Raises
    ------
    NotEstimableError
        If the model separates or did not converge.
    """
    family = fitted.family
    if fitted.converged and not _at_edge(fitted):
        return found
    if separating_direction(problem.matrix.columns, problem.mean, family) is not None:
        raise NotEstimableError("estimate-separation", "The model separates among the people drawn.", "")
    if not fitted.converged and family.name == "log-binomial":
        again = replace(problem, setting=replace(problem.setting, model="poisson"))
        found = _solved(again, _Start())
        assert found.regression is not None
        return _sure(again, found, found.regression)
    if not fitted.converged:
        raise NotEstimableError("estimate-no-convergence", "The model did not converge.", "")
    return found


def _at_edge(fitted: Regression) -> bool:
    """Whether a fitted mean is so far out that iterations may have ended there for want of digits.

    Nearer to the middle every digit of a step is right, and under separation steps do not get shorter.
    """
    return bool(fitted.lowest < _EDGE or (fitted.family.name == "logistic" and fitted.highest > 1 - _EDGE))
