"""Rubin's rules against hand-worked algebra, printed tables, and statsmodels on the same completed data."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from adjustplan.estimate.missing import pool_estimates, pool_test, too_few
from adjustplan.estimate.not_estimable import NotEstimableError


def test_three_imputations_worked_by_hand() -> None:
    """Estimates 1, 2, 3 with variances 1: W = 1, B = 1, T = 1 + 4/3, ν = 2 (1 + 3/4)²."""
    pooled = pool_estimates([1.0, 2.0, 3.0], [1.0, 1.0, 1.0])
    assert (pooled.estimate, pooled.within, pooled.between) == pytest.approx((2.0, 1.0, 1.0), rel=1e-14)
    assert pooled.standard_error == pytest.approx(math.sqrt(7 / 3), rel=1e-14)
    assert pooled.degrees_of_freedom == pytest.approx(49 / 8, rel=1e-14)
    assert pooled.missing_information == pytest.approx((4 / 3 + 2 / (49 / 8 + 3)) / (7 / 3), rel=1e-14)
    half = stats.t.ppf(0.975, 49 / 8) * math.sqrt(7 / 3)
    assert (pooled.lower, pooled.upper) == pytest.approx((2 - half, 2 + half), rel=1e-10)
    assert pooled.monte_carlo_error == pytest.approx(math.sqrt(1 / 3), rel=1e-14)


def test_few_people_leave_fewer_degrees_of_freedom() -> None:
    """Barnard and Rubin (1999): 1/ν = 1/ν_m + 1/ν_obs, ν_obs = (ν₀+1)/(ν₀+3) ν₀ (1 - (1 + 1/m) B / T)."""
    pooled = pool_estimates([1.0, 2.0, 3.0], [1.0, 1.0, 1.0], complete_freedom=17)
    assert pooled.degrees_of_freedom == pytest.approx(1 / (8 / 49 + 1 / (18 / 20 * 17 * 3 / 7)), rel=1e-14)
    assert pooled.degrees_of_freedom < 17 * 18 / 20
    assert pooled.missing_information == pool_estimates([1.0, 2.0, 3.0], [1.0, 1.0, 1.0]).missing_information


def test_imputations_that_agree_give_the_interval_of_complete_data() -> None:
    pooled = pool_estimates([0.5] * 4, [0.04] * 4)
    assert (pooled.standard_error, pooled.missing_information) == pytest.approx((0.2, 0.0), abs=1e-15)
    assert pooled.upper == pytest.approx(0.5 + 0.2 * stats.norm.ppf(0.975), rel=1e-12)
    small = pool_estimates([0.5] * 4, [0.04] * 4, complete_freedom=10)
    assert small.degrees_of_freedom == pytest.approx(10 * 11 / 13, rel=1e-14)


@pytest.mark.parametrize(
    ("imputations", "fraction", "percent"),
    [(3, 0.1, 97), (3, 0.5, 86), (3, 0.9, 77), (5, 0.3, 94), (5, 0.5, 91), (5, 0.9, 85), (10, 0.7, 93), (20, 0.9, 96)],
)
def test_relative_efficiency_is_that_of_the_printed_table(imputations: int, fraction: float, percent: int) -> None:
    """Schafer (1999), Stat Methods Med Res 8:3, table 1 (from memory), to whole per cents.

    The estimates are planted so that the fraction of missing information is the one in the table.
    """
    spread = np.linspace(-1, 1, imputations)
    spread /= spread.std(ddof=1)

    def fraction_at(size: float) -> float:
        return pool_estimates(size * spread, np.ones(imputations)).missing_information - fraction

    from scipy.optimize import brentq

    pooled = pool_estimates(brentq(fraction_at, 1e-6, 50) * spread, np.ones(imputations))
    assert round(100 * pooled.relative_efficiency) == percent


def test_the_same_as_statsmodels_on_the_same_completed_data() -> None:
    from statsmodels.imputation.mice import MICE, MICEData
    from statsmodels.regression.linear_model import OLS

    random = np.random.default_rng(5)
    c = random.normal(size=200)
    x = c + random.normal(size=200)
    rows = pd.DataFrame({"y": x + c + random.normal(size=200), "x": x, "c": c})
    rows.loc[random.random(200) < 0.3, "c"] = np.nan
    np.random.seed(11)
    engine = MICE("y ~ x + c", OLS, MICEData(rows))
    theirs = engine.fit(n_burnin=2, n_imputations=8)
    assert len(engine.results_list) == 8
    for place in range(3):
        estimates = [float(np.asarray(one.params)[place]) for one in engine.results_list]
        variances = [float(np.asarray(one.cov_params())[place, place]) for one in engine.results_list]
        ours = pool_estimates(estimates, variances)
        assert ours.estimate == pytest.approx(float(np.asarray(theirs.params)[place]), rel=1e-12)
        assert ours.standard_error == pytest.approx(float(np.asarray(theirs.bse)[place]), rel=1e-12)
        lost = (1 + 1 / 8) * ours.between / ours.standard_error**2
        assert lost == pytest.approx(float(np.asarray(theirs.frac_miss_info)[place]), rel=1e-12)


def test_a_joint_test_of_one_coefficient_is_its_t_test_squared() -> None:
    """With k = 1 and k (m - 1) > 4 only the denominator's degrees of freedom differ (Li et al. 1991)."""
    estimates, variances = np.array([0.2, 0.5, 0.4, 0.3, 0.6, 0.7]), np.array([0.1, 0.12, 0.09, 0.1, 0.11, 0.08])
    pooled = pool_estimates(estimates, variances)
    joint = pool_test(estimates[:, None], variances[:, None, None])
    assert joint.statistic == pytest.approx((pooled.estimate / pooled.standard_error) ** 2, rel=1e-12)
    increase = (1 + 1 / 6) * pooled.between / pooled.within
    assert joint.denominator == pytest.approx(4 + (5 - 4) * (1 + (1 - 2 / 5) / increase) ** 2, rel=1e-12)
    assert joint.p_value == pytest.approx(stats.f.sf(joint.statistic, 1, joint.denominator), rel=1e-10)


def test_without_missing_information_the_joint_test_is_the_wald_test() -> None:
    mean, covariance = np.array([0.5, -0.3]), np.array([[0.04, 0.01], [0.01, 0.09]])
    joint = pool_test(np.tile(mean, (3, 1)), np.tile(covariance, (3, 1, 1)))
    wald = float(mean @ np.linalg.inv(covariance) @ mean)
    assert joint.statistic == pytest.approx(wald / 2, rel=1e-12)
    assert joint.p_value == pytest.approx(stats.chi2.sf(wald, 2), rel=1e-6)


def test_the_joint_test_keeps_its_size() -> None:
    """Under the null, with the between covariance a multiple of the within, p-values are uniform."""
    random = np.random.default_rng(3)
    root = np.linalg.cholesky(np.array([[1.0, 0.4, 0.0], [0.4, 2.0, 0.3], [0.0, 0.3, 1.5]]))
    within = root @ root.T
    small = 0
    for _ in range(2000):
        centre = root @ random.normal(size=3)
        copies = centre * math.sqrt(1.0) + (root @ random.normal(size=(3, 5))).T * math.sqrt(0.5)
        # an imputation's estimate: sampling error of size W and of the missing part 0.5 W, shared by all copies
        copies = copies + (root @ random.normal(size=3)) * math.sqrt(0.5)
        small += pool_test(copies, np.tile(within, (5, 1, 1))).p_value < 0.05
    assert abs(small / 2000 - 0.05) < 4 * math.sqrt(0.05 * 0.95 / 2000)


def test_an_imputation_without_an_estimate_stops_the_pooling() -> None:
    with pytest.raises(NotEstimableError) as caught:
        pool_estimates([0.1, math.nan, 0.2], [0.1, 0.1, 0.1])
    assert caught.value.finding.code == "impute-model-failed"
    assert "1 of 3 imputations" in caught.value.finding.message
    with pytest.raises(NotEstimableError):
        pool_test(np.full((2, 1), np.inf), np.ones((2, 1, 1)))


def test_too_few_imputations_are_said_with_how_many_would_do() -> None:
    few = pool_estimates([1.0, 2.0, 3.0], [1.0, 1.0, 1.0])
    finding = too_few(few)
    assert finding is not None
    assert finding.code == "impute-too-few"
    assert "67 %" in finding.message  # (4/3 + 2/9.125) / (7/3) = 0.665
    assert "Make 67 or more" in finding.remedy
    assert too_few(pool_estimates([1.0, 1.01, 0.99], [1.0, 1.0, 1.0])) is None
