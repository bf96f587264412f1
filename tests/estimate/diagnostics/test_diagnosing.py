"""The diagnostics of a fit against the same questions asked of the rows, with numpy and statsmodels."""

from __future__ import annotations

import json
import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from formulaic.transforms.cubic_spline import natural_cubic_spline
from statsmodels.stats.outliers_influence import variance_inflation_factor

from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics import diagnosing
from adjustplan.estimate.diagnostics.diagnosing import Diagnostics, NamedTest, diagnose
from adjustplan.estimate.diagnostics.wald import WaldTest
from adjustplan.estimate.loading import load
from adjustplan.estimate.modelling import Modelled, estimate_effect
from adjustplan.estimate.row_models import needs_rows

MEMBERS = ("age", "bmi", "site")
FORMS = {"age": "linear", "bmi": "spline(3)", "site": "category"}


def staff(count: int = 900, seed: int = 8) -> pd.DataFrame:
    """Ages in whole years and sizes in whole units, so that some people share a pattern."""
    random = np.random.default_rng(seed)
    age = random.integers(30, 42, count).astype(float)
    bmi = random.integers(19, 33, count).astype(float)
    site = random.choice(["east", "north", "west"], count, p=[0.5, 0.3, 0.2])
    lean = 0.12 * (age - 36) + 0.5 * (site == "west") + 0.05 * (bmi - 25)
    night = (random.random(count) < 1 / (1 + np.exp(0.2 - lean))).astype(float)
    risk = 1 / (1 + np.exp(1.2 - 0.4 * night - 0.06 * (age - 36) - 0.3 * (site == "north") - 0.05 * (bmi - 25)))
    return pd.DataFrame(
        {
            "age": age,
            "bmi": bmi,
            "site": site,
            "night_work": night,
            "diabetes": (random.random(count) < risk).astype(float),
            "glucose": 5 + 0.03 * age + 0.3 * night + random.normal(0, 0.8, count),
            "weight": random.choice([0.5, 1.0, 3.0], count),
            "years": random.choice([0.5, 1.0, 2.0], count),
            "trio": np.arange(count) // 3,
        }
    )


ROWS = staff()


@pytest.fixture
def diagnosed(write_plan):
    """Diagnostics of the planned set, and what they were made from."""

    def run(
        rows: pd.DataFrame = ROWS, *lines: str, members=MEMBERS, forms=FORMS, **more
    ) -> tuple[Diagnostics, Modelled]:
        plan = write_plan(rows, members=members, forms=forms, analysis="\n".join(lines), data="rows.parquet", **more)
        loaded = load(plan, 1)
        setting = loaded.setting
        names = sorted(members)
        complete = loaded.patterns.complete([setting.exposure, *names], pooled=not needs_rows(setting))
        adjusted = estimate_effect(complete, setting, names)
        found = diagnose(complete, setting, names, adjusted)
        assert found is not None
        json.dumps(found.to_dict(), allow_nan=False)
        return found, adjusted

    return run


def difference(column, night, weight=None, sampling=None) -> float:
    """The standardised difference written out for the rows (Austin 2009)."""
    sampling = np.ones(len(column)) if sampling is None else sampling
    carried = sampling if weight is None else sampling * weight
    one, none = night == 1, night == 0
    gap = np.average(column[one], weights=carried[one]) - np.average(column[none], weights=carried[none])
    variances = []
    for here in (one, none):
        middle = np.average(column[here], weights=sampling[here])
        share = np.average((column[here] - middle) ** 2, weights=sampling[here])
        binary = set(np.unique(column)) <= {0.0, 1.0}
        if sampling.std() == 0 and not binary:
            share *= here.sum() / (here.sum() - 1)
        variances.append(share)
    return gap / math.sqrt(sum(variances) / 2)


def propensity(rows: pd.DataFrame = ROWS) -> np.ndarray:
    """Of the rows, by statsmodels."""
    bmi = rows["bmi"].to_numpy()
    curve = natural_cubic_spline(
        bmi, knots=np.quantile(bmi, [1 / 3, 2 / 3]), lower_bound=bmi.min(), upper_bound=bmi.max(), constraints="center"
    )
    sites = [rows["site"] == name for name in ("north", "west")]
    design = np.column_stack([np.ones(len(rows)), rows["age"], *sites, *curve.values()]).astype(float)
    return np.asarray(sm.Logit(rows["night_work"], design).fit(disp=0, tol=1e-12).fittedvalues), design


def columns_of(rows: pd.DataFrame) -> dict[str, np.ndarray]:
    spread = (rows["bmi"] - rows["bmi"].mean()) ** 2
    shown = {"age": rows["age"], "bmi": rows["bmi"], "bmi, squared distance from the mean": spread}
    shown |= {f"site: {name}": (rows["site"] == name).astype(float) for name in ("east", "north", "west")}
    return {name: column.to_numpy() for name, column in shown.items()}


def test_balance_before_is_that_of_the_rows(diagnosed):
    found, _ = diagnosed()
    night = ROWS["night_work"].to_numpy()
    expected = {name: difference(column, night) for name, column in columns_of(ROWS).items()}
    assert {row.name: row.before for row in found.balance.rows} == pytest.approx(expected, rel=1e-9)
    assert all(row.after is None for row in found.balance.rows)
    assert [one.code for one in found.balance.findings] == ["estimate-imbalance"]


def test_balance_after_weighting_uses_the_weights_of_the_exposure_model(diagnosed):
    found, _ = diagnosed(ROWS, 'way = "weighting"')
    night, (logit, _) = ROWS["night_work"].to_numpy(), propensity()
    score = 1 / (1 + np.exp(-logit))
    weight = np.where(night == 1, 1 / score, 1 / (1 - score))
    expected = {name: difference(column, night, weight) for name, column in columns_of(ROWS).items()}
    assert {row.name: row.after for row in found.balance.rows} == pytest.approx(expected, abs=1e-8)
    each = [weight[night == level] for level in (1, 0)]
    sizes = [part.sum() ** 2 / (part**2).sum() for part in each]
    assert (found.weights.effective_exposed, found.weights.effective_reference) == pytest.approx(tuple(sizes))
    shares = np.where(night == 1, night.mean(), 1 - night.mean())
    stabilised = np.sort(weight * shares)[::-1]
    assert found.weights.summary.largest == pytest.approx(stabilised[0])
    assert found.weights.summary.held_by_one_percent == pytest.approx(stabilised[:9].sum() / stabilised.sum())


def test_weights_of_a_saturated_exposure_model_balance_exactly(diagnosed):
    found, _ = diagnosed(ROWS, 'way = "weighting"', members=("site",), forms={"site": "category"})
    assert max(abs(row.before) for row in found.balance.rows) > 0.1
    assert [row.after for row in found.balance.rows] == pytest.approx([0, 0, 0], abs=1e-12)


def test_weights_of_another_way_can_be_handed_in(diagnosed, write_plan):
    plan = write_plan(ROWS, members=MEMBERS, forms=FORMS, data="rows.parquet")
    loaded = load(plan, 1)
    complete = loaded.patterns.complete(["night_work", *sorted(MEMBERS)])
    planned = estimate_effect(complete, loaded.setting, sorted(MEMBERS))
    weighted = estimate_effect(complete, loaded.setting.by("weighting", "logistic"), sorted(MEMBERS))
    found = diagnose(complete, loaded.setting, sorted(MEMBERS), planned, weights=weighted.solution.balance)
    alone, _ = diagnosed(ROWS, 'way = "weighting"')
    assert found.balance.rows == alone.balance.rows
    assert found.weights == alone.weights
    with pytest.raises(ValueError, match="3 weights"):
        diagnose(complete, loaded.setting, sorted(MEMBERS), planned, weights=np.ones(3))


def test_balance_with_sampling_weights_is_that_of_the_population_sampled_from(diagnosed):
    found, _ = diagnosed(ROWS, 'weights = "weight"')
    night, sampling = ROWS["night_work"].to_numpy(), ROWS["weight"].to_numpy()
    shown = {row.name: row.before for row in found.balance.rows}
    for name in ("site: north", "site: east"):
        assert shown[name] == pytest.approx(difference(columns_of(ROWS)[name], night, sampling=sampling), rel=1e-9)
    # of a number the sample variance has n - 1, with weights scaled to the number of people
    assert shown["age"] == pytest.approx(difference(columns_of(ROWS)["age"], night, sampling=sampling), rel=2e-3)


def test_of_two_levels_the_rarer_one_is_shown(diagnosed):
    rows = ROWS.assign(site=np.where(ROWS["site"] == "north", "north", "other"))
    found, _ = diagnosed(rows)
    assert [row.name for row in found.balance.rows if row.name.startswith("site")] == ["site: north"]


def test_strata_without_a_group_are_counted_with_their_people(diagnosed):
    rows = ROWS[~((ROWS["site"] == "west") & (ROWS["night_work"] == 0))]
    found, _ = diagnosed(rows, 'way = "standardisation"')
    west = int((rows["site"] == "west").sum())
    assert (found.positivity.strata, found.positivity.without_reference, found.positivity.without_exposed) == (3, 1, 0)
    assert found.positivity.people_without_reference == west
    codes = [one.code for one in found.findings]
    assert codes.count("estimate-positivity") == 2  # the hole, and the exposure model that it breaks


def test_an_exposure_model_that_breaks_takes_nothing_else_with_it(diagnosed):
    rows = ROWS[~((ROWS["site"] == "west") & (ROWS["night_work"] == 0))]
    found, adjusted = diagnosed(rows)
    assert adjusted.estimate is not None
    assert found.overlap is None
    assert [each.diagnostic for each in found.absent] == ["Overlap"]
    assert any(line.startswith("  Overlap: not given") for line in found.lines())
    assert all(part is not None for part in (found.balance, found.influence, found.inflation, found.outcomes))
    assert all(one.severity != "error" for one in found.findings)


def test_overlap_is_the_propensity_of_the_rows_in_bins_of_five_or_none(diagnosed):
    found, _ = diagnosed()
    score = 1 / (1 + np.exp(-propensity()[0]))
    night = ROWS["night_work"].to_numpy()
    ranges = [(score[night == level].min(), score[night == level].max()) for level in (1, 0)]
    assert found.overlap.exposed_range == pytest.approx(ranges[0])
    assert found.overlap.reference_range == pytest.approx(ranges[1])
    low, high = max(ranges[0][0], ranges[1][0]), min(ranges[0][1], ranges[1][1])
    assert found.overlap.outside == ((score < low - 1e-9) | (score > high + 1e-9)).sum()
    for level, counts in ((1, found.overlap.exposed), (0, found.overlap.reference)):
        assert sum(counts) == (night == level).sum()
        assert all(count == 0 or count >= 5 for count in counts)
        assert np.histogram(score[night == level], found.overlap.edges)[0] == pytest.approx(counts)
    written = found.to_dict()["overlap"]
    assert written["exposed_range"] == [round(end, 3) for end in ranges[0]]


def test_outcomes_per_parameter_count_the_rarer_outcome_and_all_terms(diagnosed):
    found, _ = diagnosed()
    ill = int(ROWS["diabetes"].sum())
    assert found.outcomes.outcomes == min(ill, len(ROWS) - ill)
    assert found.outcomes.parameters == 1 + 1 + 3 + 2


def test_a_quantity_has_no_outcomes_per_parameter(diagnosed):
    found, _ = diagnosed(measure="mean difference", columns={"diabetes": "glucose"})
    assert found.outcomes is None
    assert [each.diagnostic for each in found.absent] == ["Outcomes per parameter"]
    assert not [one for one in found.findings if "parameter" in one.message]


def test_the_most_influential_person_of_a_risk_is_the_one_of_the_rows(diagnosed):
    found, adjusted = diagnosed(variance="robust")
    design = np.column_stack([propensity()[1], ROWS["night_work"]])
    model = sm.GLM(ROWS["diabetes"], design, family=sm.families.Binomial()).fit(tol=1e-12)
    moved = (design @ model.cov_params().to_numpy()[-1]) * (ROWS["diabetes"] - model.fittedvalues)
    size = np.abs(moved).max() * len(ROWS) / (len(ROWS) - 1) / adjusted.estimate.standard_error
    assert found.influence.known
    assert found.influence.at_most == pytest.approx(size, rel=1e-6)


def test_bounds_hold_the_most_influential_person_where_only_sums_are_known(diagnosed):
    few = ("site",)
    found, adjusted = diagnosed(
        members=few, forms={"site": "category"}, measure="mean difference", columns={"diabetes": "glucose"}
    )
    sites = [ROWS["site"] == name for name in ("north", "west")]
    design = np.column_stack([np.ones(len(ROWS)), *sites, ROWS["night_work"]]).astype(float)
    model = sm.OLS(ROWS["glucose"], design).fit()
    moved = (design @ model.normalized_cov_params.to_numpy()[-1]) * model.resid
    size = np.abs(moved).max() * len(ROWS) / (len(ROWS) - 1) / adjusted.estimate.standard_error
    assert not found.influence.known
    assert found.influence.at_least < size < found.influence.at_most
    assert any("somewhere between" in line for line in found.lines())


def test_leaving_out_the_person_found_moves_the_estimate_that_far_up_to_leverage(diagnosed):
    rows = ROWS.assign(bmi=ROWS["bmi"] + np.linspace(0, 0.5, len(ROWS)))  # nobody shares a pattern
    rows.loc[17, ["age", "glucose"]] = (70.0, 25.0)
    forms = {"age": "linear", "bmi": "linear", "site": "category"}
    found, adjusted = diagnosed(rows, forms=forms, measure="mean difference", columns={"diabetes": "glucose"})
    assert found.influence.known
    assert found.influence.at_most > 0.5
    assert "estimate-influential" in [one.code for one in found.findings]
    design = sm.add_constant(
        pd.get_dummies(rows[["age", "bmi", "site"]], drop_first=True, dtype=float).assign(night=rows["night_work"])
    )
    shifts = []
    whole = sm.OLS(rows["glucose"], design).fit().params["night"]
    for person in (17, 18, 400):
        left = rows.index != person
        shifts.append(sm.OLS(rows["glucose"][left], design[left]).fit().params["night"] - whole)
    # what is left out to first order is the person's pull on their own fitted value (Belsley, Kuh and Welsch 1980)
    leverage = sm.OLS(rows["glucose"], design).fit().get_influence().hat_matrix_diag[17]
    exact = found.influence.at_most * (len(rows) - 1) / len(rows) / (1 - leverage)
    assert np.abs(shifts[0]) / adjusted.estimate.standard_error == pytest.approx(exact, rel=1e-6)
    assert np.argmax(np.abs(shifts)) == 0


@pytest.mark.parametrize("variance", ["model", "robust"])
def test_a_straight_line_is_tested_against_the_curve_of_the_rows(diagnosed, variance):
    random = np.random.default_rng(2)
    rows = ROWS.assign(diabetes=(random.random(len(ROWS)) < 0.2 + 0.01 * (ROWS["age"] - 36) ** 2).astype(float))
    found, adjusted = diagnosed(rows, variance=variance)
    age = rows["age"].to_numpy()
    curve = natural_cubic_spline(
        age, knots=np.quantile(age, [0.25, 0.5, 0.75]), lower_bound=30, upper_bound=41, constraints="center"
    )
    line = propensity(rows)[1]
    bent = [np.asarray(column) for column in curve.values()][:3]
    # the straight line and three of the four columns span what the four span
    design = np.column_stack([line, rows["night_work"], *bent])
    kind = "HC0" if variance == "robust" else "nonrobust"
    family = sm.families.Binomial()
    model = sm.GLM(rows["diabetes"], design, family=family).fit(cov_type=kind, tol=1e-13)
    wald = model.wald_test(np.eye(design.shape[1])[-3:], use_f=False, scalar=True)
    (departure,) = found.linearity
    assert departure.variable == "age"
    assert departure.test.statistic == pytest.approx(float(wald.statistic), rel=1e-5)
    assert departure.test.degrees == 3
    night = line.shape[1]
    straight = sm.GLM(rows["diabetes"], design[:, : night + 1], family=family).fit(tol=1e-13)
    shift = (model.params.iloc[night] - straight.params.iloc[night]) / adjusted.estimate.standard_error
    assert departure.shift == pytest.approx(shift, rel=1e-5, abs=1e-7)
    assert "estimate-nonlinear" in [one.code for one in found.findings]


@pytest.mark.parametrize("way", ["standardisation", "doubly robust", "weighting"])
def test_the_shift_is_that_of_the_planned_way_with_the_curve(diagnosed, way):
    line, adjusted = diagnosed(ROWS, f'way = "{way}"')
    _, curved = diagnosed(ROWS, f'way = "{way}"', forms=FORMS | {"age": "spline(4)"})
    moved = math.log(curved.estimate.estimate / adjusted.estimate.estimate) / adjusted.estimate.standard_error
    assert line.linearity[0].shift == pytest.approx(moved, rel=1e-6)


def test_for_weighting_the_line_is_tested_in_the_model_of_the_exposure(diagnosed):
    random = np.random.default_rng(4)
    rows = ROWS.assign(night_work=(random.random(len(ROWS)) < 0.2 + 0.015 * (ROWS["age"] - 36) ** 2).astype(float))
    by_exposure, _ = diagnosed(rows, 'way = "weighting"')
    by_outcome, _ = diagnosed(rows)
    assert by_exposure.linearity[0].test.p < 1e-6
    assert by_outcome.linearity[0].test.p > 1e-3


def test_few_values_and_other_forms_are_not_tested_for_straightness(diagnosed):
    rows = ROWS.assign(age=30 + ROWS["age"] % 5)
    assert diagnosed(rows)[0].linearity == ()


def test_too_many_patterns_leave_later_lines_untested_and_say_so(diagnosed, monkeypatch):
    monkeypatch.setattr(diagnosing, "MOST_REFITTED", 1)
    found, _ = diagnosed(forms={"age": "linear", "bmi": "linear", "site": "category"})
    assert [one.variable for one in found.linearity] == ["age"]
    assert [each.diagnostic for each in found.absent] == ["Linearity of bmi"]


def test_variance_inflation_is_that_of_the_exposure_in_the_rows(diagnosed):
    found, _ = diagnosed()
    design = np.column_stack([propensity()[1], ROWS["night_work"]])
    assert found.inflation.contrast == pytest.approx(variance_inflation_factor(design, design.shape[1] - 1), rel=1e-8)


def test_a_number_as_exposure_is_balanced_by_correlation(diagnosed):
    rows = ROWS.assign(night_work=0.2 * ROWS["age"] + np.random.default_rng(1).normal(0, 1, len(ROWS)).round(1))
    found, _ = diagnosed(rows, contrast="{ exposed = 9, reference = 7 }")
    expected = {name: np.corrcoef(column, rows["night_work"])[0, 1] for name, column in columns_of(rows).items()}
    assert found.balance.measure == "correlation"
    assert {row.name: row.before for row in found.balance.rows} == pytest.approx(expected, rel=1e-9)
    assert found.positivity is None
    assert found.overlap is None
    assert {each.diagnostic for each in found.absent} == {"Positivity", "Overlap"}
    note = next(one for one in found.findings if one.code == "estimate-imbalance")
    assert "“age”" in note.message
    assert "correlations with the exposure" in found.lines()[1]


def test_of_several_levels_the_two_of_the_contrast_are_compared(diagnosed):
    shift = np.random.default_rng(6).choice(["day", "late", "night"], len(ROWS))
    rows = ROWS.assign(night_work=shift)
    found, _ = diagnosed(rows, contrast='{ exposed = "night", reference = "day" }')
    two = rows[shift != "late"]
    night = (two["night_work"] == "night").to_numpy(dtype=float)
    shown = {row.name: row.before for row in found.balance.rows}
    assert shown["age"] == pytest.approx(difference(two["age"].to_numpy(), night), rel=1e-9)
    assert found.positivity.people == len(two)
    assert sum(found.overlap.exposed) == night.sum()


def test_a_matched_study_gets_what_can_be_given(diagnosed):
    plain, _ = diagnosed()
    lines = ('model = "conditional logistic"', 'matched_set = "trio"')
    found, adjusted = diagnosed(ROWS, *lines, design="case-control")
    assert adjusted.estimate is not None
    assert found.outcomes.outcomes == plain.outcomes.outcomes
    assert [(row.name, row.before) for row in found.balance.rows] == [
        (row.name, pytest.approx(row.before)) for row in plain.balance.rows
    ]
    assert [each.variable for each in found.linearity] == [each.variable for each in plain.linearity]
    assert found.positivity == plain.positivity


def test_the_matched_set_that_matters_most_moves_the_estimate_by_what_is_said(write_plan):
    plan = write_plan(
        ROWS,
        members=MEMBERS,
        forms=FORMS,
        analysis='model = "conditional logistic"\nmatched_set = "trio"',
        design="case-control",
        data="rows.parquet",
    )
    loaded = load(plan, 1)
    complete = loaded.patterns.complete(["night_work", *sorted(MEMBERS)], pooled=False)
    adjusted = estimate_effect(complete, loaded.setting, sorted(MEMBERS))
    found = diagnose(complete, loaded.setting, sorted(MEMBERS), adjusted)
    trio = complete.keys["matched_set"].to_numpy()
    shifts = [
        math.log(estimate_effect(complete.only(trio != label), loaded.setting, sorted(MEMBERS)).estimate.estimate)
        - math.log(adjusted.estimate.estimate)
        for label in np.unique(trio)
    ]
    largest = max(map(abs, shifts)) / adjusted.estimate.standard_error
    # leaving out changes the curvature of the likelihood too, by about one set in a few hundred
    assert found.influence.at_most == pytest.approx(largest, rel=0.05)


@pytest.mark.parametrize("curved", [True, False])
def test_a_curve_in_the_hazard_is_found_and_a_line_is_left_in_peace(write_plan, curved):
    random = np.random.default_rng(12)
    age = random.uniform(30, 70, 3000).round(1)
    night = (random.random(3000) < 1 / (1 + np.exp(-(age - 50) / 20))).astype(int)
    push = ((age - 50) / 10) ** 2 / 2 if curved else (age - 50) / 20
    years = random.exponential(1 / np.exp(push + 0.3 * night - 1)).round(3) + 0.001
    rows = pd.DataFrame({"age": age, "night_work": night, "years": np.minimum(years, 6), "diabetes": 1 * (years < 6)})
    plan = write_plan(
        rows,
        measure="hazard ratio",
        members=("age",),
        edges="age -> night_work\nage -> diabetes\nnight_work -> diabetes",
        forms={"age": "linear"},
        analysis='time = "years"',
        data="rows.parquet",
    )
    loaded = load(plan, 1)
    complete = loaded.patterns.complete(["night_work", "age"], pooled=False)
    adjusted = estimate_effect(complete, loaded.setting, ["age"])
    (tested,) = diagnose(complete, loaded.setting, ["age"], adjusted).linearity
    assert tested.test.degrees == 3
    assert (tested.test.p < 1e-6) if curved else (tested.test.p > 1e-3)


def test_a_hazard_model_counts_events_and_takes_tests_of_proportional_hazards(write_plan):
    plan = write_plan(
        ROWS,
        measure="hazard ratio",
        members=MEMBERS,
        forms=FORMS | {"site": "stratum"},
        analysis='time = "years"',
        data="rows.parquet",
    )
    loaded = load(plan, 1)
    complete = loaded.patterns.complete(["night_work", *sorted(MEMBERS)], pooled=False)
    adjusted = estimate_effect(complete, loaded.setting, sorted(MEMBERS))
    named = NamedTest("night_work", WaldTest(7.5, 1, 0.0062))
    told = Finding("estimate-hazards", "They are not.", "Mend it.", "warning")
    found = diagnose(complete, loaded.setting, sorted(MEMBERS), adjusted, proportional_hazards=[named], findings=[told])
    assert found.outcomes.outcomes == ROWS["diabetes"].sum()
    assert found.outcomes.parameters == 1 + 1 + 3  # strata have baselines, not coefficients
    assert found.positivity.strata == 3
    assert "  Proportional hazards, night_work: χ² = 7.5, 1 degree of freedom, p = 0.0062" in found.lines()
    assert found.to_dict()["proportional_hazards"] == [
        {"name": "night_work", "statistic": 7.5, "degrees": 1, "p": 0.0062}
    ]
    assert told in found.findings


def test_arithmetic_that_breaks_down_in_one_place_stays_there(diagnosed, monkeypatch):
    def broken(*_):
        raise np.linalg.LinAlgError

    monkeypatch.setattr(diagnosing, "variance_inflation", broken)
    found, _ = diagnosed()
    assert found.inflation is None
    assert found.balance is not None
    assert [one.message for one in found.findings if one.code == "estimate-diagnostic"] == [
        "Variance inflation: the arithmetic broke down, so it could not be computed."
    ]


def test_without_a_set_only_the_estimate_itself_is_looked_at(diagnosed):
    found, _ = diagnosed(members=(), forms={})
    assert found.balance is None
    assert found.influence is not None
    assert found.outcomes.parameters == 1
    assert {each.diagnostic for each in found.absent} >= {"Balance", "Positivity", "Overlap", "Variance inflation"}


def test_a_set_that_poses_no_problem_has_no_diagnostics(write_plan):
    rows = ROWS.assign(site=np.where(ROWS["night_work"] == 1, "north", "west"))
    loaded = load(write_plan(rows, members=("site",), forms={"site": "category"}, data="rows.parquet"), 1)
    complete = loaded.patterns.complete(["night_work", "site"])
    adjusted = estimate_effect(complete, loaded.setting, ["site"])
    assert adjusted.estimate is None
    assert diagnose(complete, loaded.setting, ["site"], adjusted) is None


def test_text_and_json_hold_the_same_numbers(diagnosed):
    rows = ROWS.assign(site=np.random.default_rng(3).integers(10, 30, len(ROWS)).astype(str))
    found, _ = diagnosed(rows, 'way = "doubly robust"')
    written, text = found.to_dict(), "\n".join(found.lines())
    table = written["balance"]["rows"]
    assert len(table) == 3 + 20
    worst = sorted(table, key=lambda row: (round(abs(row["after"]), 2), abs(row["before"])), reverse=True)
    for row in worst[:12]:
        assert any(
            line.split() == [*row["covariate"].split(), f"{row['before']:+.2f}", f"{row['after']:+.2f}"]
            for line in found.lines()
        )
    assert f"and 11 more, none further than {abs(worst[12]['after']):.2f}" in text
    weights, influence = written["weights"], written["influence"]
    assert f"effective size {weights['effective_exposed']:.0f} of {weights['exposed']:.0f} exposed" in text
    assert f"largest {weights['largest']:.3g}" in text
    assert f"up to {influence['at_most']:.3g} standard errors" in text
    assert f"Variance inflation of the exposure: {written['variance_inflation']['contrast']:.3g}" in text
    assert f"Outcomes per parameter: {written['outcomes_per_parameter']['ratio']:.3g}" in text
    low, high = written["overlap"]["exposed_range"]
    assert f"propensity score {low:.3f} to {high:.3f}" in text
    for each in written["linearity"]:
        assert f"χ² = {each['statistic']:.3g}" in text
        assert f"{each['shift']:+.2f} standard errors" in text
    assert len(written["findings"]) == len(found.findings)
