"""The numbers of a plan's own set, and whether they are those of a reference on rows."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.stats import norm

from adjustplan.estimate.loading import load
from adjustplan.estimate.modelling import estimate_effect
from adjustplan.plan import Plan
from adjustplan.study import SCALES


def numbers_of(plan: Plan) -> np.ndarray:
    """Estimate, standard error and interval of the planned set, logarithms for ratios."""
    loaded = load(plan, 0)
    complete = loaded.patterns.complete(["night_work", *plan.adjustment.members])
    modelled = estimate_effect(complete, loaded.setting, loaded.sets[0].members)
    found = modelled.estimate
    assert found is not None, modelled.findings
    numbers = [found.estimate, found.lower, found.upper]
    if SCALES[plan.analysis.measure] != "difference":
        numbers = [math.log(number) for number in numbers]
    return np.array([numbers[0], found.standard_error, *numbers[1:]])


def agree(found: np.ndarray, value: float, error: float, quantile: float = norm.ppf(0.975)) -> None:
    """Whether estimate, standard error and interval are these."""
    assert found[0] == pytest.approx(value, rel=1e-8)
    assert found[1] == pytest.approx(error, rel=1e-7)
    assert found[2:] == pytest.approx([value - quantile * error, value + quantile * error], rel=1e-7, abs=1e-8)
