"""Whatever the numbers, the result is text and JSON without a number that is none, or a finding says why not."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from stress_plans import plan_with

from adjustplan.estimate.stress import Observed, TwoByTwo, Yardstick, stress
from adjustplan.study import MEASURES, Measure

ASSUMED = """
[stress]
draws = 100
{target}
[[stress.confounder]]
name = "chronotype"
with_exposure = 1000
with_outcome = 1000
[[stress.binary_confounder]]
name = "by ratio"
among_exposed = {{ low = 0.0, high = 1.0 }}
among_reference = {{ mean = 0.0, sd = 0.5 }}
outcome_ratio = {{ mean = 1.0, sd = 3.0 }}
[[stress.binary_confounder]]
name = "by difference"
among_exposed = 1
among_reference = 0
outcome_difference = {{ mean = 0.0, sd = 10.0 }}
[[stress.misclassified_exposure]]
name = "rota"
sensitivity = {{ low = 0.0, high = 1.0 }}
specificity = {{ low = 0.0, high = 1.0 }}
[[stress.misclassified_outcome]]
name = "register"
sensitivity = {{ low = 0.0, high = 1.0 }}
specificity = {{ low = 0.0, high = 1.0 }}
[[stress.selection]]
name = "reply"
exposed_with_outcome = {{ low = 0.0, high = 1.0 }}
exposed_without_outcome = 0
reference_with_outcome = 0.5
reference_without_outcome = 1
[[stress.linear_confounder]]
name = "mild"
share_of_exposure = 0.999
share_of_outcome = 1
"""


def drawn(measure: Measure, rng: np.random.Generator) -> Observed:
    """An estimate, from plausible to absurd, with more or less known around it."""
    spread = float(rng.choice([0.1, 1.0, 20.0]))
    centre, error = rng.normal(0, spread), abs(rng.normal(0, spread / 4)) * float(rng.choice([0.0, 1.0, 1.0]))
    ends = [centre, centre - 1.96 * error, centre + 1.96 * error]
    extra: dict[str, Any] = {}
    if measure.endswith("difference") and measure != "mean difference":
        first, second = rng.uniform(0, 1, 2)
        ends = [first - second, first - second - 1.96 * error, first - second + 1.96 * error]
        extra["risks"] = (float(first), float(second)) if rng.random() < 0.7 else None
        extra["sizes"] = (float(rng.uniform(1, 1e4)), float(rng.uniform(1, 1e4))) if rng.random() < 0.5 else None
    elif measure != "mean difference":
        ends = [math.exp(each) for each in ends]
    else:
        extra["outcome_sd"] = float(rng.choice([0.5, 1e-9, 0.0]))
        extra["degrees_of_freedom"] = float(rng.choice([1.0, 2.0, 500.0]))
    if rng.random() < 0.7:
        extra["table"] = TwoByTwo(*(float(cell) for cell in rng.integers(0, rng.choice([2, 50, 10**6]), 4)))
    if rng.random() < 0.7:
        extra["yardsticks"] = {
            "age": Yardstick(float(ends[0]), 0.4, 0.9),
            "depot": Yardstick(float(ends[1]), None, 0.1),
        }
    return Observed(measure, *map(float, ends), float(error), **extra)


@pytest.mark.parametrize("measure", MEASURES)
def test_no_number_is_made_up_and_nothing_breaks(tmp_path: Path, measure: Measure) -> None:
    rng = np.random.default_rng(MEASURES.index(measure))
    plan = plan_with(tmp_path, ASSUMED.format(target=""), measure=measure)
    moved = plan_with(tmp_path, ASSUMED.format(target="target = 0.5"), measure=measure)
    answered = 0
    for turn in range(60):
        observed = drawn(measure, rng)
        told = stress(moved if turn % 3 == 0 else plan, observed)
        text = str(told)
        json.dumps(told.to_dict(), allow_nan=False)
        assert "nan" not in text.split()
        assert "inf" not in text
        assert told.findings
        assert told.confounding is not None or any(each.code == "stress-no-conversion" for each in told.findings)
        if told.confounding is not None:
            answered += 1
            value = told.confounding.evalue
            assert all(each is None or each >= 1 for each in (value.estimate, value.limit))
            if value.estimate is not None and value.limit is not None:
                assert value.limit <= value.estimate * (1 + 1e-9)
    assert answered > 10
