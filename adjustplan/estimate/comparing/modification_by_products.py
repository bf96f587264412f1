"""Effect modification by one regression with products of exposure and modifier."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.collinearity import without_collinearity
from adjustplan.estimate.comparing.interaction import (
    JointEffects,
    attributable_proportion,
    joint_effects,
    modification,
    relative_excess_risk,
    synergy_index,
)
from adjustplan.estimate.comparing.stratum_effects import EffectModification, StratumEffect, places_of, rows_at
from adjustplan.estimate.diagnostics.wald import wald_test
from adjustplan.estimate.existence import looks_separated, null_directions
from adjustplan.estimate.matrix import ModelMatrix, model_matrix
from adjustplan.estimate.modelling import in_place_of_log_binomial, pose
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.results import NORMAL_QUANTILE, Estimate
from adjustplan.estimate.row_models import fit_rows, has_own_interval
from adjustplan.estimate.standard_errors import dispersion, joint_covariance, quantile
from adjustplan.estimate.ways.regression import on_contrast, outcome_regression

_PLACES = 400
_RANK_TOLERANCE = 1e-9
_OPEN = 1e-8


def by_products(patterns: Patterns, setting: Setting, members: Sequence[str], modifier: str) -> EffectModification:
    """The effect at each level, from one regression with products of exposure and modifier."""
    model = (
        _row_model(patterns, setting, members, modifier)
        if has_own_interval(setting)
        else _pattern_model(patterns, setting, members, modifier)
    )
    matrix, said = model.matrix, model.said
    levels, places = places_of(patterns, setting, modifier)
    places = [int(model.lines[place]) for place in places]
    contrasts = [matrix.exposed[place] - matrix.reference[place] for place in places]
    products = _products(patterns, model, modifier)
    # one unit more of an exposure has no level that stands for its absence
    ratio = setting.scale != "difference"
    joint_rows = [
        line
        for place in places[1:]
        if ratio and not setting.coding.shift and modifier in matrix.variables
        for line in _joint(matrix, modifier, places[0], place)
    ]
    rows = np.vstack([*contrasts, *joint_rows, products])
    values, covariance = rows @ model.coefficients, model.covariance(rows)
    each, count = np.eye(len(rows)), len(places)
    last = len(rows) - len(products)
    test = wald_test(values[last:], covariance[last:, last:])
    effects = [
        modification(values, covariance, each[[0, number]], ratio=ratio, quantile=model.quantile)
        for number in range(1, count)
    ]
    numbers = rows_at(patterns, modifier, places_of(patterns, setting, modifier)[1], setting)
    strata = [StratumEffect(levels[0], numbers[0], effects[0].effects[0])]
    for number, found in enumerate(effects, start=1):
        first = count + 3 * (number - 1)
        joint = joint_effects(values, covariance, each[first : first + 3]) if joint_rows else None
        additive = [_measured(measure, joint, said) for measure in _ADDITIVE]
        strata.append(
            StratumEffect(levels[number], numbers[number], found.effects[1], found.against_reference[1], *additive)
        )
    return EffectModification(modifier, tuple(strata), test, tuple(dict.fromkeys(said)))


_ADDITIVE = (relative_excess_risk, attributable_proportion, synergy_index)


def _measured(
    measure: Callable[[JointEffects], Estimate], joint: JointEffects | None, said: list[Finding]
) -> Estimate | None:
    """A measure of interaction, or None and why."""
    if joint is None:
        return None
    try:
        return measure(joint)
    except NotEstimableError as error:
        said.append(error.finding)
        return None


@dataclass(frozen=True, eq=False)
class _Model:
    """A regression with products: what its contrasts need.

    ``lines`` says in which line of the matrix each pattern is, ``covariance`` gives that of the values of contrasts.
    """

    matrix: ModelMatrix
    lines: NDArray[np.intp]
    coefficients: Floats
    covariance: Callable[[Floats], Floats]
    quantile: float
    said: list[Finding]


def _row_model(patterns: Patterns, setting: Setting, members: Sequence[str], modifier: str) -> _Model:
    fitted = fit_rows(patterns, setting, members, modifier)
    if fitted.result is None:
        message = f"A {setting.model} regression has no effects by level of “{modifier}” here."
        raise NotEstimableError("estimate-modification", message, "Plan another model, or fit each level.", "warning")
    repeated = len(fitted.matrix.columns) != len(patterns)
    people = patterns.moments.people
    lines = np.cumsum(people) - people if repeated else np.arange(len(patterns))
    spread = fitted.result.covariance
    return _Model(
        fitted.matrix,
        np.asarray(lines, dtype=np.intp),
        fitted.result.coefficients,
        lambda rows: np.asarray(rows @ spread @ rows.T),
        NORMAL_QUANTILE,
        [],
    )


def _pattern_model(patterns: Patterns, setting: Setting, members: Sequence[str], modifier: str) -> _Model:
    """A log-binomial model that does not settle is replaced as everywhere (Zou 2004)."""
    problem, _ = pose(patterns, setting, members)
    matrix = model_matrix(patterns, setting.exposure, setting.coding, setting.forms, members, modifier)
    _needs_both_levels(patterns, setting, matrix, modifier)
    matrix, said = without_collinearity(matrix, matrix.columns, patterns, setting)
    problem = replace(problem, matrix=matrix)
    regression = outcome_regression(problem)
    if setting.model == "log-binomial" and not regression.converged:
        message = f"The log-binomial model with products of “{setting.exposure}” and “{modifier}” did not converge, so"
        remedy = "Nothing needs to be done; say in the methods that it was used."
        message = f"{message} the modified Poisson model was fitted (Zou 2004)."
        said.append(Finding("estimate-log-binomial", message, remedy, "note"))
        problem = replace(problem, setting=in_place_of_log_binomial(setting))
        regression = outcome_regression(problem)
    if looks_separated(regression):
        message = f"The model with products of “{setting.exposure}” and “{modifier}” has no finite estimate."
        remedy = "Merge levels of the modifier with few rows."
        raise NotEstimableError("estimate-modification", message, remedy, "warning")

    def covariance(rows: Floats) -> Floats:
        if problem.setting.variance == "model":
            return np.asarray(rows @ regression.bread @ rows.T * dispersion(problem, regression))
        return joint_covariance(problem, [on_contrast(problem, regression, line) for line in rows])

    lines = np.arange(len(patterns), dtype=np.intp)
    return _Model(matrix, lines, regression.coefficients, covariance, quantile(problem), said)


def _needs_both_levels(patterns: Patterns, setting: Setting, matrix: ModelMatrix, modifier: str) -> None:
    """NotEstimableError where the rows leave the effect at one of the levels open, as where nobody there is exposed."""
    directions = null_directions(matrix.columns, patterns.rows.astype(np.float64))
    for level, place in zip(*places_of(patterns, setting, modifier), strict=True):
        contrast = matrix.exposed[place] - matrix.reference[place]
        if np.abs(contrast @ directions).max(initial=0.0) > _OPEN * np.abs(contrast).max():
            message = f"The rows with “{modifier}” = {level} do not tell what “{setting.exposure}” does there."
            remedy = "Merge this level with another, or leave it out of the population."
            raise NotEstimableError("estimate-modification", message, remedy, "warning")


def _products(patterns: Patterns, model: _Model, modifier: str) -> Floats:
    """Combinations of coefficients that are all zero exactly if the effect is the same at every value of the modifier.

    How the contrast differs between values of the modifier spans them; values in a few hundred places are enough.
    """
    _, first = np.unique(patterns.values[modifier].to_numpy(), return_index=True)
    matrix, first = model.matrix, model.lines[first]
    some = first[np.unique(np.linspace(0, len(first) - 1, min(len(first), _PLACES)).astype(int))]
    apart = matrix.exposed[some] - matrix.reference[some]
    _, sizes, directions = np.linalg.svd(apart - apart[0], full_matrices=False)
    kept = directions[sizes > _RANK_TOLERANCE * max(float(sizes[0]), 1e-300)]
    if not len(kept):
        message = f"The products of exposure and “{modifier}” say nothing new in these rows (collinearity)."
        raise NotEstimableError("estimate-modification", message, "Merge levels with few rows.", "warning")
    return np.asarray(kept)


def _joint(matrix: ModelMatrix, modifier: str, reference: int, place: int) -> tuple[Floats, Floats, Floats]:
    """Exposure alone, modifier alone, both, each against neither, other covariates alike."""
    own = np.array([owner == modifier for owner in matrix.variables])
    shift = np.where(own, matrix.reference[place] - matrix.reference[reference], 0.0)
    products = np.array([not covariate for covariate in matrix.covariates])
    # at the reference level of the exposure the products need not be zero, so they move with the modifier
    moved = np.where(products, matrix.reference[place] - matrix.reference[reference], 0.0)
    alone = matrix.exposed[reference] - matrix.reference[reference]
    other = shift + moved
    return alone, other, other + matrix.exposed[place] - matrix.reference[place]
