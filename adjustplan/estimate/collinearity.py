"""Columns that say what others say already: dropped among covariates, refused where the exposure is among them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from adjustplan.data import Floats, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.existence import independent_columns, null_directions, parts
from adjustplan.estimate.matrix import ModelMatrix
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting
from adjustplan.identify.showing import list_text


def without_collinearity(
    matrix: ModelMatrix, compared: Floats, patterns: Patterns, setting: Setting
) -> tuple[ModelMatrix, list[Finding]]:
    """Drop columns that say nothing new.

    Parameters
    ----------
    matrix : ModelMatrix
    compared : array of float, shape (rows, parameters)
        The columns as the model compares them: as they are, or less their means in each matched set or risk set.
    patterns : Patterns
        Whose people are in the rows.
    setting : Setting

    Raises
    ------
    NotEstimableError
        If the exposure itself says nothing new, or there are no more people than parameters.
    """
    weights = patterns.rows.astype(np.float64) if len(compared) == len(patterns) else np.ones(len(compared))
    said: list[Finding] = []
    directions = null_directions(compared, weights)
    exposure = setting.exposure
    if directions.shape[1]:
        names = _names(matrix, directions)
        contrasts = np.unique(matrix.exposed - matrix.reference, axis=0)
        if np.abs(contrasts @ directions).max() > 1e-8 * np.abs(contrasts).max():
            others = [name for name in names if name != exposure]
            message = f"“{exposure}” and {named(others)} determine each other in these rows (collinearity)."
            remedy = f"The data cannot tell their effects apart; take {named(others)} out or get other data."
            if not others:
                message = f"“{exposure}” does not vary among the people whom the model compares."
                remedy = "Ask whether the matching, or the strata, fixed it."
            raise NotEstimableError("estimate-collinear", message, remedy)
        message = f"{named(names)} say partly the same (collinearity), so columns without news were dropped."
        remedy = "The effect of the exposure is not touched by it, but one of them may be enough."
        if len(names) == 1:
            message = f"{named(names)} has columns that say nothing new (collinearity), so they were dropped."
            remedy = "The effect of the exposure is not touched by it."
        said.append(Finding("estimate-collinear", message, remedy, "warning"))
        matrix = matrix.keep(independent_columns(compared, weights))
    parameters, rows = matrix.columns.shape[1], patterns.people
    if rows <= parameters:
        message = f"The model has {parameters} parameters but only {rows} complete rows."
        raise NotEstimableError("estimate-few-rows", message, "Adjust for less, or state simpler forms.")
    return matrix, said


def named(names: Sequence[str]) -> str:
    """Variables in a sentence."""
    return list_text([f"“{name}”" for name in names] or ["the covariates"])


def _names(matrix: ModelMatrix, directions: np.ndarray) -> list[str]:
    """The variables that take part in these directions; the intercept is not one."""
    places = np.flatnonzero(parts(directions))
    return list(dict.fromkeys(name for name in (matrix.variables[place] for place in places) if name))
