"""Standardised mean differences and effective sample sizes, by hand and from rows."""

from __future__ import annotations

import math

import numpy as np
import pytest
from statsmodels.stats.weightstats import DescrStatsW

from adjustplan.estimate.diagnostics.balance import balance, balance_findings, effective_size


def test_an_indicator_is_measured_in_binomial_standard_deviations():
    # 30 of 100 exposed and 10 of 50 reference people have it: 0.1 / sqrt((0.3 0.7 + 0.2 0.8) / 2), by hand
    column = np.array([[1.0], [0.0], [1.0], [0.0]])
    exposed = np.array([True, True, False, False])
    got = balance(column, ["site"], exposed, ~exposed, np.array([30.0, 70, 10, 40]))
    assert got.differences[0].before == pytest.approx(0.1 / math.sqrt(0.185), rel=1e-12)
    assert got.differences[0].after is None
    assert (got.effective_exposed, got.effective_reference) == (100, 50)
    (finding,) = balance_findings(got)
    assert (finding.code, finding.severity) == ("estimate-imbalance", "note")
    assert "1 of 1 columns, most in “site” (0.23)" in finding.message


@pytest.fixture
def people():
    rng = np.random.default_rng(2)
    patterns = 60
    columns = np.column_stack([rng.normal(50, 9, patterns), rng.integers(0, 2, patterns), rng.normal(0, 1, patterns)])
    columns[:, 2] = 1e6 + columns[:, 2]
    rows = rng.integers(1, 30, patterns).astype(float)
    group = rng.integers(0, 3, patterns)
    return columns, rows, group == 1, group == 0, rng.uniform(0.5, 4, patterns)


def test_patterns_give_what_rows_give(people):
    columns, rows, exposed, reference, weights = people
    names = ["age", "site", "day"]
    got = balance(columns, names, exposed, reference, rows, weights)
    count = rows.astype(int)
    for place, difference in enumerate(got.differences):
        a, b = (np.repeat(columns[group, place], count[group]) for group in (exposed, reference))
        wa, wb = (np.repeat(weights[group], count[group]) for group in (exposed, reference))
        variances = [x.mean() * (1 - x.mean()) if place == 1 else x.var(ddof=1) for x in (a, b)]
        size = math.sqrt(sum(variances) / 2)
        assert difference.name == names[place]
        assert difference.before == pytest.approx((a.mean() - b.mean()) / size, rel=1e-6)
        after = (DescrStatsW(a, wa).mean - DescrStatsW(b, wb).mean) / size
        assert difference.after == pytest.approx(after, rel=1e-6)
    assert got.largest == pytest.approx(max(abs(row.after) for row in got.differences))
    assert got.effective_exposed == pytest.approx(wa_size(weights, count, exposed))
    assert got.effective_reference == pytest.approx(wa_size(weights, count, reference))


def wa_size(weights, count, group):
    each = np.repeat(weights[group], count[group])
    return each.sum() ** 2 / np.sum(each**2)


def test_a_change_of_unit_changes_no_difference(people):
    columns, rows, exposed, reference, weights = people
    other = columns * np.array([12.0, 1.0, 1e-3]) + np.array([-7.0, 0.0, 4.0])
    names = ["age", "site", "day"]
    a = balance(columns, names, exposed, reference, rows, weights)
    b = balance(other, names, exposed, reference, rows, weights)
    for one, two in zip(a.differences, b.differences, strict=True):
        assert (one.before, one.after) == pytest.approx((two.before, two.after), rel=1e-6)


def test_weights_by_the_true_propensity_balance_exactly():
    # two sites; 20 of 100 exposed in the first and 60 of 80 in the second
    site = np.array([0.0, 0.0, 1.0, 1.0])
    exposed = np.array([True, False, True, False])
    rows = np.array([20.0, 80, 60, 20])
    weights = 1 / np.array([0.2, 0.8, 0.75, 0.25])
    got = balance(site[:, None], ["site"], exposed, ~exposed, rows, weights)
    assert got.differences[0].before == pytest.approx((0.75 - 0.2) / math.sqrt((0.75 * 0.25 + 0.2 * 0.8) / 2))
    assert got.differences[0].after == pytest.approx(0, abs=1e-12)
    assert balance_findings(got) == ()


def test_imbalance_after_weighting_is_a_warning():
    column = np.array([[1.0], [0.0], [1.0], [0.0]])
    exposed = np.array([True, True, False, False])
    got = balance(column, ["site"], exposed, ~exposed, np.array([30.0, 70, 10, 40]), np.array([2.0, 1, 1, 1]))
    (finding,) = balance_findings(got)
    assert finding.severity == "warning"
    # (60/130 - 0.2) / sqrt(0.185), by hand
    assert "(0.61)" in finding.message
    assert "After weighting" in finding.message


def test_a_column_that_never_varies_within_a_group_has_no_standard_deviation():
    columns = np.column_stack([[1.0, 1, 0, 0], [3.0, 3, 3, 3]])
    exposed = np.array([True, True, False, False])
    got = balance(columns, ["ward", "year"], exposed, ~exposed, np.ones(4))
    assert got.differences[0].before is None
    assert got.differences[0].constant
    assert got.differences[1].before == 0
    (finding,) = balance_findings(got)
    assert finding.severity == "warning"
    assert "“ward”" in finding.message
    assert got.largest == 0


def test_equal_weights_lose_nobody_and_one_heavy_person_all_others():
    rows = np.array([10.0, 30])
    assert effective_size(np.array([2.5, 2.5]), rows) == pytest.approx(40)
    assert effective_size(np.array([1e9, 1.0]), np.array([1.0, 40])) == pytest.approx(1, abs=1e-6)
    # Kish by hand: (10·1 + 30·3)² / (10·1 + 30·9) = 10000 / 280
    assert effective_size(np.array([1.0, 3]), rows) == pytest.approx(10000 / 280)


def test_balance_needs_two_groups():
    with pytest.raises(ValueError, match="both groups"):
        balance(np.ones((2, 1)), ["a"], np.array([True, True]), np.array([False, False]), np.ones(2))
    exposed = np.array([True, False])
    for weights in ([1.0, 0.0], [1.0, np.nan]):
        with pytest.raises(ValueError, match="finite weights"):
            balance(np.ones((2, 1)), ["a"], exposed, ~exposed, np.ones(2), np.array(weights))
