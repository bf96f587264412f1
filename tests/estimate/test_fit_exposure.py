"""The contrast of the plan decides which exposure levels are compared, and how the exposure enters.

Source of truth: statsmodels on the rows, with the model matrix that the test writes out itself.
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.formula.api as smf
from formulaic.transforms.cubic_spline import natural_cubic_spline

from adjustplan.errors import DataError
from adjustplan.estimate import fit

EDGES = "age -> night_work -> diabetes\nage -> diabetes"


def people(count: int = 1200) -> pd.DataFrame:
    """A dose of 0 to 3, the same in words, hours as a number, and an outcome that follows the dose."""
    random = np.random.default_rng(12)
    dose = random.integers(0, 4, count)
    rows = pd.DataFrame({"age": random.integers(20, 26, count), "dose": dose})
    rows["words"] = np.array(["days", "evenings", "nights", "rotating"])[dose]
    rows["hours"] = np.round(20 + 5 * dose + random.normal(0, 3, count), 1)
    rows["any"] = (dose > 0).astype(int)
    rows["code"] = rows["any"] + 1
    rows["diabetes"] = (random.random(count) < 0.2 + 0.1 * dose).astype(int)
    return rows


def planned(write_plan, column: str, **settings):
    """The planned result for one way of telling the exposure."""
    settings = {"members": ("age",), "edges": EDGES, "columns": {"night_work": column}, **settings}
    settings["forms"] = {"age": "linear", **settings.get("forms", {})}
    result = fit(write_plan(people(), **settings))
    return result, result.adjusted[0]


def refusal(write_plan, column: str, **settings) -> str:
    with pytest.raises(DataError) as caught:
        planned(write_plan, column, **settings)
    (finding,) = caught.value.findings
    assert finding.code == "data-contrast"
    assert finding.line is not None
    return str(finding)


def log_odds(formula: str, name: str) -> float:
    return float(smf.logit(formula, people()).fit(disp=0, tol=1e-12).params[name])


def test_two_levels_of_a_text_exposure_are_compared_and_the_others_stay(write_plan):
    contrast = '{ exposed = "rotating", reference = "evenings" }'
    result, got = planned(write_plan, "words", contrast=contrast)
    name = "C(words, Treatment('evenings'))[T.rotating]"
    expected = log_odds("diabetes ~ C(words, Treatment('evenings')) + age", name)
    assert math.log(got.estimate) == pytest.approx(expected, rel=1e-8)
    assert result.contrast == ("rotating", "evenings")
    assert got.rows == len(people())


def test_a_text_exposure_needs_a_contrast(write_plan):
    assert "“days”, “evenings”, “nights”, “rotating”" in refusal(write_plan, "words")


def test_a_contrast_that_is_not_in_the_data_is_refused_with_the_nearest_level(write_plan):
    said = refusal(write_plan, "words", contrast='{ exposed = "rotatin", reference = "days" }')
    assert "Did you mean “rotating”?" in said


def test_words_for_a_zero_one_exposure_are_only_words(write_plan):
    plain, one = planned(write_plan, "any")
    worded, other = planned(write_plan, "any", contrast='{ exposed = "any nights", reference = "days only" }')
    assert one.estimate == other.estimate
    assert (plain.contrast, worded.contrast) == (("1", "0"), ("any nights", "days only"))


@pytest.mark.parametrize("levels", [('"0"', '"1"'), ("false", "true"), ("0.0", "1.0"), ('"no"', '"yes"')])
def test_a_turned_contrast_is_never_taken_for_words(write_plan, levels):
    _, straight = planned(write_plan, "any")
    _, turned = planned(write_plan, "any", contrast=f"{{ exposed = {levels[0]}, reference = {levels[1]} }}")
    assert turned.estimate == pytest.approx(1 / straight.estimate, rel=1e-9)


def test_half_words_are_refused(write_plan):
    assert "“nights” is not a level" in refusal(write_plan, "any", contrast='{ exposed = "nights", reference = 0 }')


def test_a_level_cannot_be_compared_with_itself(write_plan):
    assert "with itself" in refusal(write_plan, "dose", contrast="{ exposed = 1, reference = 1 }")


def test_two_codes_need_to_be_told_apart(write_plan):
    assert "“1”, “2”" in refusal(write_plan, "code")
    _, got = planned(write_plan, "code", contrast="{ exposed = 2, reference = 1 }")
    _, same = planned(write_plan, "any")
    assert got.estimate == pytest.approx(same.estimate, rel=1e-10)


def test_a_few_doses_are_categories_when_the_contrast_names_two(write_plan):
    result, got = planned(write_plan, "dose", contrast="{ exposed = 3, reference = 1 }")
    name = "C(dose, Treatment(1))[T.3]"
    assert math.log(got.estimate) == pytest.approx(log_odds("diabetes ~ C(dose, Treatment(1)) + age", name), rel=1e-8)
    assert any("categories" in finding.message for finding in result.findings)


def test_a_stated_line_is_scaled_to_the_contrast(write_plan):
    contrast = "{ exposed = 3, reference = 1 }"
    _, got = planned(write_plan, "dose", contrast=contrast, forms={"night_work": "linear"})
    slope = log_odds("diabetes ~ dose + age", "dose")
    assert math.log(got.estimate) == pytest.approx(2 * slope, rel=1e-8)


def test_a_number_without_a_contrast_is_told_per_unit_with_a_note(write_plan):
    result, got = planned(write_plan, "hours")
    assert math.log(got.estimate) == pytest.approx(log_odds("diabetes ~ hours + age", "hours"), rel=1e-8)
    assert [f.severity for f in result.findings if f.code == "estimate-exposure-form"] == ["note"]
    assert "one unit more" in str(result)


def test_a_number_with_a_contrast_outside_the_data_is_a_line(write_plan):
    _, got = planned(write_plan, "hours", contrast="{ exposed = 40.05, reference = 20.05 }")
    slope = log_odds("diabetes ~ hours + age", "hours")
    assert math.log(got.estimate) == pytest.approx(20 * slope, rel=1e-8)


def test_a_number_cannot_be_compared_in_words(write_plan):
    assert "not two numbers" in refusal(write_plan, "hours", contrast='{ exposed = "many", reference = "few" }')


def test_a_spline_of_the_exposure_gives_the_difference_of_the_curve(write_plan):
    contrast = "{ exposed = 35, reference = 22 }"
    _, got = planned(write_plan, "hours", contrast=contrast, forms={"night_work": "spline(3)"})
    rows = people()
    hours = rows["hours"].to_numpy()
    knots = np.quantile(hours, [1 / 3, 2 / 3])
    basis = natural_cubic_spline(
        np.concatenate([hours, [35, 22]]),
        knots=knots,
        lower_bound=hours.min(),
        upper_bound=hours.max(),
        constraints="center",
    )
    curve = np.column_stack(list(basis.values()))
    for place in range(3):
        rows[f"curve{place}"] = curve[:-2, place]
    model = smf.logit("diabetes ~ curve0 + curve1 + curve2 + age", rows).fit(disp=0, tol=1e-12)
    step = curve[-2] - curve[-1]
    names = ["curve0", "curve1", "curve2"]
    variance = step @ model.cov_params().loc[names, names].to_numpy() @ step
    assert math.log(got.estimate) == pytest.approx(step @ model.params[names].to_numpy(), rel=1e-8)
    assert got.standard_error == pytest.approx(math.sqrt(variance), rel=1e-8)


def test_yes_and_no_are_understood_in_a_text_file(write_plan):
    rows = people().assign(any=lambda table: table["any"].map({1: "yes", 0: "no"}))
    settings = {
        "members": ("age",),
        "edges": EDGES,
        "columns": {"night_work": "any"},
        "forms": {"age": "linear"},
    }
    contrast = '{ exposed = "yes", reference = "no" }'
    _, expected = planned(write_plan, "any")
    for data in ("rows.csv", "rows.parquet"):
        got = fit(write_plan(rows, contrast=contrast, data=data, **settings)).adjusted[0]
        assert got.estimate == pytest.approx(expected.estimate, rel=1e-10)
