"""A model without an estimate says why, and leaves the other models alone."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd
import pytest

from adjustplan.estimate import fit
from adjustplan.estimate.existence import separating_direction
from adjustplan.estimate.kernel import FAMILIES

EDGES = "age, site -> night_work\nage, site -> diabetes\nnight_work -> diabetes"
RATIOS = ("odds ratio", "risk ratio")


def people(count: int = 400, seed: int = 9) -> pd.DataFrame:
    """A study without faults."""
    random = np.random.default_rng(seed)
    rows = pd.DataFrame({"age": random.integers(20, 30, count), "site": random.choice(["a", "b", "c"], count)})
    rows["night_work"] = random.integers(0, 2, count)
    rows["diabetes"] = (random.random(count) < 0.3 + 0.1 * rows["night_work"]).astype(int)
    return rows


def codes(result) -> list[str]:
    return [finding.code for finding in result.findings if finding.severity == "error"]


@pytest.mark.filterwarnings("error", "ignore::DeprecationWarning")
@pytest.mark.parametrize("measure", RATIOS)
def test_a_site_without_cases_has_no_adjusted_ratio_but_a_crude_one(write_plan, capfd, measure):
    rows = people()
    rows.loc[rows["site"] == "c", "diabetes"] = 0
    result = fit(write_plan(rows, measure=measure, edges=EDGES, forms={"age": "category"}))
    planned = result.adjusted[0]
    assert planned.estimate is None
    assert codes(planned) == ["estimate-separation"]
    assert planned.findings[-1].message.startswith("“site” predicts")
    assert result.crude.estimate > 0
    assert capfd.readouterr() == ("", "")
    assert "NaN" not in json.dumps(result.to_dict(), allow_nan=False)


@pytest.mark.parametrize("form", ["linear", "category"])
def test_an_outcome_that_a_covariate_predicts_perfectly_is_separation(write_plan, form):
    rows = people()
    rows["diabetes"] = (rows["age"] > 24).astype(int)
    planned = fit(write_plan(rows, edges=EDGES, forms={"age": form})).adjusted[0]
    assert planned.estimate is None
    assert codes(planned) == ["estimate-separation"]
    assert planned.findings[-1].message.startswith("“age” predicts")


def test_a_table_with_an_empty_cell_has_no_crude_odds_ratio(write_plan):
    rows = people()
    rows.loc[rows["night_work"] == 1, "diabetes"] = 1
    result = fit(write_plan(rows, members=(), edges="night_work -> diabetes"))
    assert result.crude is None
    assert codes(result.adjusted[0]) == ["estimate-separation"]


def test_a_table_where_all_the_exposed_are_cases_still_has_a_risk_ratio(write_plan):
    # 100 % among the exposed is a risk like any other; only an empty cell of cases has no ratio
    rows = people()
    rows.loc[rows["night_work"] == 1, "diabetes"] = 1
    settings = {"measure": "risk ratio", "members": (), "edges": "night_work -> diabetes"}
    crude = fit(write_plan(rows, **settings)).crude
    assert crude.estimate == pytest.approx(1 / rows.loc[rows["night_work"] == 0, "diabetes"].mean(), rel=1e-10)


def test_a_rare_outcome_is_not_mistaken_for_separation(write_plan):
    # one case in 10 000 unexposed and two in 10 000 exposed people: an odds ratio of 2.0002
    rows = pd.DataFrame({"night_work": [0] * 10_000 + [1] * 10_000, "diabetes": 0})
    rows.loc[[0, 10_000, 10_001], "diabetes"] = 1
    crude = fit(write_plan(rows, members=(), edges="night_work -> diabetes")).crude
    assert crude.estimate == pytest.approx((2 * 9999) / (1 * 9998), rel=1e-9)


@pytest.mark.parametrize("measure", RATIOS)
@pytest.mark.parametrize("seed", range(40))
def test_separation_is_reported_exactly_when_it_is_there(write_plan, measure, seed):
    # Small random studies, many of them separated. Truth (Albert and Anderson 1984): a direction that improves
    # the fit of some row and worsens that of none; each direction of a grid is tried.
    random = np.random.default_rng(seed)
    rows = pd.DataFrame({"night_work": random.integers(0, 2, 14), "age": random.integers(0, 3, 14)})
    rows["diabetes"] = (random.random(14) < 0.35).astype(int)
    if rows["diabetes"].nunique() == 1 or rows["night_work"].nunique() == 1 or rows["age"].nunique() == 1:
        pytest.skip("nothing to compare in this draw")
    edges = "age -> night_work -> diabetes\nage -> diabetes"
    settings = {"measure": measure, "members": ("age",), "edges": edges, "forms": {"age": "linear"}}
    planned = fit(write_plan(rows, **settings)).adjusted[0]
    matrix = np.column_stack([np.ones(14), rows["night_work"], rows["age"]])
    # with levels 0, 1 and 0, 1, 2 every face of the cone of directions has small whole-number coefficients
    grid = np.stack(np.meshgrid(*[np.arange(-4, 5)] * 3), axis=-1).reshape(-1, 3)
    gains = (grid @ matrix.T) * np.where(rows["diabetes"] == 1, 1, -1)
    cases = rows["diabetes"].to_numpy() == 1
    allowed = (gains >= 0).all(axis=1) & (gains > 0).any(axis=1)
    if measure == "risk ratio":
        allowed &= (gains[:, cases] == 0).all(axis=1)
    collinear = np.linalg.matrix_rank(matrix) < 3
    if collinear:
        assert codes(planned) == ["estimate-collinear"]
    else:
        assert (codes(planned) == ["estimate-separation"]) == bool(allowed.any())
        assert (planned.estimate is None) == bool(allowed.any())


def test_a_separating_direction_separates():
    # Konis (2007): along the direction every case gains or keeps, every non-case too, and somebody gains
    random = np.random.default_rng(2)
    columns = np.column_stack([np.ones(50), random.normal(size=(50, 3))])
    mean = (columns @ [0.2, 1.0, -2.0, 0.5] > 0).astype(float)
    direction = separating_direction(columns, mean, FAMILIES["logistic"])
    gains = columns @ direction * np.where(mean == 1, 1, -1)
    assert gains.min() > -1e-6
    assert gains.max() > 0.5
    mean[np.argmax(columns @ [0.2, 1.0, -2.0, 0.5])] = 0.0
    assert separating_direction(columns, mean, FAMILIES["logistic"]) is None


def test_an_exposure_that_a_covariate_determines_is_collinear(write_plan):
    rows = people()
    rows["night_work"] = (rows["site"] == "b").astype(int)
    planned = fit(write_plan(rows, edges=EDGES)).adjusted[0]
    assert planned.estimate is None
    assert codes(planned) == ["estimate-collinear"]
    assert "“night_work”" in planned.findings[-1].message
    assert "“site”" in planned.findings[-1].message
    assert "“age”" not in planned.findings[-1].message


def test_covariates_that_say_the_same_adjust_like_one_of_them(write_plan):
    rows = people()
    rows["region"] = rows["site"].map({"a": "north", "b": "north", "c": "south"})
    edges = "site -> region -> night_work -> diabetes\nsite -> diabetes\nregion -> diabetes"
    both = fit(write_plan(rows, members=("site", "region"), edges=edges)).adjusted[0]
    one = fit(write_plan(rows, members=("site",), edges=edges)).adjusted[0]
    assert both.estimate == pytest.approx(one.estimate, rel=1e-9)
    assert both.standard_error == pytest.approx(one.standard_error, rel=1e-9)
    assert [f.severity for f in both.findings if f.code == "estimate-collinear"] == ["warning"]


def test_a_constant_covariate_is_left_out_with_a_warning(write_plan):
    rows = people().assign(site="a")
    planned = fit(write_plan(rows, edges=EDGES)).adjusted[0]
    alone = fit(write_plan(rows, members=("age",), edges=EDGES)).adjusted[0]
    assert planned.estimate == pytest.approx(alone.estimate, rel=1e-10)
    assert [f.severity for f in planned.findings if f.code == "estimate-constant-covariate"] == ["warning"]


def test_more_parameters_than_rows_is_no_model(write_plan):
    rows = pd.DataFrame({"night_work": [0, 1, 0, 1, 0], "age": range(5), "site": list("abcab")})
    rows["diabetes"] = [1.0, 2.0, 4.0, 3.0, 7.0]
    settings = {"measure": "mean difference", "edges": EDGES, "forms": {"age": "category"}}
    planned = fit(write_plan(rows, **settings)).adjusted[0]
    assert planned.estimate is None
    assert codes(planned)[0] in ("estimate-collinear", "estimate-few-rows")
    tiny = fit(write_plan(rows[:2], members=(), measure="mean difference", edges=EDGES)).adjusted[0]
    assert codes(tiny) == ["estimate-few-rows"]


def test_an_outcome_computed_from_the_exposure_has_no_error_to_judge_by(write_plan):
    rows = people()
    rows["diabetes"] = 3.0 + 2.0 * rows["night_work"]
    planned = fit(write_plan(rows, measure="mean difference", edges=EDGES)).adjusted[0]
    assert planned.estimate is None
    assert codes(planned) == ["estimate-exact"]


def test_a_covariate_that_is_never_recorded_leaves_no_rows(write_plan):
    rows = people().assign(site=None)
    result = fit(write_plan(rows, edges=EDGES, alternatives=(("age",),)))
    planned, alternative = result.adjusted[:2]
    assert (planned.estimate, planned.rows, result.crude) == (None, 0, None)
    assert codes(planned) == ["data-no-complete-rows"]
    assert alternative.estimate is not None


def test_a_level_of_the_exposure_without_complete_rows_is_named(write_plan):
    rows = people().astype({"age": float})
    rows.loc[rows["night_work"] == 1, "age"] = np.nan
    planned = fit(write_plan(rows, edges=EDGES)).adjusted[0]
    assert planned.estimate is None
    assert codes(planned) == ["estimate-empty-level"]


def test_a_spline_of_mostly_zeros_says_where_its_knots_are(write_plan):
    rows = people().assign(age=lambda table: (table["age"] - 25).clip(lower=0))
    planned = fit(write_plan(rows, edges=EDGES, forms={"age": "spline(3)"})).adjusted[0]
    assert planned.estimate is not None
    assert [finding.code for finding in planned.findings] == ["estimate-spline-knots"]


def test_a_spline_needs_more_values_than_it_bends(write_plan):
    planned = fit(write_plan(people(), edges=EDGES, forms={"night_work": "category", "age": "spline(9)"})).adjusted[0]
    assert planned.estimate is not None
    rows = people().assign(age=lambda table: table["age"] % 3)
    planned = fit(write_plan(rows, edges=EDGES, forms={"age": "spline(4)"})).adjusted[0]
    assert codes(planned) == ["estimate-spline-values"]
