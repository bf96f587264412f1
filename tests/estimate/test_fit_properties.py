"""What must hold whatever the data: order does not matter, k copies of everybody divide the variance by k."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from adjustplan.estimate import fit

MEASURES = ("mean difference", "odds ratio", "risk ratio")
WRITES_FILES = settings(deadline=None, max_examples=15, suppress_health_check=[HealthCheck.function_scoped_fixture])


def people(seed: int, count: int = 300) -> pd.DataFrame:
    """A well-behaved study."""
    random = np.random.default_rng(seed)
    age, site = random.integers(0, 6, count), random.choice(["east", "west"], count)
    night = random.random(count) < 0.3 + 0.05 * age
    diabetes = random.random(count) < 0.3 + 0.05 * age + 0.1 * night
    rows = pd.DataFrame({"age": age, "site": site, "night_work": night, "diabetes": diabetes})
    rows = rows.astype({"night_work": int, "diabetes": int})
    rows["glucose"] = random.normal(5, 1, count) + night
    return rows


def arguments(measure: str) -> dict[str, object]:
    outcome = {"diabetes": "glucose"} if measure == "mean difference" else {}
    return {"measure": measure, "columns": outcome, "variance": "robust"}


@WRITES_FILES
@given(seed=st.integers(0, 10**6), measure=st.sampled_from(MEASURES))
def test_the_order_of_the_rows_does_not_matter(write_plan, seed, measure):
    rows = people(seed)
    shuffled = rows.sample(frac=1, random_state=seed)
    one, other = (fit(write_plan(part, **arguments(measure))).adjusted[0] for part in (rows, shuffled))
    assert other.estimate == pytest.approx(one.estimate, rel=1e-12)
    assert other.standard_error == pytest.approx(one.standard_error, rel=1e-12)


@WRITES_FILES
@given(seed=st.integers(0, 10**6), measure=st.sampled_from(MEASURES), copies=st.integers(2, 7))
def test_copies_of_everybody_keep_the_estimate_and_divide_the_robust_variance(write_plan, seed, measure, copies):
    rows = people(seed)
    once = fit(write_plan(rows, **arguments(measure))).adjusted[0]
    often = fit(write_plan(pd.concat([rows] * copies), **arguments(measure))).adjusted[0]
    assert often.estimate == pytest.approx(once.estimate, rel=1e-9)
    assert often.standard_error * math.sqrt(copies) == pytest.approx(once.standard_error, rel=1e-9)


@WRITES_FILES
@given(seed=st.integers(0, 10**6), measure=st.sampled_from(MEASURES))
def test_swapping_the_contrast_turns_the_effect_around(write_plan, seed, measure):
    rows = people(seed)
    there = fit(write_plan(rows, contrast="{ exposed = 1, reference = 0 }", **arguments(measure))).adjusted[0]
    back = fit(write_plan(rows, contrast="{ exposed = 0, reference = 1 }", **arguments(measure))).adjusted[0]
    if measure == "mean difference":
        assert back.estimate == pytest.approx(-there.estimate, rel=1e-9)
        assert back.lower == pytest.approx(-there.upper, rel=1e-9)
    else:
        assert back.estimate == pytest.approx(1 / there.estimate, rel=1e-9)
        assert back.lower == pytest.approx(1 / there.upper, rel=1e-9)


@WRITES_FILES
@given(seed=st.integers(0, 10**6), measure=st.sampled_from(MEASURES))
def test_swapping_two_levels_of_a_covariate_changes_nothing(write_plan, seed, measure):
    rows = people(seed)
    renamed = rows.assign(site=rows["site"].map({"east": "west", "west": "east"}))
    one, other = (fit(write_plan(part, **arguments(measure))).adjusted[0] for part in (rows, renamed))
    assert other.estimate == pytest.approx(one.estimate, rel=1e-9)
    assert other.standard_error == pytest.approx(one.standard_error, rel=1e-9)
