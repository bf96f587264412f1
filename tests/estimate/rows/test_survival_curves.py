"""The baseline hazard and survival of given people."""

from __future__ import annotations

import numpy as np
import pytest
from brute_partial_likelihood import small_study
from statsmodels.duration.tests.results import survival_r_results as published

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows import baseline_hazard, cox, survival_at


def test_the_cumulative_hazard_is_the_sum_over_events_written_out():
    columns, time, event, entry, stratum = small_study(1, rows=40, strata=3, late=True)
    counts = np.random.default_rng(1).integers(1, 4, 40)
    beta = np.array([0.4, -0.3])
    baseline = baseline_hazard(columns, time, event, beta, entry=entry, stratum=stratum, counts=counts)
    got = survival_at(baseline, columns, beta, 3.0, stratum)
    for row in range(40):
        hazard = 0.0
        for other in range(40):
            if event[other] and stratum[other] == stratum[row] and time[other] <= 3.0:
                risk = (entry < time[other]) & (time >= time[other]) & (stratum == stratum[row])
                hazard += counts[other] / np.sum(counts[risk] * np.exp(columns[risk] @ beta))
        assert got[row] == pytest.approx(np.exp(-hazard * np.exp(columns[row] @ beta)), rel=1e-10)


def test_the_curve_at_mean_covariates_is_the_one_that_r_gave():
    from importlib import resources

    # R's survfit(type = "aalen"), run by the authors of statsmodels, after Breslow's ties
    with resources.as_file(resources.files("statsmodels.duration.tests.results") / "survival_data_50_1.csv") as path:
        data = np.loadtxt(path)
    columns, time, event = data[:, 3:], data[:, 0], data[:, 1] == 1
    beta = cox(columns, time, event, ties="breslow").coefficients
    baseline = baseline_hazard(columns, time, event, beta)
    middle = columns.mean(axis=0, keepdims=True)
    got = [-np.log(survival_at(baseline, middle, beta, moment + 1e-9)[0]) for moment in published.time_50_1_bre[:-1]]
    assert got == pytest.approx(published.hazard_50_1_bre[:-1], rel=1e-5, abs=1e-8)


def test_standardised_survival_and_the_marginal_hazard_ratio_are_the_planted_ones():
    rng = np.random.default_rng(2)
    rows = 40_000
    covariate = rng.normal(size=rows)
    exposed = rng.random(rows) < 1 / (1 + np.exp(-covariate))
    end = rng.exponential(1 / (0.2 * np.exp(0.8 * exposed + covariate)))
    time, event = np.minimum(end, 5.0), end <= 5.0
    columns = np.column_stack([exposed, covariate]).astype(float)
    fit = cox(columns, time, event)
    baseline = baseline_hazard(columns, time, event, fit.coefficients)
    survival = {}
    for level in (0.0, 1.0):
        everybody = np.column_stack([np.full(rows, level), covariate])
        survival[level] = survival_at(baseline, everybody, fit.coefficients, 3.0).mean()
        nodes, weights = np.polynomial.hermite_e.hermegauss(60)
        planted = np.sum(weights * np.exp(-0.6 * np.exp(0.8 * level + nodes))) / weights.sum()
        assert survival[level] == pytest.approx(planted, abs=0.01)
    marginal = np.log(survival[1.0]) / np.log(survival[0.0])
    assert marginal < np.exp(0.8) * 0.9  # the marginal ratio is nearer to 1 than the conditional one


def test_survival_beyond_the_end_of_follow_up_is_not_made_up():
    columns, time, event, _, stratum = small_study(3, rows=40, strata=2)
    baseline = baseline_hazard(columns, time, event, np.zeros(2), stratum=stratum)
    with pytest.raises(NotEstimableError) as raised:
        survival_at(baseline, columns, np.zeros(2), 100.0, stratum)
    assert raised.value.finding.code == "estimate-beyond-follow-up"
