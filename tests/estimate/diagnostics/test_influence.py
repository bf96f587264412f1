"""The influence of one person, against leaving that person out."""

from __future__ import annotations

import numpy as np
import pytest
from statsmodels.regression.linear_model import OLS

from adjustplan.estimate.diagnostics.influence import influence_findings, largest_influence


def test_for_a_mean_the_change_is_that_of_leaving_a_person_out():
    values, rows = np.array([1.0, 2, 3, 40]), np.array([4, 8, 5, 1])
    each = np.repeat(values, rows)
    error = each.std() / np.sqrt(len(each))
    got = largest_influence(values - each.mean(), rows.astype(float), error)
    assert got.largest == pytest.approx((each[:-1].mean() - each.mean()) / error, rel=1e-12)
    assert (got.cell, got.people) == (3, 1)
    (finding,) = influence_findings(got)
    assert (finding.code, finding.severity) == ("estimate-influential", "warning")
    assert f"{abs(got.largest):.2f} standard errors" in finding.message


def test_for_a_coefficient_it_is_near_to_leaving_a_person_out():
    rng = np.random.default_rng(4)
    x = rng.normal(size=400)
    y = 0.4 * x + rng.normal(size=400)
    y[17] += 9
    design = np.column_stack([np.ones(400), x])
    fit = OLS(y, design).fit()
    influence = 400 * (fit.normalized_cov_params @ design.T)[1] * fit.resid
    got = largest_influence(influence, np.ones(400), fit.bse[1])
    kept = np.arange(400) != got.cell
    without = OLS(y[kept], design[kept]).fit()
    # exactly, the change has one over one minus the leverage as a factor, and N for N - 1
    leverage = design[got.cell] @ fit.normalized_cov_params @ design[got.cell]
    change = (without.params[1] - fit.params[1]) / fit.bse[1]
    assert got.largest == pytest.approx(change * (1 - leverage) * 400 / 399, rel=1e-10)


def test_cells_without_people_move_nothing():
    got = largest_influence(np.array([500.0, 1, -1]), np.array([0.0, 50, 50]), 0.1)
    assert got.cell in (1, 2)
    assert influence_findings(got) == ()


@pytest.mark.parametrize(("rows", "error"), [([1.0], 0.1), ([5.0], 0.0)])
def test_influence_needs_people_and_a_standard_error(rows, error):
    with pytest.raises(ValueError, match="two people"):
        largest_influence(np.zeros(1), np.array(rows), error)
