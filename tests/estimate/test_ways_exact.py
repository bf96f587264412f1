"""On a population whose every probability is known, each way to adjust gives the number that follows from them.

The population is a list of all combinations of covariates, exposure and outcome, each one row weighted by its
probability; an estimate from it is what a way to adjust tends to in large samples. The truth is the back-door formula
written out (Pearl 1993, Statistical Science 8:266), Σ_l P(l) E[Y | a, l], and nothing is random.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from itertools import product

import pandas as pd
import pytest

from adjustplan.estimate import fit
from adjustplan.estimate.loading import load
from adjustplan.estimate.modelling import estimate_effect

MARGINAL = ("standardisation", "weighting", "doubly robust")
Level = float | str
Stratum = tuple[str, float]
SHARES: dict[Stratum, float] = dict(zip(product("enw", (0.0, 1.0)), (0.20, 0.15, 0.25, 0.10, 0.12, 0.18), strict=True))


def expit(value: float) -> float:
    return 1 / (1 + math.exp(-value))


def population(
    exposure: Callable[[Stratum], Mapping[Level, float]],
    outcome: Callable[[Level, Stratum], Mapping[float, float]],
    years: Callable[[Level, Stratum], float] = lambda level, stratum: 1.0,  # noqa: ARG005
) -> pd.DataFrame:
    """All combinations, from the distribution of the exposure in each stratum and of the outcome given both."""
    rows = [
        (site, senior, f"{site}{senior:.0f}", level, value, 1e5 * share * here * there, years(level, (site, senior)))
        for (site, senior), share in SHARES.items()
        for level, here in exposure((site, senior)).items()
        for value, there in outcome(level, (site, senior)).items()
    ]
    names = ["site", "senior", "group", "night_work", "diabetes", "weight", "years"]
    return pd.DataFrame(rows, columns=names)


def yes_no(risk: float) -> dict[Level, float]:
    return {1.0: risk, 0.0: 1 - risk}


def exposed_by(share: Callable[[Stratum], float]) -> Callable[[Stratum], Mapping[Level, float]]:
    return lambda stratum: yes_no(share(stratum))


def ill_by(risk: Callable[[Level, Stratum], float]) -> Callable[[Level, Stratum], Mapping[float, float]]:
    return lambda level, stratum: yes_no(risk(level, stratum))


def compared(measure: str, exposed: float, reference: float) -> float:
    """A measure of two means, written out."""
    if measure.endswith("difference"):
        return exposed - reference
    if measure == "odds ratio":
        return exposed / (1 - exposed) / (reference / (1 - reference))
    return exposed / reference


def back_door(measure: str, mean: Callable[[Level, Stratum], float], exposed: Level, reference: Level) -> float:
    """Σ_l P(l) E[Y | a, l] at both levels, compared."""
    return compared(
        measure,
        sum(share * mean(exposed, stratum) for stratum, share in SHARES.items()),
        sum(share * mean(reference, stratum) for stratum, share in SHARES.items()),
    )


@pytest.fixture
def adjusted(write_plan):
    """The planned estimate in a population."""

    def run(
        rows: pd.DataFrame, measure: str, way: str, *lines: str, members: tuple[str, ...] = ("site", "senior"), **rest
    ) -> float:
        covariates = ", ".join(members)
        edges = f"{covariates} -> night_work\n{covariates} -> diabetes\nnight_work -> diabetes"
        analysis = "\n".join([f'way = "{way}"', 'weights = "weight"', *lines])
        design = "cross-sectional" if measure.startswith("prevalence") else "cohort"
        plan = write_plan(
            rows,
            measure=measure,
            members=members,
            edges=edges,
            design=design,
            analysis=analysis,
            data="rows.parquet",
            **rest,
        )
        loaded = load(plan, 0)
        complete = loaded.patterns.complete(["night_work", *plan.adjustment.members])
        modelled = estimate_effect(complete, loaded.setting, loaded.sets[0].members)
        assert modelled.estimate is not None, modelled.findings
        return modelled.estimate.estimate

    return run


def irregular_share(stratum: Stratum) -> float:
    """A chance of exposure that no main effects reproduce."""
    return {"e0": 0.2, "e1": 0.7, "n0": 0.5, "n1": 0.3, "w0": 0.85, "w1": 0.4}[f"{stratum[0]}{stratum[1]:.0f}"]


def irregular_risk(level: Level, stratum: Stratum) -> float:
    """A risk that no main effects reproduce."""
    site, senior = stratum
    base = {"e": 0.05, "n": 0.15, "w": 0.3}[site] + (0.2 if senior and site != "n" else 0.0)
    return base + float(level) * (0.25 if site == "e" else 0.05 - 0.04 * senior)


def plain_share(stratum: Stratum) -> float:
    return expit({"e": -1.2, "n": 0.1, "w": 1.0}[stratum[0]] + 0.7 * stratum[1])


def plain_risk(level: Level, stratum: Stratum) -> float:
    return expit({"e": -1.5, "n": -0.6, "w": 0.4}[stratum[0]] - 0.9 * stratum[1] + 1.1 * float(level))


RISKS = ("risk difference", "risk ratio", "odds ratio", "prevalence difference", "prevalence ratio")


@pytest.mark.parametrize(("measure", "way"), list(product(RISKS, MARGINAL)))
def test_saturated_models_give_the_back_door_formula_of_risks(adjusted, measure, way):
    rows = population(exposed_by(irregular_share), ill_by(irregular_risk))
    found = adjusted(rows, measure, way, 'modifier = "group"', members=("group",))
    assert found == pytest.approx(back_door(measure, irregular_risk, 1.0, 0.0), rel=1e-9)


@pytest.mark.parametrize(("measure", "way"), list(product(("mean difference", "mean ratio"), MARGINAL)))
def test_saturated_models_give_the_back_door_formula_of_means(adjusted, measure, way):
    rows = population(
        exposed_by(irregular_share),
        lambda level, stratum: {
            4.0: irregular_risk(level, stratum),
            7.5: 0.25,
            11.0: 0.75 - irregular_risk(level, stratum),
        },
    )

    def mean(level: Level, stratum: Stratum) -> float:
        return 4.0 * irregular_risk(level, stratum) + 7.5 * 0.25 + 11.0 * (0.75 - irregular_risk(level, stratum))

    found = adjusted(rows, measure, way, 'modifier = "group"', members=("group",))
    assert found == pytest.approx(back_door(measure, mean, 1.0, 0.0), rel=1e-9)


def events(level: Level, stratum: Stratum) -> dict[float, float]:
    return {0.0: 1 - irregular_risk(level, stratum), 2.0: irregular_risk(level, stratum)}


def follow_up(level: Level, stratum: Stratum) -> float:
    """Shorter in the exposed, and by stratum."""
    return (2.0 if stratum[0] == "w" else 3.5) - 0.5 * float(level) * (1 + stratum[1])


@pytest.mark.parametrize("measure", ["rate difference", "rate ratio"])
def test_standardised_rates_are_averaged_over_time_at_risk(adjusted, measure):
    rows = population(exposed_by(irregular_share), events, follow_up)
    time = {
        stratum: share
        * sum(there * follow_up(level, stratum) for level, there in yes_no(irregular_share(stratum)).items())
        for stratum, share in SHARES.items()
    }
    rates = [
        sum(time[stratum] * 2 * irregular_risk(level, stratum) / follow_up(level, stratum) for stratum in SHARES)
        / sum(time.values())
        for level in (1.0, 0.0)
    ]
    lines = ('person_time = "years"', 'modifier = "group"')
    found = adjusted(rows, measure, "standardisation", *lines, members=("group",))
    assert found == pytest.approx(compared(measure, *rates), rel=1e-9)


@pytest.mark.parametrize("measure", ["rate difference", "rate ratio"])
def test_weighted_rates_are_events_over_time_had_all_had_the_level(adjusted, measure):
    rows = population(exposed_by(irregular_share), events, follow_up)
    rates = [
        sum(share * 2 * irregular_risk(level, stratum) for stratum, share in SHARES.items())
        / sum(share * follow_up(level, stratum) for stratum, share in SHARES.items())
        for level in (1.0, 0.0)
    ]
    found = adjusted(rows, measure, "weighting", 'person_time = "years"', members=("group",))
    assert found == pytest.approx(compared(measure, *rates), rel=1e-9)


@pytest.mark.parametrize("measure", ["rate difference", "rate ratio"])
def test_the_two_agree_where_time_at_risk_does_not_depend_on_the_exposure(adjusted, measure):
    rows = population(exposed_by(irregular_share), events, lambda _, stratum: follow_up(0.0, stratum))
    lines = ('person_time = "years"', 'modifier = "group"')
    standardised = adjusted(rows, measure, "standardisation", *lines, members=("group",))
    assert adjusted(rows, measure, "weighting", *lines, members=("group",)) == pytest.approx(standardised, rel=1e-9)


@pytest.mark.parametrize("measure", ["risk difference", "risk ratio", "odds ratio"])
class TestTheDoublyRobustEstimateIsRightIfEitherModelIs:
    """Each model has main effects only; whether it is right depends on the population."""

    def test_right_exposure_and_wrong_outcome(self, adjusted, measure):
        rows = population(exposed_by(plain_share), ill_by(irregular_risk))
        truth = back_door(measure, irregular_risk, 1.0, 0.0)
        assert adjusted(rows, measure, "doubly robust") == pytest.approx(truth, rel=1e-9)
        assert adjusted(rows, measure, "weighting") == pytest.approx(truth, rel=1e-9)
        assert abs(adjusted(rows, measure, "standardisation") / truth - 1) > 0.01

    def test_wrong_exposure_and_right_outcome(self, adjusted, measure):
        rows = population(exposed_by(irregular_share), ill_by(plain_risk))
        truth = back_door(measure, plain_risk, 1.0, 0.0)
        assert adjusted(rows, measure, "doubly robust") == pytest.approx(truth, rel=1e-9)
        assert adjusted(rows, measure, "standardisation") == pytest.approx(truth, rel=1e-9)
        assert abs(adjusted(rows, measure, "weighting") / truth - 1) > 0.01

    def test_but_not_if_neither_is(self, adjusted, measure):
        rows = population(exposed_by(irregular_share), ill_by(irregular_risk))
        truth = back_door(measure, irregular_risk, 1.0, 0.0)
        assert abs(adjusted(rows, measure, "doubly robust") / truth - 1) > 0.01


def trial() -> pd.DataFrame:
    """40 people, half of each stratum exposed: risks 1/2 against 1/5 in one, 4/5 against 1/2 in the other."""
    cells = [(0.0, 1.0, 5), (0.0, 0.0, 2), (1.0, 1.0, 8), (1.0, 0.0, 5)]
    return pd.DataFrame(
        [(senior, night, float(person < cases)) for senior, night, cases in cells for person in range(10)],
        columns=["senior", "night_work", "diabetes"],
    )


@pytest.mark.parametrize(
    ("way", "truth"),
    [
        # odds of 1 against 1/4 and 4 against 1: a ratio of 4 in both strata
        ("regression", 4.0),
        ("stratification", 4.0),
        # risks 13/20 and 7/20 of all: (13/7)²
        *((way, 169 / 49) for way in MARGINAL),
    ],
)
def test_an_odds_ratio_changes_under_adjustment_without_any_confounding(write_plan, way, truth):
    edges = "senior -> night_work\nsenior -> diabetes\nnight_work -> diabetes"
    result = fit(write_plan(trial(), members=("senior",), edges=edges, analysis=f'way = "{way}"'))
    assert result.crude.estimate == pytest.approx(169 / 49, rel=1e-9)
    assert result.adjusted[0].estimate == pytest.approx(truth, rel=1e-9)


@pytest.mark.parametrize("way", ["regression", "stratification", *MARGINAL])
def test_a_risk_difference_does_not(write_plan, way):
    edges = "senior -> night_work\nsenior -> diabetes\nnight_work -> diabetes"
    rows = trial()
    result = fit(
        write_plan(rows, measure="risk difference", members=("senior",), edges=edges, analysis=f'way = "{way}"')
    )
    assert result.crude.estimate == pytest.approx(0.3, rel=1e-9)
    assert result.adjusted[0].estimate == pytest.approx(0.3, rel=1e-9)


def three_shares(stratum: Stratum) -> dict[Level, float]:
    much = irregular_share(stratum) / 2
    return {"much": much, "some": 0.3, "none": 0.7 - much}


def three_risks(level: Level, stratum: Stratum) -> float:
    return irregular_risk(0.0, stratum) + {"none": 0.0, "some": 0.1, "much": 0.3 if stratum[1] else 0.15}[str(level)]


@pytest.mark.parametrize(("measure", "way"), list(product(("risk difference", "risk ratio", "odds ratio"), MARGINAL)))
@pytest.mark.parametrize(("exposed", "reference"), [("much", "none"), ("some", "much")])
def test_two_of_three_levels_are_compared_over_the_whole_population(adjusted, measure, way, exposed, reference):
    rows = population(three_shares, ill_by(three_risks))
    contrast = f'{{ exposed = "{exposed}", reference = "{reference}" }}'
    found = adjusted(rows, measure, way, 'modifier = "group"', members=("group",), contrast=contrast)
    assert found == pytest.approx(back_door(measure, three_risks, exposed, reference), rel=1e-9)


def doses(stratum: Stratum) -> dict[Level, float]:
    high = irregular_share(stratum) / 2
    return {3.0: high, 1.5: 0.2, 1.0: 0.15, 0.0: 0.65 - high}


def dose_risk(level: Level, stratum: Stratum) -> float:
    """A logistic curve whose slope depends on seniority."""
    slope = 0.5 + 0.3 * stratum[1]
    return expit({"e": -1.5, "n": -0.6, "w": 0.2}[stratum[0]] - 0.9 * stratum[1] + slope * float(level))


@pytest.mark.parametrize("measure", ["risk difference", "risk ratio", "odds ratio"])
def test_one_unit_more_compares_everybody_with_themselves(adjusted, measure):
    rows = population(doses, ill_by(dose_risk))
    people = [
        (share * there, level, stratum) for stratum, share in SHARES.items() for level, there in doses(stratum).items()
    ]
    truth = compared(
        measure,
        sum(share * dose_risk(float(level) + 1, stratum) for share, level, stratum in people),
        sum(share * dose_risk(level, stratum) for share, level, stratum in people),
    )
    found = adjusted(rows, measure, "standardisation", 'model = "logistic"', 'modifier = "senior"')
    assert found == pytest.approx(truth, rel=1e-9)


@pytest.mark.parametrize("measure", ["risk difference", "risk ratio", "odds ratio"])
def test_two_stated_doses_compare_everybody_at_both(adjusted, measure):
    rows = population(doses, ill_by(dose_risk))
    found = adjusted(
        rows,
        measure,
        "standardisation",
        'modifier = "senior"',
        contrast="{ exposed = 2.5, reference = 0.5 }",
        forms={"night_work": "linear"},
    )
    assert found == pytest.approx(back_door(measure, dose_risk, 2.5, 0.5), rel=1e-9)


def test_a_linear_outcome_has_the_same_effect_of_one_unit_by_regression_and_standardisation(adjusted):
    def gains(level: Level, stratum: Stratum) -> dict[float, float]:
        middle = 2.0 + 0.7 * float(level) + {"e": 0.0, "n": 1.0, "w": -0.5}[stratum[0]] + 0.4 * stratum[1]
        return {middle - 1: 0.3, middle + 3 / 7: 0.7}

    rows = population(doses, gains)
    for way in ("regression", "standardisation"):
        assert adjusted(rows, "mean difference", way) == pytest.approx(0.7, rel=1e-9)


def test_ten_times_the_weight_for_everybody_changes_no_estimate(adjusted):
    rows = population(exposed_by(irregular_share), ill_by(irregular_risk))
    more = rows.assign(weight=10 * rows["weight"])
    for way in ("regression", *MARGINAL):
        once, often = (adjusted(one, "odds ratio", way, members=("group",)) for one in (rows, more))
        assert often == pytest.approx(once, rel=1e-10)
