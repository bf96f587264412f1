"""The strata of a problem: people who agree in every covariate of the set, counted at the two levels compared."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Rows, Solution
from adjustplan.estimate.ways.propensity import covariate_columns, no_levels
from adjustplan.estimate.ways.stratification import Strata, mantel_haenszel, stratification_findings


def solve(rows: Rows) -> Solution:
    """The Mantel–Haenszel estimate.

    Raises
    ------
    NotEstimableError
        If the problem has no strata, or none that inform.
    """
    setting = rows.setting
    if setting.kind == "mean":
        message = f"Stratification is built for risks, odds and rates, not for the {setting.measure}."
        raise NotEstimableError("estimate-way-measure", message, "Adjust it another way.")
    if not isinstance(rows, Problem):
        message = "Stratification needs categories that make few strata, but almost every row is a stratum of its own."
        raise NotEstimableError("estimate-no-levels", message, "State cuts for what enters as a number.")
    problem = rows
    if not (problem.is_exposed.any() and problem.is_reference.any()):
        raise no_levels(setting)
    smooth = [
        name for name in dict.fromkeys(problem.matrix.variables) if name and setting.forms.get(name) != "category"
    ]
    if smooth := [name for name in smooth if name != setting.exposure]:
        message = f"Stratification needs categories, but “{smooth[0]}” enters as {setting.forms[smooth[0]]}."
        remedy = f'State {smooth[0]} = "category" or "cut(…)" in [analysis.forms], or adjust another way.'
        raise NotEstimableError("estimate-no-levels", message, remedy)
    weighted = not np.array_equal(problem.moments.weight, problem.moments.people)
    if weighted or problem.cluster is not None:
        message = "The variance of a stratified estimate is for people counted once and independent of each other."
        raise NotEstimableError(
            "estimate-way-weights", message, "Adjust another way where there are weights or clusters."
        )
    found = mantel_haenszel(counted(problem), setting.measure)
    value = found.estimate if setting.scale == "difference" else float(np.log(found.estimate))
    return Solution(value, standard_error=found.standard_error, findings=stratification_findings(found))


def with_influence(rows: Rows, found: Solution) -> Solution:  # noqa: ARG001 — the signature of every way
    """The same: its standard error has a formula of its own."""
    return replace(found, influence=None)


def stratum_of(problem: Problem) -> NDArray[np.intp]:
    """The stratum of each pattern, numbered from 0."""
    _, number = np.unique(covariate_columns(problem), axis=0, return_inverse=True)
    return np.asarray(number.ravel(), dtype=np.intp)


def counted(problem: Problem) -> Strata:
    """Cases and people, or time at risk, of both groups in each stratum."""
    number, moments = stratum_of(problem), problem.moments
    cases, total = moments.weight * np.nan_to_num(moments.mean), problem.weight

    def sums(values: Floats, here: NDArray[np.bool_]) -> Floats:
        summed = np.bincount(number, weights=np.where(here, values, 0.0), minlength=number.max() + 1)
        # a count is whole; a mean times people is so only up to rounding
        return np.where(np.abs(summed - np.round(summed)) < 1e-6, np.round(summed), summed)

    here, there = problem.is_exposed, problem.is_reference
    exposed, reference = sums(total, here), sums(total, there)
    some = (exposed > 0) | (reference > 0)
    return Strata(sums(cases, here)[some], exposed[some], sums(cases, there)[some], reference[some])
