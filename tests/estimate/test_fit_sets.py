"""Which sets are reported, what is said about them, and that crude and adjusted share their rows."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd
import pytest

from adjustplan.errors import DataError, PlanError
from adjustplan.estimate import fit

TWO_WAYS = "age -> site -> night_work -> diabetes\nage -> diabetes"
"""One back-door path, night_work <- site <- age -> diabetes: {age} and {site} are minimal, {} does not do."""


def people(count: int = 600) -> pd.DataFrame:
    """A study with a gap in each covariate."""
    random = np.random.default_rng(21)
    rows = pd.DataFrame({"age": random.integers(20, 24, count).astype(float)})
    rows["site"] = np.where(random.random(count) < rows["age"] / 50, "east", "west")
    rows["night_work"] = (random.random(count) < np.where(rows["site"] == "east", 0.6, 0.3)).astype(int)
    rows["diabetes"] = (random.random(count) < 0.2 + 0.05 * (rows["age"] - 20)).astype(float)
    rows.loc[:49, "age"] = np.nan
    rows.loc[30:99, "site"] = None
    rows.loc[95:104, "diabetes"] = np.nan
    return rows


def test_the_planned_set_comes_first_and_each_set_once(write_plan):
    plan = write_plan(people(), edges=TWO_WAYS, members=("site",), alternatives=(("age",), ("age", "site"), ("site",)))
    result = fit(plan)
    told = [(adjusted.members, adjusted.origins) for adjusted in result.adjusted]
    assert told == [
        (("site",), ("planned", "alternative", "minimal")),
        (("age",), ("alternative", "minimal")),
        (("age", "site"), ("alternative",)),
    ]
    assert all(adjusted.sufficient for adjusted in result.adjusted)
    assert result.adjusted[1].rationale == "Why not."


def test_crude_and_adjusted_are_on_the_same_rows(write_plan):
    rows = people()
    result = fit(write_plan(rows, edges=TWO_WAYS, members=("site",), measure="risk ratio"))
    site, age = result.adjusted
    for adjusted, variable in ((site, "site"), (age, "age")):
        complete = rows.dropna(subset=[variable, "diabetes"])
        assert adjusted.rows == len(complete)
        risks = complete.groupby("night_work")["diabetes"].mean()
        assert adjusted.crude.estimate == pytest.approx(risks[1] / risks[0], rel=1e-10)
    assert site.crude.estimate != age.crude.estimate
    assert result.crude == site.crude
    assert result.rows == site.rows


def test_the_rows_that_were_dropped_are_counted_by_variable(write_plan):
    result = fit(write_plan(people(), edges=TWO_WAYS, members=("age", "site")))
    assert result.rows_total == 600
    assert result.missing == {"night_work": 0, "age": 50, "site": 70, "diabetes": 10}
    assert result.rows == 600 - 105
    note = next(finding for finding in result.findings if finding.code == "data-rows-dropped")
    assert "105 of 600 rows" in note.message


@pytest.mark.parametrize("value", [np.nan, None])
def test_not_a_number_in_parquet_is_missing_like_an_empty_field_in_csv(write_plan, value):
    rows = people()
    rows["age"] = rows["age"].astype(object).where(rows["age"].notna(), value).astype(float)
    results = [fit(write_plan(rows, edges=TWO_WAYS, data=data)).to_dict() for data in ("rows.csv", "rows.parquet")]
    for result in results:
        result.pop("findings")
    assert results[0]["missing"] == results[1]["missing"]
    assert results[0]["adjusted"][0]["estimate"] == pytest.approx(results[1]["adjusted"][0]["estimate"], rel=1e-12)


def test_blank_text_is_missing_in_both_formats(write_plan):
    rows = people()
    rows.loc[200:209, "site"] = "  "
    for data in ("rows.csv", "rows.parquet"):
        assert fit(write_plan(rows, edges=TWO_WAYS, data=data)).missing["site"] == 80


def test_a_set_that_is_not_sufficient_is_fitted_with_a_warning(write_plan):
    result = fit(write_plan(people(), edges=TWO_WAYS, members=()))
    planned = result.adjusted[0]
    assert not planned.sufficient
    assert planned.estimate == result.crude.estimate
    (finding,) = [finding for finding in planned.findings if finding.severity == "warning"]
    assert finding.code == "adjustment-insufficient"
    assert finding.line is not None


def test_a_set_with_an_unmeasured_variable_is_refused_and_the_others_fitted(write_plan):
    edges = f"{TWO_WAYS}\ngenes -> age\ngenes -> diabetes\ngenes: unmeasured"
    result = fit(write_plan(people(), edges=edges, members=("genes", "site")))
    planned, *others = result.adjusted
    assert planned.estimate is None
    assert [finding.code for finding in planned.findings] == ["adjustment-unmeasured"]
    assert ("site",) in [other.members for other in others if other.estimate is not None]


def test_sets_for_which_the_data_lack_a_column_are_left_out_with_a_note(write_plan):
    result = fit(write_plan(people().drop(columns="age"), edges=TWO_WAYS, members=("site",)))
    assert [adjusted.members for adjusted in result.adjusted] == [("site",)]
    note = next(finding for finding in result.findings if finding.code == "estimate-sets-without-data")
    assert "age" in note.message


def test_a_planned_set_for_which_the_data_lack_a_column_is_refused(write_plan):
    with pytest.raises(DataError, match="no column “age”"):
        fit(write_plan(people().drop(columns="age"), edges=TWO_WAYS, members=("age",)))


def test_the_limit_is_kept_and_said(write_plan):
    result = fit(write_plan(people(), edges=TWO_WAYS, members=()), limit=1)
    assert len(result.adjusted) == 2
    assert any(finding.code == "estimate-limit" for finding in result.findings)
    every = fit(write_plan(people(), edges=TWO_WAYS, members=()), limit=2)
    assert [adjusted.members for adjusted in every.adjusted] == [(), ("age",), ("site",)]
    assert not any(finding.code == "estimate-limit" for finding in every.findings)


def test_the_exposure_cannot_be_adjusted_for(write_plan):
    with pytest.raises(PlanError, match="is the exposure"):
        fit(write_plan(people(), edges=TWO_WAYS, members=("night_work",)))


def test_a_number_is_a_line_unless_stated_and_the_note_names_it(write_plan):
    silent = fit(write_plan(people(), edges=TWO_WAYS, members=("age",))).adjusted[0]
    stated = fit(write_plan(people(), edges=TWO_WAYS, members=("age",), forms={"age": "linear"})).adjusted[0]
    category = fit(write_plan(people(), edges=TWO_WAYS, members=("age",), forms={"age": "category"})).adjusted[0]
    assert silent.estimate == stated.estimate != category.estimate
    assert ["“age”" in f.message for f in silent.findings if f.code == "estimate-default-form"] == [True]
    assert not stated.findings


def test_a_direct_effect_adjusts_for_the_mediator(write_plan):
    edges = "night_work -> site -> diabetes\nnight_work -> diabetes\nage -> night_work\nage -> diabetes"
    result = fit(write_plan(people(), edges=edges, members=("age", "site"), effect="direct"))
    assert result.adjusted[0].origins == ("planned", "minimal")
    assert result.effect == "direct"


def test_the_dictionary_has_the_keys_that_others_rely_on(write_plan):
    told = json.loads(json.dumps(fit(write_plan(people(), edges=TWO_WAYS)).to_dict(), allow_nan=False))
    numbers = {"estimate", "lower", "upper", "standard_error"}
    assert {"measure", "rows", "crude", "adjusted"} <= told.keys()
    assert told["crude"].keys() == numbers
    assert numbers | {"set", "rows"} <= told["adjusted"][0].keys()
    assert told["adjusted"][0]["set"] == ["age", "site"]


def test_a_fit_shows_itself(write_plan):
    result = fit(write_plan(people(), edges=TWO_WAYS, members=("age", "site")))
    frame = result.to_frame()
    assert list(frame["set"]) == ["crude", "age, site", "age", "site"]
    assert frame["estimate"].tolist()[1] == result.adjusted[0].estimate
    assert f"{result.adjusted[0].estimate:.3g}" in str(result)
    assert "495 of 600 rows" in str(result)
    assert "<table" in result._repr_html_()


def test_names_are_escaped_in_html(write_plan):
    edges = '"<b>age</b>" -> night_work -> diabetes\n"<b>age</b>" -> diabetes'
    rows = people().rename(columns={"age": "<b>age</b>"})
    html = fit(write_plan(rows, edges=edges, members=("<b>age</b>",)))._repr_html_()
    assert "&lt;b&gt;age" in html
    assert "<b>" not in html
