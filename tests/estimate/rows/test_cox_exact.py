"""Cox models against the likelihood written out by hand, and against exact identities."""

from __future__ import annotations

from functools import partial

import numpy as np
import pytest
from brute_partial_likelihood import gradient, hessian, log_likelihood, maximum, small_study
from scipy.optimize import linprog
from statsmodels.duration.hazard_regression import PHReg

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows import columns_within_risk_sets, cox
from adjustplan.estimate.rows.partial_likelihood import draws, partial_likelihood
from adjustplan.estimate.rows.risk_sets import risk_sets

DESIGNS = [(ties, strata, late) for ties in ("efron", "breslow") for strata in (1, 2) for late in (False, True)]


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize(("ties", "strata", "late"), DESIGNS)
def test_coefficients_and_variance_are_those_of_the_likelihood_written_out(ties, strata, late, seed):
    columns, time, event, entry, stratum = small_study(seed, strata=strata, late=late)
    weights = np.random.default_rng(seed + 100).uniform(0.5, 2, len(time)) if seed == 2 else None

    def by_hand(beta):
        return log_likelihood(beta, columns, time, event, entry=entry, stratum=stratum, ties=ties, weights=weights)

    got = cox(columns, time, event, entry=entry, stratum=stratum, ties=ties, weights=weights)
    assert got.coefficients == pytest.approx(maximum(by_hand, 2), rel=1e-6, abs=1e-6)
    assert np.linalg.inv(got.covariance) == pytest.approx(-hessian(by_hand, got.coefficients), rel=1e-5, abs=1e-5)
    assert got.log_likelihood == pytest.approx(by_hand(got.coefficients), rel=1e-12)


@pytest.mark.parametrize(("ties", "strata", "late"), DESIGNS)
def test_a_rows_influence_is_how_the_coefficients_move_with_its_weight(ties, strata, late):
    columns, time, event, entry, stratum = small_study(11, strata=strata, late=late)
    got = cox(columns, time, event, entry=entry, stratum=stratum, ties=ties, variance="robust")

    def score(row, change):
        weights = np.ones(len(time))
        weights[row] += change
        return gradient(
            lambda beta: log_likelihood(
                beta, columns, time, event, entry=entry, stratum=stratum, ties=ties, weights=weights
            ),
            got.coefficients,
        )

    moved = np.array([(score(row, 1e-3) - score(row, -1e-3)) / 2e-3 for row in range(len(time))])
    second = -hessian(
        lambda beta: log_likelihood(beta, columns, time, event, entry=entry, stratum=stratum, ties=ties),
        got.coefficients,
    )
    by_hand = np.linalg.solve(second, moved.T).T
    assert got.influence == pytest.approx(by_hand, abs=2e-5)
    assert got.covariance == pytest.approx(by_hand.T @ by_hand, abs=2e-5)


@pytest.mark.parametrize("ties", ["efron", "breslow"])
def test_statsmodels_gives_the_same_where_nobody_enters_at_the_moment_of_an_event(ties):
    rng = np.random.default_rng(5)
    columns = rng.normal(size=(400, 4))
    time, event = rng.integers(10, 60, 400).astype(float), rng.random(400) < 0.5
    entry, stratum = rng.integers(0, 9, 400) + 0.5, rng.integers(0, 7, 400)
    theirs = PHReg(time, columns, status=event.astype(int), entry=entry, strata=stratum, ties=ties).fit()
    ours = cox(columns, time, event, entry=entry, stratum=stratum, ties=ties)
    assert ours.coefficients == pytest.approx(theirs.params, abs=1e-7)
    assert ours.covariance == pytest.approx(theirs.cov_params(), rel=1e-6, abs=1e-9)
    assert ours.log_likelihood == pytest.approx(theirs.llf, rel=1e-10)


def test_statsmodels_gives_the_same_cluster_robust_variance_under_breslow_ties():
    # under Efron's ties its score residuals remain Breslow's, so it can only be a witness here
    rng = np.random.default_rng(6)
    columns, cluster = rng.normal(size=(300, 3)), rng.integers(0, 40, 300)
    time, event = rng.integers(1, 30, 300).astype(float), rng.random(300) < 0.6
    theirs = PHReg(time, columns, status=event.astype(int), ties="breslow").fit(groups=cluster)
    ours = cox(columns, time, event, ties="breslow", variance="cluster", cluster=cluster)
    assert ours.covariance == pytest.approx(theirs.cov_params(), rel=1e-6, abs=1e-10)


def test_somebody_who_enters_at_the_moment_of_an_event_is_not_yet_at_risk():
    # two people at risk at time 2 and two at time 4: the likelihood is r/(1+r) · 1/(1+r), greatest at r = 1
    columns = np.array([[1.0], [0.0], [1.0], [0.0]])
    time, event = np.array([2.0, 2.5, 5.0, 4.0]), np.array([1, 0, 0, 1])
    entry = np.array([0.0, 0.0, 2.0, 2.0])
    assert cox(columns, time, event, entry=entry).coefficients[0] == pytest.approx(0, abs=1e-9)


@pytest.mark.parametrize("ties", ["efron", "breslow"])
@pytest.mark.parametrize("variance", ["model", "robust", "cluster"])
def test_rows_with_counts_are_rows_written_out_so_many_times(variance, ties):
    rng = np.random.default_rng(7)
    columns, time, event, entry, stratum = small_study(7, rows=40, strata=2, late=True)
    counts, cluster = rng.integers(0, 6, 40), rng.integers(0, 12, 40)
    again = np.repeat(np.arange(40), counts)
    seen = np.where(counts > 0, event, np.nan)  # what a row without people holds must not matter
    centred = columns_within_risk_sets(columns, time, seen, entry=entry, stratum=stratum, counts=counts)
    assert np.isfinite(centred).all()
    short = cox(
        columns, time, seen, entry=entry, stratum=stratum, ties=ties, variance=variance, cluster=cluster, counts=counts
    )
    long = cox(
        columns[again],
        time[again],
        event[again],
        entry=entry[again],
        stratum=stratum[again],
        ties=ties,
        variance=variance,
        cluster=cluster[again],
    )
    assert short.coefficients == pytest.approx(long.coefficients, abs=1e-9)
    assert short.covariance == pytest.approx(long.covariance, rel=1e-8, abs=1e-12)
    assert short.influence[np.repeat(np.arange(40), counts)] == pytest.approx(long.influence, abs=1e-9)
    assert (short.rows, short.events) == (long.rows, long.events) == (counts.sum(), counts[event].sum())


def test_units_and_time_scale_change_nothing_but_the_unit():
    columns, time, event, entry, _ = small_study(3, rows=60, late=True)
    plain = cox(columns, time, event, entry=entry)
    scaled = cox(columns * [1e6, 1e-6] + [1e7, 0], np.exp(time), event, entry=np.exp(entry))
    assert scaled.coefficients * [1e6, 1e-6] == pytest.approx(plain.coefficients, rel=1e-6)


@pytest.mark.parametrize("late", [False, True])
def test_people_with_a_very_high_hazard_who_leave_do_not_spoil_the_sums_over_the_others(late):
    # e^30 is ten trillion: a sum that is taken away again would leave nothing right of what follows
    columns, time, event, entry, _ = small_study(4, rows=30, late=late)
    high = np.arange(30) < 10
    both = np.column_stack([columns, high])
    time = np.where(high, (time if entry is None else entry) + time / 100, time)
    sets = risk_sets(time, event, entry)
    ones, beta = np.ones(30), np.array([0.5, -0.5, 30.0])
    got = partial_likelihood(sets, draws(sets, ones, ones, "efron"), both, beta, ones)
    function = partial(log_likelihood, columns=both, time=time, event=event, entry=entry)
    assert got.value == pytest.approx(function(beta), rel=1e-12)
    assert got.gradient == pytest.approx(gradient(function, beta), abs=1e-6)
    assert got.information == pytest.approx(-hessian(function, beta), abs=1e-4)


def test_the_planted_hazard_ratio_comes_back():
    rng = np.random.default_rng(8)
    rows = 20_000
    covariate, region = rng.normal(size=rows), rng.integers(0, 4, rows)
    exposed = rng.random(rows) < 1 / (1 + np.exp(-covariate))
    hazard = 0.1 * (1 + region) * np.exp(0.7 * exposed + 0.5 * covariate)
    end, entry = rng.exponential(1 / hazard), rng.uniform(0, 3, rows)
    censored = entry + rng.exponential(8, rows)
    seen = end > entry
    time, event = np.minimum(end, censored), end <= censored
    got = cox(
        np.column_stack([exposed, covariate])[seen],
        time[seen],
        event[seen],
        entry=entry[seen],
        stratum=region[seen],
        variance="robust",
    )
    errors = np.sqrt(np.diag(got.covariance))
    assert errors.max() < 0.03
    assert np.abs((got.coefficients - [0.7, 0.5]) / errors).max() < 3


def refusal(*arguments, **options):
    with pytest.raises(NotEstimableError) as raised:
        cox(*arguments, **options)
    return raised.value.finding


@pytest.mark.parametrize("ties", ["efron", "breslow"])
@pytest.mark.parametrize("late", [False, True])
def test_no_event_among_the_exposed_is_separation(late, ties):
    columns, time, event, entry, stratum = small_study(9, rows=60, strata=2, late=late)
    exposed = np.arange(60) % 3 == 0
    said = refusal(
        np.column_stack([exposed, columns[:, 0]]).astype(float),
        time,
        event & ~exposed,
        entry=entry,
        stratum=stratum,
        ties=ties,
        variables=("night_work", "age"),
    )
    assert said.code == "estimate-separation"
    assert "“night_work” predicts" in said.message
    assert "age" not in said.message


def test_the_verdict_on_separation_is_that_of_a_linear_programme_over_all_pairs():
    # b separates when everybody with the event has at least the x'b of everybody at risk then, and more than some
    verdicts = {True: 0, False: 0}
    for seed in range(150):
        rng = np.random.default_rng(seed)
        rows = int(rng.integers(5, 20))
        columns, time = rng.integers(0, 3, (rows, 2)).astype(float), rng.integers(1, 8, rows).astype(float)
        event, entry = rng.random(rows) < 0.5, time - rng.integers(1, 5, rows)
        ahead = np.array(
            [
                columns[i] - columns[j]
                for i in np.flatnonzero(event)
                for j in range(rows)
                if entry[j] < time[i] <= time[j]
            ]
        )
        if np.linalg.matrix_rank(ahead) < 2:
            continue
        best = linprog(-ahead.sum(axis=0), A_ub=-ahead, b_ub=np.zeros(len(ahead)), bounds=(-1, 1))
        try:
            cox(columns, time, event, entry=entry, ties=("efron", "breslow")[seed % 2])
            said = None
        except NotEstimableError as error:
            said = error.finding.code
        assert said == ("estimate-separation" if best.fun < -1e-7 else None)
        verdicts[said is None] += 1
    assert min(verdicts.values()) > 20


def test_a_covariate_that_orders_all_events_is_separation():
    time = np.arange(1.0, 41.0)
    said = refusal(-np.sqrt(time)[:, None], time, np.ones(40))
    assert said.code == "estimate-separation"


def test_one_exposed_case_among_thousands_is_no_separation():
    exposed = np.zeros((3000, 1))
    exposed[:2] = 1.0
    time = np.concatenate([[1000.5], np.arange(1.0, 3000.0)])
    event = np.full(3000, True)
    event[1:2000:2] = False
    got = cox(exposed, time, event)
    assert np.isfinite(got.coefficients).all()


def test_nobody_with_the_event_is_said():
    assert refusal(np.ones((5, 1)), np.arange(5.0), np.zeros(5)).code == "estimate-one-outcome"


def test_an_entry_that_is_not_before_the_end_is_said_with_how_many():
    said = refusal(np.arange(4.0)[:, None], np.arange(1.0, 5), np.ones(4), entry=np.array([0.0, 2, 3, 0]))
    assert said.code == "estimate-entry-after-end"
    assert said.message.startswith("2 rows have")


def test_a_covariate_that_is_constant_in_every_stratum_has_no_coefficient():
    columns, time, event, entry, stratum = small_study(10, rows=40, strata=2, late=True)
    doubled = np.column_stack([columns[:, 0], stratum == "north"]).astype(float)
    said = refusal(doubled, time, event, entry=entry, stratum=stratum, variables=("age", "site"))
    assert said.code == "estimate-collinear"
    assert "“site”" in said.message
    centred = columns_within_risk_sets(doubled, time, event, entry=entry, stratum=stratum)
    assert np.all(centred[:, 1] == 0)
    assert np.ptp(centred[:, 0]) > 0


def test_a_gap_in_follow_up_that_nobody_bridges_separates_what_can_be_compared():
    # before time 10 only the old cohort is at risk, after it only the new one, so the cohort has no coefficient
    entry = np.array([0.0, 0, 0, 10, 10, 10])
    time = np.array([3.0, 4, 5, 13, 14, 15])
    cohort = (entry > 5).astype(float)
    age = np.array([1.0, 2, 1, 2, 1, 2])
    said = refusal(np.column_stack([cohort, age]), time, np.ones(6), entry=entry, variables=("cohort", "age"))
    assert said.code == "estimate-collinear"
    assert "“cohort”" in said.message
