"""Robustness of linear models against least squares with and without the omitted variable, and against print."""

from __future__ import annotations

import math

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import optimize, stats

from adjustplan.estimate.stress.robustness import moved_by, partial_r2, robustness, robustness_value
from adjustplan.estimate.stress.yardstick import as_strong_as, left_out, moved_like


def residual(variable: np.ndarray, *others: np.ndarray) -> np.ndarray:
    """What the others and a constant leave of a variable."""
    matrix = np.column_stack([np.ones(len(variable)), *others])
    return variable - matrix @ np.linalg.lstsq(matrix, variable, rcond=None)[0]


def share(first: np.ndarray, second: np.ndarray, *others: np.ndarray) -> float:
    """The squared partial correlation."""
    return float(np.corrcoef(residual(first, *others), residual(second, *others))[0, 1] ** 2)


@pytest.mark.parametrize("seed", range(8))
def test_the_formula_gives_the_estimate_and_error_of_least_squares_with_the_omitted_variable(seed: int) -> None:
    rng = np.random.default_rng(seed)
    x, hidden = rng.normal(size=(2, 60))
    exposure = 0.5 * x + 0.7 * hidden + rng.normal(size=60)
    outcome = 3.0 * exposure + x + 1.5 * hidden + rng.normal(size=60)
    short = sm.OLS(outcome, sm.add_constant(np.column_stack([exposure, x]))).fit()
    full = sm.OLS(outcome, sm.add_constant(np.column_stack([exposure, x, hidden]))).fit()
    told = moved_by(
        short.params[1],
        short.bse[1],
        short.df_resid,
        share(exposure, hidden, x),
        share(outcome, hidden, exposure, x),
        target=-100.0 if full.params[1] < short.params[1] else 100.0,  # the direction in which it moved
    )
    assert told.moved.estimate == pytest.approx(full.params[1], abs=1e-10)
    assert told.standard_error == pytest.approx(full.bse[1], abs=1e-10)
    assert [told.moved.lower, told.moved.upper] == pytest.approx(list(full.conf_int()[1]), abs=1e-9)


def test_the_darfur_figures_of_cinelli_and_hazlett_come_out() -> None:
    # Cinelli and Hazlett 2020, J R Stat Soc B 82:39, table 1 (from memory): estimate 0.097, standard error 0.023,
    # 783 degrees of freedom; partial R² 2.2 %, robustness value 13.9 %, at the 5 % level 7.6 %
    told = robustness(0.097, 0.0232, 783)
    assert told.partial_r2 == pytest.approx(0.022, abs=0.0005)
    assert told.value == pytest.approx(0.139, abs=0.0015)
    assert told.limit_value == pytest.approx(0.076, abs=0.0015)
    assert told.extreme == told.partial_r2


@pytest.mark.parametrize("t", [0.3, 1.5, 2.5, 4.2, 30.0])
@pytest.mark.parametrize("freedom", [3.0, 12.0, 783.0])
@pytest.mark.parametrize("portion", [0.5, 1.0])
def test_a_confounder_as_strong_as_the_robustness_value_takes_just_that_away(
    t: float, freedom: float, portion: float
) -> None:
    value = robustness_value(t, freedom, portion)
    assert moved_by(t, 1.0, freedom, value, value).moved.estimate == pytest.approx((1 - portion) * t, abs=1e-9)


@pytest.mark.parametrize("t", [1.0, 2.5, 4.2, 9.0, 30.0])
@pytest.mark.parametrize("freedom", [2.0, 3.0, 5.0, 12.0, 783.0])
def test_no_confounder_weaker_than_the_robustness_value_makes_the_estimate_insignificant(
    t: float, freedom: float
) -> None:
    value = robustness_value(t, freedom, alpha=0.05)
    critical = stats.t.ppf(0.975, freedom - 1)

    def smallest_t(most: float) -> float:
        """The least t over the shares up to ``most``, by brute force."""

        def of(outcome: float) -> float:
            told = moved_by(t, 1.0, freedom, most, min(outcome, 1 - 1e-12))
            return told.moved.estimate / told.standard_error

        grid = np.linspace(0, most, 400)
        best = grid[np.argmin([of(each) for each in grid])]
        near = optimize.minimize_scalar(of, bounds=(max(0, best - 0.01), min(most, best + 0.01)), method="bounded")
        return min(of(best), float(near.fun), of(most))

    if value == 0:
        assert t / math.sqrt(freedom / (freedom - 1)) <= critical + 1e-9
    else:
        assert smallest_t(value) == pytest.approx(critical, rel=1e-3)
        assert smallest_t(value * 0.98) > critical


def test_the_extreme_scenario_leaves_nothing() -> None:
    told = robustness(-0.4, 0.1, 50)
    assert moved_by(-0.4, 0.1, 50, told.extreme, 1.0).moved.estimate == pytest.approx(0.0, abs=1e-12)
    other = robustness(-0.4, 0.1, 50, target=-0.1)
    left = moved_by(-0.4, 0.1, 50, other.value, other.value, target=-0.1)
    assert left.moved.estimate == pytest.approx(-0.1)


def test_partial_r2_is_that_of_least_squares() -> None:
    rng = np.random.default_rng(5)
    x, exposure = rng.normal(size=(2, 40))
    outcome = exposure + x + rng.normal(size=40)
    fitted = sm.OLS(outcome, sm.add_constant(np.column_stack([exposure, x]))).fit()
    assert partial_r2(fitted.tvalues[1], fitted.df_resid) == pytest.approx(share(outcome, exposure, x))


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("times", [0.5, 1.0, 1.5])
def test_a_confounder_made_as_strong_as_a_covariate_explains_no_more_than_the_bound(seed: int, times: float) -> None:
    """Z is built to explain ``times`` what x explains of exposure and outcome, and to be unrelated to x."""
    rng = np.random.default_rng(seed)
    x = residual(rng.normal(size=200))
    exposure = residual(0.4 * x + rng.normal(size=200))
    outcome = residual(0.6 * exposure + 0.4 * x + rng.normal(size=200))
    r, s = share(x, exposure), share(x, outcome, exposure)
    bound = as_strong_as(r, s, times)
    assert bound is not None
    free = residual(rng.normal(size=200), x, exposure, outcome)
    of_d, of_y, of_free = (
        each / np.linalg.norm(each) for each in (residual(exposure, x), residual(outcome, exposure, x), free)
    )
    along = math.sqrt(times * r) * np.linalg.norm(exposure) / np.linalg.norm(residual(exposure, x))
    left_of_outcome = residual(outcome, exposure)
    attained = []
    for sign in (1, -1):
        # the partial correlation of Z and outcome is linear in the part of Z along ``of_y``
        wanted = sign * math.sqrt(times * s * (1 - times * r)) * np.linalg.norm(left_of_outcome)
        part = (wanted - along * of_d @ left_of_outcome) / (of_y @ left_of_outcome)
        if along**2 + part**2 >= 1:
            continue
        hidden = along * of_d + part * of_y + math.sqrt(1 - along**2 - part**2) * of_free
        assert share(hidden, x) == pytest.approx(0, abs=1e-12)
        assert share(hidden, exposure) == pytest.approx(times * r)
        assert share(hidden, outcome, exposure) == pytest.approx(times * s)
        assert share(hidden, exposure, x) == pytest.approx(bound.of_exposure)
        attained.append(share(hidden, outcome, exposure, x) / bound.of_outcome)
    assert max(attained) == pytest.approx(1.0)  # in the worse direction the bound is reached


def test_the_darfur_benchmark_of_cinelli_and_hazlett_comes_out() -> None:
    # Cinelli and Hazlett 2020 (from memory): one as strong as “female” explains 0.92 % and 12.5 %, and leaves
    # 0.075 with standard error 0.022; the benchmark of their figure
    once = moved_by(0.0973, 0.0233, 783, 0.0092, 0.125)
    assert once.moved.estimate == pytest.approx(0.0752, abs=0.0005)
    assert once.standard_error == pytest.approx(0.0219, abs=0.0002)


def test_what_explains_most_of_the_exposure_has_no_equal() -> None:
    assert as_strong_as(0.6, 0.1) is None
    assert as_strong_as(0.2, 0.1, times=5) is None
    assert moved_like(1.0, 0.1, 50, 0.6, 0.1) is None
    capped = as_strong_as(0.3, 0.7)
    assert capped is not None
    assert (capped.capped, capped.of_outcome) == (True, 1.0)


def test_leaving_out_is_made_once_more_in_the_same_direction() -> None:
    ratio = left_out(2.0, 1.5, 2.7, 2.5, ratio=True)
    assert ratio.change == pytest.approx(1.25)
    assert ratio.moved.estimate == pytest.approx(1.6)
    assert ratio.moved.lower == pytest.approx(1.2)
    difference = left_out(2.0, 1.0, 3.0, 1.5, ratio=False)
    assert (difference.change, difference.moved.estimate, difference.moved.upper) == pytest.approx((-0.5, 2.5, 3.5))


def test_a_twin_of_the_covariate_undoes_a_ratio_by_as_much() -> None:
    """Two independent binary confounders of equal make: without the second, the crude bias is made twice."""
    among, risk, effect = (0.7, 0.3), 2.0, 1.6  # prevalence in exposed and reference; outcome ratio of each
    one = (1 + among[0] * (risk - 1)) / (1 + among[1] * (risk - 1))
    without_both, with_first = effect * one * one, effect * one
    assert left_out(with_first, 1.0, 9.0, without_both, ratio=True).moved.estimate == pytest.approx(effect)


@pytest.mark.parametrize("bad", [(1.0, 0.2), (-0.1, 0.2), (0.2, 1.1)])
def test_shares_outside_their_range_are_refused(bad: tuple[float, float]) -> None:
    with pytest.raises(ValueError, match="share"):
        moved_by(1.0, 0.1, 50, *bad)
