"""The worked example of a textbook: weight gain in the follow-up of the first US national health examination survey.

Source of the data: NHEFS as the package ``causaldata`` carries it, 1,629 people, 1,566 of them weighed at both ends;
columns keep the names they have there. Source of the numbers: Hernán and Robins, Causal Inference: What If (Chapman &
Hall/CRC 2020), chapters 12, 13 and 15, from memory of the print; each is compared at the rounding of the print.

The book's models are one set of covariates throughout: sex, race, education, exercise and activity as categories; age,
baseline weight, intensity and years of the habit each with its square, which here are columns of their own.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import statsmodels.formula.api as smf
from causaldata import nhefs, nhefs_complete
from statsmodels.genmod.families import Binomial

from adjustplan.estimate import Fit, fit
from adjustplan.estimate.loading import load
from adjustplan.estimate.modelling import Modelled, estimate_effect
from adjustplan.plan import Plan, read_plan

CATEGORIES = ("sex", "race", "education", "exercise", "active")
NUMBERS = ("age", "wt71", "smokeintensity", "smokeyrs")
SQUARES = tuple(f"{name}_squared" for name in NUMBERS)
MEMBERS = (*CATEGORIES, *NUMBERS, *SQUARES)


def chosen(rows: pd.DataFrame) -> pd.DataFrame:
    """The columns used here, and the squares."""
    rows = rows[["qsmk", "wt82_71", "death", *CATEGORIES, *NUMBERS]].astype(float)
    rows[list(SQUARES)] = rows[list(NUMBERS)] ** 2
    return rows


@pytest.fixture(scope="module")
def people() -> pd.DataFrame:
    rows = chosen(nhefs_complete.load_pandas().data)
    assert len(rows) == 1566
    assert rows.notna().all(axis=None)
    return rows


def everybody() -> pd.DataFrame:
    """Those without a weight at the end too."""
    rows = chosen(nhefs.load_pandas().data)
    assert len(rows) == 1629
    assert rows.drop(columns="wt82_71").notna().all(axis=None)
    return rows


def planned(
    folder: Path,
    rows: pd.DataFrame,
    analysis: str,
    *,
    outcome: str = "wt82_71",
    measure: str = "mean difference",
    tables: str = "",
) -> Plan:
    """A plan with the book's covariates."""
    members = ", ".join(MEMBERS)
    forms = [f'{name} = "category"' for name in CATEGORIES] + [f'{name} = "linear"' for name in (*NUMBERS, *SQUARES)]
    folder.joinpath("study.edges").write_text(
        f"{members} -> qsmk\n{members} -> {outcome}\nqsmk -> {outcome}\n", encoding="utf-8"
    )
    folder.joinpath("plan.toml").write_text(
        "\n".join(
            [
                'title = "Weight gain"',
                'graph = "study.edges"',
                "[question]",
                'exposure = "qsmk"',
                f'outcome = "{outcome}"',
                "[study]",
                'design = "cohort"',
                "[adjustment]",
                f"set = {list(MEMBERS)}",
                "[analysis]",
                f'measure = "{measure}"',
                'data = "rows.csv"',
                analysis,
                "[analysis.forms]",
                *forms,
                tables,
            ]
        ),
        encoding="utf-8",
    )
    rows.to_csv(folder / "rows.csv", index=False)
    return read_plan(folder / "plan.toml")


def within(plan: Plan) -> Modelled:
    """What the planned way to adjust found on its way to the estimate."""
    loaded = load(plan, 0)
    members = loaded.sets[0].members
    return estimate_effect(loaded.patterns.complete([plan.question.exposure, *members]), loaded.setting, members)


def printed(result: Fit) -> tuple[float, float, float]:
    """The planned estimate and its interval, rounded as the book rounds."""
    chosen = result.adjusted[0]
    assert chosen.estimate is not None
    assert chosen.lower is not None
    assert chosen.upper is not None
    assert chosen.rows == 1566
    return round(chosen.estimate, 1), round(chosen.lower, 1), round(chosen.upper, 1)


def test_the_crude_difference_is_the_printed_one(tmp_path, people):
    # Section 12.1: 4.5 kg against 2.0 kg, a difference of 2.5 (95 % confidence interval 1.7 to 3.4).
    crude = fit(planned(tmp_path, people, "")).crude
    assert (round(crude.estimate, 1), round(crude.lower, 1), round(crude.upper, 1)) == (2.5, 1.7, 3.4)


@pytest.mark.parametrize("stabilised", ["true", "false"])
def test_the_weighted_difference_is_the_printed_one_with_known_weights(tmp_path, people, stabilised):
    # Sections 12.2 and 12.3: 3.4 (2.4 to 4.5), with weights of either kind, by a variance that takes them as known.
    tables = f"[analysis.weighting]\nknown = true\nstabilised = {stabilised}"
    assert printed(fit(planned(tmp_path, people, 'way = "weighting"', tables=tables))) == (3.4, 2.4, 4.5)


def test_counting_that_the_weights_were_estimated_narrows_the_interval(tmp_path, people):
    # Section 12.2 says so of the interval above: conservative, since it passes over that the weights were estimated.
    known = fit(planned(tmp_path, people, 'way = "weighting"', tables="[analysis.weighting]\nknown = true"))
    estimated = fit(planned(tmp_path, people, 'way = "weighting"'))
    assert estimated.adjusted[0].estimate == known.adjusted[0].estimate
    assert estimated.adjusted[0].standard_error < known.adjusted[0].standard_error


@pytest.mark.parametrize(
    ("stabilised", "mean", "lowest", "highest"), [("false", 2.00, 1.05, 16.7), ("true", 1.00, 0.33, 4.30)]
)
def test_the_weights_have_the_printed_mean_and_range(tmp_path, people, stabilised, mean, lowest, highest):
    # Section 12.2: from 1.05 to 16.7 with mean 2.00; section 12.3: stabilised, from 0.33 to 4.30 with mean 1.00.
    tables = f"[analysis.weighting]\nstabilised = {stabilised}"
    modelled = within(planned(tmp_path, people, 'way = "weighting"', tables=tables))
    weights, count = modelled.solution.balance, modelled.problem.moments.weight
    assert count.sum() == 1566
    assert round(float(np.average(weights, weights=count)), 2) == mean
    assert round(float(weights.min()), 2) == lowest
    assert float(f"{weights.max():.3g}") == highest


def test_the_probabilities_of_exposure_have_the_printed_means_and_range(tmp_path):
    # Section 15.2: the lowest is 0.053, the highest 0.793; 0.312 on average in the exposed, 0.245 in the others. They
    # are of all 1,629 people of the study, whether weighed at its end or not; so the outcome here is one that all have.
    plan = planned(tmp_path, everybody(), 'way = "weighting"', outcome="death", measure="risk difference")
    modelled = within(plan)
    scores, count = modelled.solution.scores, modelled.problem.moments.weight
    exposed = modelled.problem.is_exposed
    assert count.sum() == 1629
    assert round(float(scores.min()), 3) == 0.053
    assert round(float(scores.max()), 3) == 0.793
    assert round(float(np.average(scores[exposed], weights=count[exposed])), 3) == 0.312
    assert round(float(np.average(scores[~exposed], weights=count[~exposed])), 3) == 0.245


def test_the_weighted_odds_ratio_of_death_is_the_printed_one(tmp_path, people):
    # Section 12.4: a marginal odds ratio of 1.0 (0.8 to 1.4), with known weights.
    plan = planned(
        tmp_path,
        people,
        'way = "weighting"',
        outcome="death",
        measure="odds ratio",
        tables="[analysis.weighting]\nknown = true",
    )
    assert printed(fit(plan)) == (1.0, 0.8, 1.4)


def standardised(folder: Path, people: pd.DataFrame, tables: str = "") -> Plan:
    """Chapter 13: the outcome model has a product of exposure and intensity."""
    return planned(folder, people, 'way = "standardisation"\nmodifier = "smokeintensity"', tables=tables)


def test_the_standardised_difference_is_the_printed_one(tmp_path, people):
    # Section 13.3: 3.5 (2.6 to 4.5, by bootstrap).
    assert printed(fit(standardised(tmp_path, people))) == (3.5, 2.6, 4.5)


def test_the_standardised_means_over_everybody_are_the_printed_ones(tmp_path, people):
    # Section 13.3: 5.18 and 1.66. The model is that of the 1,566 people whose weight change is known, but the averages
    # are over all 1,629, so the model found here predicts for the others' covariates too.
    found = within(standardised(tmp_path, people)).solution
    terms = " + ".join([*(f"C({name})" for name in CATEGORIES), *NUMBERS, *SQUARES])
    reference = smf.ols(f"wt82_71 ~ qsmk * smokeintensity + {terms}", people).fit()
    here = [reference.predict(people.assign(qsmk=level)).mean() for level in (1.0, 0.0)]
    there = [reference.predict(everybody().assign(qsmk=level)).mean() for level in (1.0, 0.0)]
    assert found.means == pytest.approx(here, rel=1e-9)
    assert [round(mean, 2) for mean in there] == [5.18, 1.66]


def test_the_predicted_weight_gains_have_the_printed_mean_and_range(tmp_path, people):
    # Section 13.2: from -10.9 to 9.9 kg, 2.6 on average, as many as were observed.
    modelled = within(standardised(tmp_path, people))
    fitted = modelled.solution.regression.fitted
    assert round(float(np.average(fitted, weights=modelled.problem.moments.weight)), 1) == 2.6
    assert (round(float(fitted.min()), 1), round(float(fitted.max()), 1)) == (-10.9, 9.9)


def test_outcome_regression_without_products_is_the_printed_one(tmp_path, people):
    # Section 15.1: 3.5 (2.6 to 4.3).
    assert printed(fit(planned(tmp_path, people, ""))) == (3.5, 2.6, 4.3)


def test_the_doubly_robust_difference_is_that_of_statsmodels_on_the_rows(tmp_path, people):
    # The book prints none for these data; so its two models are fitted to the rows and combined here.
    terms = " + ".join([*(f"C({name})" for name in CATEGORIES), *NUMBERS, *SQUARES])
    outcome = smf.ols(f"wt82_71 ~ qsmk * smokeintensity + {terms}", people).fit()
    probability = smf.glm(f"qsmk ~ {terms}", people, family=Binomial()).fit(tol=1e-13).fittedvalues
    exposed, gain = people["qsmk"], people["wt82_71"]
    ends = [outcome.predict(people.assign(qsmk=level)) for level in (1.0, 0.0)]
    means = [
        (end + here / share * (gain - end)).mean()
        for end, here, share in zip(ends, (exposed, 1 - exposed), (probability, 1 - probability), strict=True)
    ]
    result = fit(planned(tmp_path, people, 'way = "doubly robust"\nmodifier = "smokeintensity"')).adjusted[0]
    assert result.estimate == pytest.approx(means[0] - means[1], rel=1e-8)
    assert 3.35 < result.estimate < 3.55  # between the weighted and the standardised difference as printed


def test_weighting_for_being_weighed_again_is_that_of_statsmodels_on_the_rows(tmp_path):
    # Section 12.6 prints 3.5 (2.5 to 4.5) with the exposure's model fitted to all 1,629; the package fits it to the
    # 1,566, each weighted to stand for those not weighed again. Both are computed here from the rows.
    rows = everybody()
    terms = " + ".join([*(f"C({name})" for name in CATEGORIES), *NUMBERS, *SQUARES])
    here = rows["wt82_71"].notna()
    staying = smf.glm(f"here ~ qsmk + {terms}", rows.assign(here=here * 1.0), family=Binomial()).fit(tol=1e-13)
    stands_for = (1 / staying.fittedvalues)[here]
    complete = rows[here]

    def difference(probability: pd.Series) -> float:
        is_exposed = complete["qsmk"] == 1
        weight = stands_for / probability.where(is_exposed, 1 - probability)
        groups = [complete["wt82_71"][one] @ weight[one] / weight[one].sum() for one in (is_exposed, ~is_exposed)]
        return float(groups[0] - groups[1])

    of_all = smf.glm(f"qsmk ~ {terms}", rows, family=Binomial()).fit(tol=1e-13).fittedvalues
    assert round(difference(of_all[here]), 1) == 3.5
    of_complete = smf.glm(f"qsmk ~ {terms}", complete, family=Binomial(), freq_weights=stands_for).fit(tol=1e-13)
    found = fit(planned(tmp_path, rows, 'way = "weighting"\nmissing = "inverse probability"'))
    assert found.adjusted[0].estimate == pytest.approx(difference(of_complete.fittedvalues), rel=1e-7)
