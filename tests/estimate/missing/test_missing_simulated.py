"""Simulated studies with a planted effect: complete cases are biased, imputation and weighting are not.

The outcome is y = x + c + e with a standard normal e; a confounder c is missing with a probability that depends on
the outcome and the exposure, so that people with everything known are not like the others.
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from numpy.typing import NDArray

from adjustplan.estimate.missing import (
    check_traces,
    complete_weights,
    completeness_design,
    impute,
    pool_estimates,
    prepare,
)

Floats = NDArray[np.float64]
EFFECT = 1.0


def study(people: int, random: np.random.Generator, *, binary: bool, how: str = "strongly") -> pd.DataFrame:
    """One study; c is 0/1 or normal, and is missing in about 40 %."""
    c = (random.random(people) < 0.4).astype(float) if binary else np.round(random.normal(size=people), 3)
    x = (random.random(people) < 1 / (1 + np.exp(0.5 - c))).astype(float)
    y = EFFECT * x + c + random.normal(size=people)
    log_odds = {"at random": -0.4 + 0 * y, "mildly": 0.5 * y - 0.8, "strongly": 1.2 * y + 0.5 * x - 1.5}[how]
    return pd.DataFrame({"x": x, "c": np.where(random.random(people) < 1 / (1 + np.exp(-log_odds)), np.nan, c), "y": y})


def slope(rows: pd.DataFrame, weights: Floats) -> tuple[float, float]:
    """The adjusted coefficient of the exposure by (weighted) least squares, and its model-based variance."""
    columns = np.column_stack([np.ones(len(rows)), rows["x"], rows["c"]])
    y = rows["y"].to_numpy()
    bread = np.linalg.inv(columns.T @ (columns * weights[:, None]))
    beta = bread @ (columns.T @ (weights * y))
    scale = float(weights @ (y - columns @ beta) ** 2) / (weights.sum() - 3)
    return float(beta[1]), float(scale * bread[1, 1])


def imputed_slope(
    rows: pd.DataFrame, copies: int, seed: int, normal: tuple[str, ...] = ()
) -> tuple[float, float, float, float]:
    """Pooled estimate, standard error and interval."""
    entries = {"x": "category", "c": "linear", "y": "linear"}
    data = prepare(rows, np.ones(len(rows), dtype=int), entries, normal=normal)  # type: ignore[arg-type]
    found = [slope(copy.values, copy.counts.astype(float)) for copy in impute(data, copies, 5, seed)]
    pooled = pool_estimates(*zip(*found, strict=True), complete_freedom=len(rows) - 3)
    return pooled.estimate, pooled.standard_error, pooled.lower, pooled.upper


@pytest.mark.parametrize("binary", [True, False])
def test_missing_at_random_biases_complete_cases_but_not_imputation_nor_weighting(binary: bool) -> None:
    rows = study(20_000, np.random.default_rng(1), binary=binary)
    known = rows[rows["c"].notna()]
    naive, naive_variance = slope(known, np.ones(len(known)))
    assert abs(naive - EFFECT) > 8 * math.sqrt(naive_variance)
    estimate, error, _, _ = imputed_slope(rows, 10, seed=2)
    assert abs(estimate - EFFECT) < 4 * error
    assert error < 0.03  # so that the bias of complete cases would be seen
    assert abs(naive - EFFECT) > 4 * error

    ones, complete = np.ones(len(rows), dtype=int), rows["c"].notna().to_numpy()
    found = complete_weights(completeness_design(rows, ones, {"x": "category", "y": "linear"}), ones, complete)
    weighted, _ = slope(known, found.weights[complete])
    columns = np.column_stack([np.ones(len(known)), known["x"], known["c"]])
    inside = found.weights[complete]
    bread = np.linalg.inv(columns.T @ (columns * inside[:, None]))
    y = known["y"].to_numpy()
    beta = bread @ (columns.T @ (inside * y))
    influence = np.zeros(len(rows))
    influence[complete] = (columns @ bread)[:, 1] * inside * (y - columns @ beta)
    influence -= found.learnt(influence)
    spread = math.sqrt(influence @ influence)
    assert abs(weighted - EFFECT) < 4 * spread
    assert abs(naive - EFFECT) > 4 * spread


@pytest.mark.parametrize(
    ("binary", "how", "normal"),
    [(True, "strongly", ()), (False, "mildly", ()), (False, "strongly", ("c",))],
    ids=["classes", "matched", "normal"],
)
def test_imputed_intervals_hold_the_planted_effect(binary: bool, how: str, normal: tuple[str, ...]) -> None:
    """200 studies of 300 people; bounds are four (binomial) standard errors."""
    random = np.random.default_rng(3)
    studies = [study(300, random, binary=binary, how=how) for _ in range(200)]
    results = np.array([imputed_slope(rows, 5, seed, normal) for seed, rows in enumerate(studies)])
    estimate, error, lower, upper = results.T
    assert abs(estimate.mean() - EFFECT) < 4 * estimate.std() / math.sqrt(200)
    held = ((lower < EFFECT) & (upper > EFFECT)).mean()
    assert abs(held - 0.95) < 4 * math.sqrt(0.95 * 0.05 / 200)
    assert error.mean() == pytest.approx(estimate.std(), rel=4 / math.sqrt(2 * 200))


def test_matching_says_when_its_donors_are_far_away() -> None:
    """Where nearly everybody at one end lacks the value, matching is biased; it must not be so in silence.

    In 60 studies of 300 people the bias is beyond doubt (van Buuren 2018, section 3.4.4, warns of it).
    """
    random = np.random.default_rng(4)
    entries = {"x": "category", "c": "linear", "y": "linear"}
    ones = np.ones(300, dtype=int)
    estimates, warned = [], 0
    for seed in range(60):
        rows = study(300, random, binary=False)
        data = prepare(rows, ones, entries)  # type: ignore[arg-type]
        copies = list(impute(data, 5, 5, seed))
        estimates.append(np.mean([slope(copy.values, copy.counts.astype(float))[0] for copy in copies]))
        findings = list(check_traces(data, [copy.trace for copy in copies]))
        warned += [finding.code for finding in findings] == ["impute-far-donors"]
    assert np.mean(estimates) - EFFECT > 3 * np.std(estimates) / math.sqrt(60)
    assert warned == 60
    large = study(3000, random, binary=False, how="at random")
    data = prepare(large, np.ones(3000, dtype=int), entries)  # type: ignore[arg-type]
    assert not list(check_traces(data, [copy.trace for copy in impute(data, 5, 5, 1)]))


def test_missing_completely_at_random_leaves_means_as_they_are() -> None:
    random = np.random.default_rng(5)
    rows = study(5000, random, binary=False, how="at random")
    data = prepare(rows, np.ones(5000, dtype=int), {"x": "category", "c": "linear", "y": "linear"})
    copies = list(impute(data, 20, 5, seed=6))
    means = [float(np.average(copy.values["c"], weights=copy.counts)) for copy in copies]
    variance = np.mean([np.cov(copy.values["c"], fweights=copy.counts) / 5000 for copy in copies])
    pooled = pool_estimates(means, np.full(20, variance))
    assert abs(pooled.estimate) < 4 * pooled.standard_error
    assert pooled.standard_error < 1 / math.sqrt((~rows["c"].isna()).sum())  # y and x tell something of c
    squares = [float(np.average(copy.values["c"] ** 2, weights=copy.counts)) for copy in copies]
    assert abs(np.mean(squares) - 1) < 4 * math.sqrt(2 / 3000)
