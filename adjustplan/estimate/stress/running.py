"""From a plan to its fragility: fit the planned set, gather what stress testing needs to know, and put it together."""

from __future__ import annotations

import math

import numpy as np

from adjustplan.data import Floats
from adjustplan.errors import DataError, Finding
from adjustplan.estimate.estimating import Progress, SetResult
from adjustplan.estimate.fitting import Analysed, analyse
from adjustplan.estimate.kernel import FAMILIES, regress
from adjustplan.estimate.modelling import estimate_effect
from adjustplan.estimate.problem import Problem
from adjustplan.estimate.stress.observed import Observed, Yardstick
from adjustplan.estimate.stress.results import Fragility
from adjustplan.estimate.stress.stressing import stress
from adjustplan.estimate.stress.tables import TwoByTwo
from adjustplan.estimate.threads import one_thread
from adjustplan.plan import Plan


def stress_plan(plan: Plan, progress: Progress | None = None) -> Fragility:
    """How fragile the planned estimate is.

    Raises
    ------
    PlanError
        If the plan has no set or analysis yet, or its ``[stress]`` does not fit.
    DataError
        If the data cannot serve the plan, or the planned set has no estimate.
    """
    return stress_analysed(analyse(plan, 0, progress))


def stress_analysed(done: Analysed) -> Fragility:
    """The same, from the estimates of a plan."""
    return stress(done.loaded.plan, observe(done))


def observe(done: Analysed) -> Observed:
    """The planned estimate, and what is known around it; DataError where there is none."""
    plan = done.loaded.plan
    planned = done.results[0]
    estimate = planned.adjusted.estimate if planned.adjusted else None
    if estimate is None or planned.complete is None or planned.adjusted is None:
        message = "The planned set has no estimate, so there is nothing to put under stress."
        nothing = Finding("stress-no-estimate", message, "Mend what the other findings say.", file=str(plan.path))
        raise DataError([nothing, *planned.reported().findings])
    setting = done.loaded.setting
    exposed, reference = setting.coding.groups(planned.complete.values[setting.exposure].to_numpy())
    moments = planned.complete.moments
    by_model = setting.measure == "mean difference" and setting.way == "regression" and setting.variance == "model"
    problem = planned.adjusted.problem
    sized = moments.weight * moments.time
    with one_thread():
        yardsticks = _yardsticks(done, planned, by_model=by_model)
    return Observed(
        setting.measure,
        estimate.estimate,
        estimate.lower,
        estimate.upper,
        estimate.standard_error,
        planned.crude.estimate.estimate if planned.crude and planned.crude.estimate else None,
        _deviation(planned) if setting.measure == "mean difference" else None,
        _risks(planned),
        (float(sized[exposed].sum()), float(sized[reference].sum())) if exposed.any() and reference.any() else None,
        _table(planned, exposed, reference) if setting.kind in ("risk", "hazard") else None,
        float(moments.people.sum() - problem.matrix.columns.shape[1]) if by_model and problem else None,
        yardsticks,
    )


def _deviation(planned: SetResult) -> float:
    """The standard deviation of the outcome."""
    assert planned.complete is not None
    moments = planned.complete.moments
    middle = np.average(moments.mean, weights=moments.weight)
    squared = float(np.sum(moments.deviations + moments.weight * (moments.mean - middle) ** 2))
    return math.sqrt(squared / (moments.weight.sum() - 1))


def _risks(planned: SetResult) -> tuple[float, float] | None:
    """The two adjusted risks or rates whose difference is the estimate: predicted by the model, and averaged."""
    assert planned.adjusted is not None
    problem, solution = planned.adjusted.problem, planned.adjusted.solution
    if solution is not None and solution.means is not None:
        return solution.means
    if problem is None or solution is None or solution.regression is None:
        return None
    regression, weight = solution.regression, problem.weight
    if regression.family.name != "linear" or problem.setting.kind == "mean":
        return None
    sides = (problem.matrix.exposed, problem.matrix.reference)
    exposed, reference = (float(weight @ (side @ regression.coefficients) / weight.sum()) for side in sides)
    return exposed, reference


def _table(planned: SetResult, exposed: np.ndarray, reference: np.ndarray) -> TwoByTwo | None:
    """The crude two-by-two table, people counted once."""
    assert planned.complete is not None
    moments = planned.complete.moments
    if not (exposed.any() and reference.any()) or not np.array_equal(moments.weight, moments.people):
        return None
    cases = moments.weight * moments.mean
    cells = [float(part[here].sum()) for here in (exposed, reference) for part in (cases, moments.weight - cases)]
    return TwoByTwo(*(round(cell) for cell in cells))


def _yardsticks(done: Analysed, planned: SetResult, *, by_model: bool) -> dict[str, Yardstick]:
    """Each member of the set, by what leaving it out does on the same rows."""
    assert planned.complete is not None
    assert planned.adjusted is not None
    setting, members = done.loaded.setting, planned.chosen.members
    if done.loaded.plan.analysis.missing != "complete cases":
        return {name: Yardstick() for name in members}
    found = {}
    for name in members:
        others = [other for other in members if other != name]
        without = estimate_effect(planned.complete, setting, others).estimate
        problem = planned.adjusted.problem
        shares = _partial_shares(problem, name) if by_model and problem else (None, None)
        found[name] = Yardstick(without.estimate if without else None, *shares)
    return found


def _partial_shares(problem: Problem, name: str) -> tuple[float | None, float | None]:
    """Partial R² of a covariate with the exposure, and with the outcome."""
    matrix, weight = problem.matrix, problem.weight
    own = np.array([owner == name for owner in matrix.variables])
    exposure = ~matrix.covariates
    if exposure.sum() != 1 or not own.any():
        return None, None
    of_exposure = matrix.columns[:, exposure][:, 0]
    nobody = np.zeros(len(weight))
    whole = _left(matrix.columns, weight, problem.mean, problem.moments.deviations)
    part = _left(matrix.columns[:, ~own], weight, problem.mean, problem.moments.deviations)
    whole_exposure = _left(matrix.columns[:, ~exposure], weight, of_exposure, nobody)
    part_exposure = _left(matrix.columns[:, ~exposure & ~own], weight, of_exposure, nobody)
    return 1 - whole_exposure / part_exposure, 1 - whole / part


def _left(columns: Floats, weight: Floats, outcome: Floats, deviations: Floats) -> float:
    """What a linear model leaves unexplained."""
    fitted = regress(columns, weight, outcome, FAMILIES["linear"]).fitted
    return float(np.sum(deviations + weight * (outcome - fitted) ** 2))
