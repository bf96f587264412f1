"""A 2×2 table has its estimates in closed form, and so has a difference of two means.

Notation of the textbooks: among the exposed, a have the outcome and b do not; among the unexposed, c and d.
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from adjustplan.estimate import fit

A, B, C, D = 60, 140, 45, 355
NORMAL = stats.norm.ppf(0.975)


def table(a: int = A, b: int = B, c: int = C, d: int = D) -> pd.DataFrame:
    """One row per person."""
    counts = [((1, 1), a), ((1, 0), b), ((0, 1), c), ((0, 0), d)]
    rows = [cell for cell, count in counts for _ in range(count)]
    return pd.DataFrame(rows, columns=["night_work", "diabetes"])


def test_the_crude_odds_ratio_is_the_cross_product_with_woolfs_standard_error(write_plan):
    # Woolf (1955): var(log OR) = 1/a + 1/b + 1/c + 1/d
    crude = fit(write_plan(table(), members=(), edges="night_work -> diabetes")).crude
    ratio = A * D / (B * C)
    error = math.sqrt(1 / A + 1 / B + 1 / C + 1 / D)
    assert crude.estimate == pytest.approx(ratio, rel=1e-10)
    assert crude.standard_error == pytest.approx(error, rel=1e-10)
    assert crude.lower == pytest.approx(ratio * math.exp(-NORMAL * error), rel=1e-10)
    assert crude.upper == pytest.approx(ratio * math.exp(NORMAL * error), rel=1e-10)


def test_the_crude_risk_ratio_has_the_binomial_standard_error_when_robust(write_plan):
    # Zou (2004): in a 2×2 table the robust variance is 1/a - 1/(a+b) + 1/c - 1/(c+d)
    crude = fit(write_plan(table(), measure="risk ratio", members=(), edges="night_work -> diabetes")).crude
    assert crude.estimate == pytest.approx((A / (A + B)) / (C / (C + D)), rel=1e-10)
    error = math.sqrt(1 / A - 1 / (A + B) + 1 / C - 1 / (C + D))
    assert crude.standard_error == pytest.approx(error, rel=1e-10)


def test_the_crude_risk_ratio_has_the_poisson_standard_error_when_asked_for(write_plan):
    # Two Poisson counts: var(log RR) = 1/a + 1/c
    settings = {"measure": "risk ratio", "members": (), "edges": "night_work -> diabetes"}
    crude = fit(write_plan(table(), variance="model", **settings)).crude
    assert crude.standard_error == pytest.approx(math.sqrt(1 / A + 1 / C), rel=1e-10)


def test_the_crude_mean_difference_is_students_two_sample_comparison(write_plan):
    random = np.random.default_rng(7)
    exposed, unexposed = random.normal(6, 1, 80), random.normal(5, 2, 120)
    rows = pd.DataFrame({"night_work": [1] * 80 + [0] * 120, "diabetes": np.concatenate([exposed, unexposed])})
    settings = {"measure": "mean difference", "members": (), "edges": "night_work -> diabetes"}
    crude = fit(write_plan(rows, **settings)).crude
    student = stats.ttest_ind(exposed, unexposed, equal_var=True).confidence_interval(0.95)
    assert crude.estimate == pytest.approx(exposed.mean() - unexposed.mean(), rel=1e-10)
    assert (crude.lower, crude.upper) == pytest.approx((student.low, student.high), rel=1e-10)
    robust = fit(write_plan(rows, variance="robust", **settings)).crude
    # White (1980), HC0: each group's own variance, divided by n and not by n - 1
    error = math.sqrt(exposed.var() / 80 + unexposed.var() / 120)
    assert robust.standard_error == pytest.approx(error, rel=1e-10)


def test_adjusting_a_mean_difference_for_a_category_weighs_the_strata_by_their_information(write_plan):
    # Least squares with stratum indicators: each stratum's difference has the weight n1 n0 / (n1 + n0)
    random = np.random.default_rng(8)
    site = np.repeat(["east", "west"], [90, 60])
    night = (random.random(150) < np.where(site == "east", 0.3, 0.7)).astype(int)
    rows = pd.DataFrame({"site": site, "night_work": night, "diabetes": random.normal(5, 1, 150) + night})
    edges = "site -> night_work -> diabetes\nsite -> diabetes"
    got = fit(write_plan(rows, measure="mean difference", members=("site",), edges=edges)).adjusted[0].estimate
    total = weights = 0.0
    for _, stratum in rows.groupby("site"):
        groups = [stratum.loc[stratum["night_work"] == level, "diabetes"] for level in (1, 0)]
        weight = len(groups[0]) * len(groups[1]) / len(stratum)
        total += weight * (groups[0].mean() - groups[1].mean())
        weights += weight
    assert got == pytest.approx(total / weights, rel=1e-10)
