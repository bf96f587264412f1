"""Data that cannot serve the plan: one clear finding each, all at once, and never a row of data."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from adjustplan.errors import DataError, PlanError
from adjustplan.estimate import fit


def people(count: int = 200) -> pd.DataFrame:
    """A study without faults."""
    random = np.random.default_rng(3)
    rows = pd.DataFrame({"age": random.integers(20, 60, count), "site": random.choice(["east", "west"], count)})
    rows["night_work"] = random.integers(0, 2, count)
    rows["diabetes"] = random.integers(0, 2, count)
    return rows


def refusal(plan) -> DataError:
    """The error that fitting ends in."""
    with pytest.raises(DataError) as caught:
        fit(plan)
    return caught.value


def only_finding(plan):
    """The one finding that fitting ends in."""
    (finding,) = refusal(plan).findings
    return finding


def test_a_study_without_faults_is_fitted(write_plan):
    assert fit(write_plan(people())).adjusted[0].estimate > 0


def test_a_missing_file_is_named(write_plan):
    finding = only_finding(write_plan())
    assert finding.code == "data-no-file"
    assert finding.file.endswith("rows.csv")


def test_a_file_of_another_kind_is_refused(write_plan):
    assert only_finding(write_plan(data="rows.doc")).code == "data-unknown-format"


@pytest.mark.parametrize(
    ("name", "content", "code"),
    [
        ("rows.csv", b"", "data-empty"),
        ("rows.parquet", b"", "data-empty"),
        ("rows.csv", b"age,site,night_work,diabetes\n", "data-no-rows"),
        ("rows.parquet", b"this is no parquet file at all", "data-unreadable"),
        ("rows.csv", "age,site,night_work,diabetes\n30,K\u00f6ln,1,0\n".encode("latin-1"), "data-not-utf8"),
        ("rows.csv", b"age,site,night_work,diabetes\n30,east,1,0\n31,west,0,1,7\n", "data-unreadable"),
        ("rows.csv", b"age,site,night_work,diabetes\n30,east,1,0\n31,west,0\n", "data-unreadable"),
        ("rows.csv", b'age,site,night_work,diabetes\n30,"east,1,0\n31,west,0,1\n', "data-unreadable"),
    ],
)
def test_an_unusable_file_is_refused_in_one_line(write_plan, tmp_path, name, content, code):
    plan = write_plan(data=name)
    tmp_path.joinpath(name).write_bytes(content)
    finding = refusal(plan).findings[0]
    assert finding.code == code
    assert "\n" not in str(finding)
    assert finding.remedy


def test_a_line_with_too_many_fields_is_placed_but_not_shown(write_plan, tmp_path):
    plan = write_plan()
    tmp_path.joinpath("rows.csv").write_text(
        "age,site,night_work,diabetes\n30,east,1,0\n31,west,0,1,secret\n", encoding="utf-8"
    )
    error = refusal(plan)
    assert error.findings[0].line == 3
    assert "secret" not in str(error)


def test_missing_columns_are_all_named_with_their_nearest_name(write_plan):
    rows = people().rename(columns={"age": "Age", "diabetes": "diabets"})
    error = refusal(write_plan(rows))
    assert [finding.code for finding in error.findings] == ["data-missing-column"] * 2
    assert "Did you mean “diabets”?" in str(error)
    assert "Did you mean “Age”?" in str(error)
    assert {finding.file.rpartition("/")[2] for finding in error.findings} == {"plan.toml"}


def test_a_column_named_twice_is_refused(write_plan, tmp_path):
    plan = write_plan(members=("age",), edges="age -> night_work -> diabetes\nage -> diabetes")
    tmp_path.joinpath("rows.csv").write_text("age,Age,night_work,diabetes\n30,3,1,0\n", encoding="utf-8")
    assert only_finding(plan).code == "data-column-twice"


@pytest.mark.parametrize("column", ["night_work", "diabetes"])
@pytest.mark.parametrize("value", [1, None])
def test_exposure_and_outcome_need_two_levels(write_plan, column, value):
    finding = only_finding(write_plan(people().assign(**{column: value})))
    assert finding.code == ("data-all-missing" if column == "diabetes" and value is None else "data-one-level")
    assert column in finding.message


@pytest.mark.parametrize("measure", ["odds ratio", "risk ratio"])
def test_an_outcome_of_one_and_two_is_not_guessed_at(write_plan, measure):
    rows = people()
    finding = only_finding(write_plan(rows.assign(diabetes=rows["diabetes"] + 1), measure=measure))
    assert finding.code == "data-outcome-codes"
    assert "“1”, “2”" in finding.message
    assert "Recode" in finding.remedy


def test_other_codes_in_the_outcome_are_shown(write_plan):
    rows = people()
    rows.loc[:3, "diabetes"] = 9
    finding = only_finding(write_plan(rows))
    assert finding.code == "data-outcome-codes"
    assert "“0”, “1”, “9”" in finding.message


def test_a_continuous_outcome_of_an_odds_ratio_shows_no_values(write_plan):
    rows = people()
    rows["diabetes"] = np.random.default_rng(1).normal(size=len(rows))
    finding = only_finding(write_plan(rows))
    assert finding.code == "data-outcome-codes"
    assert "200 rows" in finding.message


@pytest.mark.parametrize("measure", ["mean difference", "odds ratio"])
def test_a_text_outcome_is_refused_with_the_words_in_it(write_plan, measure):
    rows = people().astype({"diabetes": object})
    rows.loc[:4, "diabetes"] = "NA"
    finding = only_finding(write_plan(rows, measure=measure))
    assert finding.code == "data-outcome-text"
    assert "“NA”" in finding.message


def test_free_text_in_the_outcome_is_not_shown(write_plan):
    rows = people()
    rows["diabetes"] = [f"person {place}" for place in range(len(rows))]
    finding = only_finding(write_plan(rows))
    assert finding.code == "data-outcome-text"
    assert "person" not in finding.message


def test_numbers_spoilt_by_a_word_for_missing_are_not_guessed_at(write_plan):
    rows = people().astype({"age": object})
    rows.loc[:9, "age"] = "NA"
    finding = only_finding(write_plan(rows))
    assert finding.code == "data-text-numbers"
    assert "“NA” in 10 rows" in finding.message


def test_one_word_after_many_numbers_is_found_too(write_plan):
    rows = pd.concat([people()] * 200, ignore_index=True).astype({"age": object})
    rows.loc[len(rows) - 1, "age"] = "unknown"
    finding = only_finding(write_plan(rows))
    assert finding.code == "data-text-numbers"
    assert "“unknown” in 1 rows" in finding.message


def test_a_text_covariate_cannot_be_a_line(write_plan):
    finding = only_finding(write_plan(people(), forms={"site": "linear"}))
    assert finding.code == "data-text-numbers"
    assert "“east”, “west”" in finding.message


def test_a_word_for_missing_among_levels_is_a_level_with_a_warning(write_plan):
    rows = people()
    rows.loc[:19, "site"] = "missing"
    planned = fit(write_plan(rows)).adjusted[0]
    assert planned.estimate is not None
    assert [finding.severity for finding in planned.findings if finding.code == "data-missing-word"] == ["warning"]


@pytest.mark.parametrize("column", ["age", "night_work", "diabetes"])
def test_infinite_values_are_refused(write_plan, column):
    rows = people().astype({column: float})
    rows.loc[0, column] = np.inf
    measure = "mean difference" if column == "diabetes" else "odds ratio"
    finding = refusal(write_plan(rows, measure=measure, data="rows.parquet")).findings[0]
    assert finding.code == "data-infinite"


def test_a_date_is_no_covariate(write_plan):
    rows = people().assign(age=pd.Timestamp("2021-01-01"))
    assert only_finding(write_plan(rows, data="rows.parquet")).code == "data-unsupported-type"


def test_everything_that_is_wrong_is_said_at_once(write_plan):
    rows = people().astype({"age": object}).assign(night_work=1)
    rows["diabetes"] += 1
    rows.loc[:9, "age"] = "NA"
    codes = {finding.code for finding in refusal(write_plan(rows)).findings}
    assert codes == {"data-one-level", "data-outcome-codes", "data-text-numbers"}


@pytest.mark.parametrize(
    ("design", "measure"),
    [("case-control", "risk ratio"), ("case-control", "mean difference"), ("case-series", "odds ratio")],
)
def test_a_measure_that_the_design_cannot_estimate_is_refused(write_plan, design, measure):
    with pytest.raises(PlanError, match="cannot estimate") as caught:
        fit(write_plan(people(), design=design, measure=measure))
    assert caught.value.findings[0].line is not None


def test_a_case_control_study_can_estimate_an_odds_ratio(write_plan):
    assert fit(write_plan(people(), design="case-control", measure="odds ratio")).crude.estimate > 0
