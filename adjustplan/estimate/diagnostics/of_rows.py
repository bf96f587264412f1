"""Influence and linearity for models on rows: Cox, conditional logistic and negative binomial regression."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from adjustplan.data import Patterns
from adjustplan.estimate.diagnostics.curves import CURVE, FEWEST_VALUES
from adjustplan.estimate.diagnostics.leaving_out import LeavingOut
from adjustplan.estimate.diagnostics.linearity import Departure, departure_from_linearity
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.row_models import RowFit, fit_rows


def leaving_out_row(fitted: RowFit) -> LeavingOut:
    """The largest change by one person (in a conditional logistic model: by one matched set), in standard errors.

    Raises
    ------
    NotEstimableError
        Never; a model without influences has none to ask for.
    """
    assert fitted.result is not None
    moved = float(np.abs(fitted.result.influence @ fitted.matrix.contrast).max()) / fitted.standard_error
    return LeavingOut(moved, moved)


def departures_of_rows(
    patterns: Patterns, setting: Setting, members: tuple[str, ...], fitted: RowFit
) -> dict[str, Callable[[], Departure]]:
    """For each covariate that enters as a straight line, what tests whether a curve fits better."""
    kept = set(fitted.matrix.variables)
    lines = [
        name
        for name in members
        if setting.forms[name] == "linear" and name in kept and len(patterns.levels(name)) >= FEWEST_VALUES
    ]
    return {name: _test(patterns, setting, members, fitted, name) for name in lines}


def _test(
    patterns: Patterns, setting: Setting, members: tuple[str, ...], fitted: RowFit, name: str
) -> Callable[[], Departure]:
    def test() -> Departure:
        curved = fit_rows(patterns, replace(setting, forms={**setting.forms, name: CURVE}), members)
        if curved.result is None:
            message = "The model with a curve has no covariance."
            raise NotEstimableError("estimate-diagnostic", message, "Nothing needs to be done.", "note")
        places = np.flatnonzero(np.array(curved.matrix.variables) == name)
        values = patterns.values[name].to_numpy(dtype=np.float64)
        if len(curved.matrix.columns) != len(values):
            values = np.repeat(values, patterns.moments.people)
        shift = (curved.value - fitted.value) / fitted.standard_error
        return departure_from_linearity(
            name,
            values,
            curved.matrix.columns[:, places],
            curved.result.coefficients[places],
            curved.result.covariance[np.ix_(places, places)],
            shift,
        )

    return test
