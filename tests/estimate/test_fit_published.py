"""Published results on open data that are shipped inside statsmodels.

The numbers are read from statsmodels' own test results, which name where they come from: the Spector and
Mazzeo (1980) teaching experiment from Stata, the Longley (1967) data from the certified values of NIST.
"""

from __future__ import annotations

import math

import pytest
from statsmodels.datasets import longley, spector
from statsmodels.discrete.tests.results.results_glm_logit_constrained import (
    results_noconstraint,
    results_noconstraint_robust,
)
from statsmodels.regression.tests.results.results_regression import Longley

from adjustplan.estimate import fit

PSI = 2  # the order in the source is GPA, TUCE, PSI (teaching method), constant


@pytest.mark.parametrize("variance", ["model", "robust"])
def test_the_teaching_experiment_has_the_odds_ratio_that_stata_gives(write_plan, variance):
    plan = write_plan(
        spector.load_pandas().data,
        members=("GPA", "TUCE"),
        edges="GPA, TUCE -> night_work\nGPA, TUCE -> diabetes\nnight_work -> diabetes",
        columns={"night_work": "PSI", "diabetes": "GRADE"},
        forms={"GPA": "linear", "TUCE": "linear"},
        variance=variance,
    )
    got = fit(plan).adjusted[0]
    published = results_noconstraint if variance == "model" else results_noconstraint_robust
    coefficient, error = published.params_table[PSI, :2]
    # Stata's iterations end at about seven digits: its own two commands, logit and glm, differ by 9.4e-8 here
    assert math.log(got.estimate) == pytest.approx(coefficient, rel=1e-7)
    # Stata's robust variance has the factor n / (n - 1), ours has none
    factor = math.sqrt(32 / 31) if variance == "robust" else 1.0
    assert got.standard_error * factor == pytest.approx(error, rel=1e-6)
    assert got.rows == 32


@pytest.mark.parametrize("place", range(6))
def test_the_longley_data_have_the_certified_coefficients(write_plan, place):
    # NIST certifies 15 digits; the data are so nearly collinear that poor arithmetic loses half of them
    data = longley.load_pandas()
    names = list(data.exog.columns)
    exposure = names[place]
    others = tuple(name for name in names if name != exposure)
    arrows = f"{', '.join(others)} -> night_work\n{', '.join(others)} -> diabetes\nnight_work -> diabetes"
    plan = write_plan(
        data.data,
        measure="mean difference",
        members=others,
        edges=arrows,
        columns={"night_work": exposure, "diabetes": "TOTEMP"},
        forms=dict.fromkeys((*others, "night_work"), "linear"),
    )
    got, certified = fit(plan).adjusted[0], Longley()
    assert got.estimate == pytest.approx(certified.params[place], rel=1e-8)
    assert got.standard_error == pytest.approx(certified.bse[place], rel=1e-8)
    assert (got.lower, got.upper) == pytest.approx(certified.conf_int()[place], rel=1e-5)
