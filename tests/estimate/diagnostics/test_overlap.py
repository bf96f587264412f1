"""Positivity and the common range of the propensity score, by hand and by enumeration."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.estimate.diagnostics.overlap import (
    SMALLEST_COUNT,
    overlap_findings,
    positivity,
    positivity_findings,
    score_overlap,
)


def test_strata_that_lack_a_group_are_counted_with_their_people():
    # strata 0: both; 1: exposed only; 2: reference only, twice; 3: a third group only; 4: exposed without people
    strata = np.array([0, 0, 1, 2, 2, 3, 4])
    group = np.array([1, 0, 1, 0, 0, 2, 1])
    rows = np.array([5.0, 7, 11, 2, 3, 100, 0])
    got = positivity(strata, group == 1, group == 0, rows)
    assert (got.strata, got.people) == (3, 28)
    assert (got.without_reference, got.people_without_reference) == (1, 11)
    assert (got.without_exposed, got.people_without_exposed) == (1, 5)
    (finding,) = positivity_findings(got)
    assert (finding.code, finding.severity) == ("estimate-positivity", "warning")
    assert "2 of 3 strata" in finding.message
    assert "16 of 28 people (57.1 %)" in finding.message


def test_full_overlap_says_nothing():
    strata, exposed = np.array([0, 0, 1, 1]), np.array([True, False, True, False])
    assert positivity_findings(positivity(strata, exposed, ~exposed, np.ones(4))) == ()
    assert overlap_findings(score_overlap(np.array([0.2, 0.2, 0.7, 0.7]), exposed, ~exposed, np.full(4, 9.0))) == ()


def test_people_outside_the_common_range_are_counted():
    score = np.array([0.05, 0.3, 0.6, 0.3, 0.6, 0.9])
    exposed = np.array([False, False, False, True, True, True])
    got = score_overlap(score, exposed, ~exposed, np.array([40.0, 50, 10, 20, 30, 6]), bins=10)
    assert (got.exposed_range, got.reference_range) == ((0.3, 0.9), (0.05, 0.6))
    assert (got.outside, got.people) == (46, 156)
    (finding,) = overlap_findings(got)
    assert finding.severity == "warning"
    assert "46 of 156 people (29.5 %)" in finding.message


def test_a_few_people_outside_are_a_note():
    score = np.array([0.3, 0.3, 0.31])
    exposed = np.array([True, False, False])
    (finding,) = overlap_findings(score_overlap(score, exposed, ~exposed, np.array([100.0, 100, 1])))
    assert finding.severity == "note"


def test_bins_with_few_people_are_merged():
    # tenths: 3 exposed in the first, 7 in the second, nobody till the ninth
    score = np.array([0.05, 0.15, 0.15, 0.85])
    exposed = np.array([True, True, False, False])
    got = score_overlap(score, exposed, ~exposed, np.array([3.0, 7, 20, 6]), bins=10)
    assert got.edges[:2] == pytest.approx((0, 0.2))
    assert got.exposed[0] == 10
    assert got.reference[0] == 20
    assert sum(got.exposed[1:]) == 0
    assert sum(got.reference[1:]) == 6


def test_a_group_smaller_than_the_smallest_count_is_not_drawn():
    exposed = np.array([True, False])
    got = score_overlap(np.array([0.2, 0.2]), exposed, ~exposed, np.array([3.0, 100]))
    assert (got.edges, got.exposed, got.reference) == ((), (), ())
    assert got.outside == 0


@settings(max_examples=200, deadline=None)
@given(
    st.lists(
        st.tuples(st.integers(0, 40), st.booleans(), st.integers(0, 12)),
        min_size=2,
        max_size=30,
    )
)
def test_no_bin_shows_a_small_count_and_nobody_is_lost(cells):
    score = np.array([place / 40 for place, _, _ in cells])
    exposed = np.array([group for _, group, _ in cells])
    rows = np.array([count for _, _, count in cells], float)
    totals = rows[exposed].sum(), rows[~exposed].sum()
    if not all(totals):
        with pytest.raises(ValueError, match="both groups"):
            score_overlap(score, exposed, ~exposed, rows)
        return
    got = score_overlap(score, exposed, ~exposed, rows, bins=8)
    if min(totals) < SMALLEST_COUNT:
        assert got.edges == ()
        return
    for shown, group in ((got.exposed, exposed), (got.reference, ~exposed)):
        assert all(count == 0 or count >= SMALLEST_COUNT for count in shown)
        again, _ = np.histogram(score[group], np.array(got.edges), weights=rows[group])
        assert list(again) == list(shown)
    assert (got.edges[0], got.edges[-1]) == (0, 1)
    assert list(got.edges) == sorted(set(got.edges))


@pytest.mark.parametrize("score", [[0.2, 1.2], [-0.1, 0.5], [np.nan, 0.5]])
def test_what_is_no_probability_is_refused(score):
    exposed = np.array([True, False])
    with pytest.raises(ValueError, match="between 0 and 1"):
        score_overlap(np.array(score), exposed, ~exposed, np.ones(2))
