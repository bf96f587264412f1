"""Are the hazards proportional? One test for each variable of a Cox model.

A hazard ratio that changes over time is an average that depends on how long people were followed. The test asks whether
the residuals of each variable drift with time (Grambsch and Therneau 1994, Biometrika 81:515).
"""

from __future__ import annotations

import numpy as np

from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.section import NamedTest
from adjustplan.estimate.diagnostics.wald import WaldTest
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.results import p_text
from adjustplan.estimate.row_models import RowFit
from adjustplan.estimate.rows.hazards import proportional_hazards

SIGNIFICANT = 0.05
"""Below this p the hazards are said not to be proportional (common practice)."""


def proportional_tests(fitted: RowFit, exposure: str) -> tuple[tuple[NamedTest, ...] | None, tuple[Finding, ...]]:
    """The tests, the exposure's first, and what is to be said of them; None where the model is no Cox model."""
    if fitted.time is None or fitted.result is None:
        return None, ()
    tests: list[NamedTest] = []
    said: list[Finding] = []
    owners = np.array(fitted.matrix.variables)
    for name in dict.fromkeys([exposure, *fitted.matrix.variables]):
        places = [int(place) for place in np.flatnonzero(owners == name)]
        try:
            found = proportional_hazards(
                fitted.matrix.columns,
                fitted.time,
                fitted.event,
                fitted.result.coefficients,
                places,
                entry=fitted.entry,
                stratum=fitted.stratum,
                counts=fitted.counts,
            )
        except NotEstimableError as error:
            said.append(error.finding)
            continue
        tests.append(NamedTest(name, WaldTest(found.chi_square, found.freedom, found.p_value)))
        if found.p_value < SIGNIFICANT:
            said.append(_changes(name, found.p_value, exposure))
    return tuple(tests), tuple(dict.fromkeys(said))


def _changes(name: str, p: float, exposure: str) -> Finding:
    shown = p_text(p)
    if name == exposure:
        message = f"The hazard ratio of “{name}” changes over time ({shown}), so one number is an average over it."
        remedy = "Report risks at stated times, or hazard ratios by period of follow-up."
        return Finding("estimate-hazards", message, remedy, "warning")
    message = f"The hazard ratio of the covariate “{name}” changes over time ({shown})."
    remedy = f'State {name} = "stratum" in [analysis.forms], which gives each level a baseline of its own.'
    return Finding("estimate-hazards", message, remedy, "note")
