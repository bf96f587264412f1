"""Summaries of weights against the same on rows."""

from __future__ import annotations

import math

import numpy as np
import pytest

from adjustplan.estimate.diagnostics.weights import summarise_weights, weight_findings


@pytest.mark.parametrize("seed", range(25))
def test_patterns_give_what_rows_give_for_weights(seed):
    rng = np.random.default_rng(seed)
    patterns = int(rng.integers(1, 60))
    weights = np.round(rng.lognormal(0, 1, patterns), 2) + 0.01
    rows = rng.integers(0, 25, patterns).astype(float)
    rows[0] += 1
    each = np.repeat(weights, rows.astype(int))
    got = summarise_weights(weights, rows)
    few = math.ceil(len(each) / 100)
    assert got.people == len(each)
    assert got.mean == pytest.approx(each.mean())
    assert got.largest == each.max()
    assert got.held_by_one_percent == pytest.approx(np.sort(each)[-few:].sum() / each.sum())
    assert got.effective == pytest.approx(each.sum() ** 2 / np.sum(each**2))
    ordered = np.sort(each)
    assert got.percentile_99 == next(w for w in ordered if np.sum(each <= w) >= 0.99 * len(each))


def test_weights_that_are_all_alike_say_nothing():
    assert weight_findings(summarise_weights(np.full(7, 1.3), np.full(7, 90.0))) == ()


def test_few_people_with_most_of_the_weight_are_a_warning():
    # 990 people of weight 1 and 10 of weight 100: 1,000 of 1,990; Kish 1990² / (990 + 100,000)
    got = summarise_weights(np.array([1.0, 100]), np.array([990.0, 10]))
    assert got.held_by_one_percent == pytest.approx(1000 / 1990)
    assert got.effective == pytest.approx(1990**2 / 100990)
    assert (got.percentile_99, got.largest) == (1, 100)
    (finding,) = weight_findings(got)
    assert (finding.code, finding.severity) == ("estimate-extreme-weights", "warning")
    assert "1000 weighted people tell as much as 39 of equal weight" in finding.message
    assert "hold 50.3 % of all weight (largest 100, mean 1.99)" in finding.message


def test_one_reason_is_enough_for_a_warning():
    # Kish: 1110² / (990 + 1440) = 507, still over half of 1,000
    (finding,) = weight_findings(summarise_weights(np.array([1.0, 12]), np.array([990.0, 10])))
    assert finding.message == "The largest 1 % hold 10.8 % of all weight (largest 12, mean 1.11)."
    # 1700² / (900 + 6400) = 396, but nobody sticks out: 10 of 1,700
    (finding,) = weight_findings(summarise_weights(np.array([1.0, 8]), np.array([900.0, 100])))
    assert finding.message.startswith("1000 weighted people tell as much as 396 of equal weight (")


@pytest.mark.parametrize("weights", [[1.0, -1.0], [1.0, math.inf], [math.nan, 1.0], [0.0, 0.0]])
def test_impossible_weights_are_refused(weights):
    with pytest.raises(ValueError, match="finite and not negative"):
        summarise_weights(np.array(weights), np.ones(2))
