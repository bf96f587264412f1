"""Populations whose every probability is known, and samples from them.

Two covariates make six strata; the exposure has a probability in each stratum, and the outcome a distribution given
both. All combinations are listed with their probability, so a sample of independent people is one multinomial draw, and
what is true of the population is a sum over the list. Nothing here estimates anything.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from itertools import product

import numpy as np
import pandas as pd
from scipy.stats import nbinom, poisson

from adjustplan.data import Moments, Outcome, Patterns

Stratum = tuple[float, float]
STRATA: dict[Stratum, float] = dict(
    zip(product((0.0, 1.0, 2.0), (0.0, 1.0)), (0.20, 0.15, 0.25, 0.10, 0.12, 0.18), strict=True)
)
Outcomes = Mapping[float, float]
"""The probability of each value of the outcome."""


def expit(value: float) -> float:
    return 1 / (1 + math.exp(-value))


def yes_no(risk: float) -> Outcomes:
    return {1.0: risk, 0.0: 1 - risk}


def share(stratum: Stratum) -> Mapping[float, float]:
    """The exposure, by a logistic model of main effects."""
    return yes_no(expit(-0.9 + 0.5 * stratum[0] + 0.6 * stratum[1]))


@dataclass(frozen=True, eq=False)
class Study:
    """A population, and the samples from it.

    ``draw`` gives one sample; ``mean`` is the expected outcome (per unit of time) of a level in a stratum, and ``time``
    the expected time at risk of a stratum; ``planted`` is the conditional effect, a logarithm where it is of a ratio.
    """

    draw: Callable[[np.random.Generator], Patterns]
    mean: Callable[[float, Stratum], float]
    planted: float = math.nan
    time: Callable[[Stratum], float] = field(default=lambda stratum: 1.0)  # noqa: ARG005


def as_patterns(atoms: pd.DataFrame, counts: np.ndarray, *, pooled: bool = True) -> Patterns:
    """So many people of each kind, as patterns of exposure and covariates (and cluster), or as they are."""
    seen = counts > 0
    here, people = atoms[seen], counts[seen].astype(np.int64)
    parts = [here[name].to_numpy() for name in ("outcome", "time", "weight")]
    moments = Moments.of_equals(people, *parts)
    lines = np.arange(len(here))
    if pooled:
        _, lines, group = np.unique(here["pattern"].to_numpy(), return_index=True, return_inverse=True)
        moments = moments.pool(group.ravel(), len(lines))
    chosen = here.iloc[lines].reset_index(drop=True)
    values = chosen[["night_work", "site", "senior", "group"]]
    keys = chosen[[name for name in ("cluster", "matched_set") if name in atoms]]
    outcome = Outcome("number", int(counts.sum()), 0, 0, float(parts[0].min()), float(parts[0].max()))
    return Patterns(values, dict.fromkeys(values, "number"), moments.people, moments, outcome, keys)


def kinds_of_people(
    outcome: Callable[[float, Stratum, float], Outcomes],
    exposure: Callable[[Stratum], Mapping[float, float]] = share,
    years: Callable[[Stratum], Mapping[float, float]] = lambda stratum: {1.0: 1.0},  # noqa: ARG005
    sampled: Callable[[float, Stratum], float] = lambda value, stratum: 1.0,  # noqa: ARG005
) -> pd.DataFrame:
    """Every combination with its probability; people sampled more often weigh less."""
    lines = [
        (level, *stratum, 2 * stratum[0] + stratum[1], value, time, often, of_all * here * span * there * often)
        for stratum, of_all in STRATA.items()
        for level, here in exposure(stratum).items()
        for time, span in years(stratum).items()
        for value, there in outcome(level, stratum, time).items()
        for often in [sampled(value, stratum)]
    ]
    names = ["night_work", "site", "senior", "group", "outcome", "time", "weight", "chance"]
    atoms = pd.DataFrame(lines, columns=names)
    atoms["weight"] = 1 / atoms["weight"]
    atoms["chance"] /= atoms["chance"].sum()
    atoms["pattern"] = atoms.groupby(["night_work", "site", "senior"]).ngroup()
    return atoms


def sample(atoms: pd.DataFrame, people: int, *, pooled: bool = True) -> Callable[[np.random.Generator], Patterns]:
    """Samples of independent people."""
    chances = atoms["chance"].to_numpy()
    return lambda random: as_patterns(atoms, random.multinomial(people, chances), pooled=pooled)


def of_risks(
    risk: Callable[[float, Stratum], float],
    planted: float = math.nan,
    people: int = 2000,
    **parts: Callable[..., object],
) -> Study:
    atoms = kinds_of_people(lambda level, stratum, _: yes_no(risk(level, stratum)), **parts)
    return Study(sample(atoms, people), risk, planted)


def logistic_risk(level: float, stratum: Stratum) -> float:
    return expit(-1.3 + 0.4 * stratum[0] - 0.5 * stratum[1] + 0.8 * level)


def log_risk(level: float, stratum: Stratum) -> float:
    return math.exp(-1.9 + 0.25 * stratum[0] + 0.2 * stratum[1] + 0.45 * level)


def linear_risk(level: float, stratum: Stratum) -> float:
    return 0.15 + 0.08 * stratum[0] + 0.1 * stratum[1] + 0.12 * level


def irregular_risk(level: float, stratum: Stratum) -> float:
    """An effect that differs between groups."""
    return 0.2 + 0.1 * stratum[0] * stratum[1] + level * (0.25 - 0.1 * stratum[0] + 0.05 * stratum[1])


def three_levels(stratum: Stratum) -> Mapping[float, float]:
    some = 0.2 + 0.1 * stratum[0]
    return {0.0: 0.6 - 0.1 * stratum[0] - 0.1 * stratum[1], 1.0: some, 2.0: 0.2 + 0.1 * stratum[1]}


def three_risks(level: float, stratum: Stratum) -> float:
    return expit(-1.0 + 0.3 * stratum[0] + 0.4 * stratum[1] + (0.0, 0.6, -0.5)[int(level)])


def oversampled(value: float, stratum: Stratum) -> float:
    """People with the outcome are sampled three times as often, those of one site half as often."""
    return (3.0 if value else 1.0) * (0.5 if stratum[0] == 2.0 else 1.0)


def linear_mean(level: float, stratum: Stratum) -> float:
    return 6.0 + 0.5 * stratum[0] - 0.4 * stratum[1] + 0.3 * level


def around(middle: float, spread: float) -> Outcomes:
    """Three values, skewed to the right, with this mean and standard deviation."""
    steps, chances = np.array([-1.0, 0.5, 2.5]), np.array([0.5, 0.4, 0.1])
    steps = steps - steps @ chances
    return dict(zip(middle + spread * steps / math.sqrt(steps**2 @ chances), chances, strict=True))


def uneven(level: float, stratum: Stratum) -> float:
    return 0.7 + 1.5 * level + 0.5 * stratum[1]


def log_mean(level: float, stratum: Stratum) -> float:
    return math.exp(1.0 + 0.2 * stratum[0] - 0.3 * stratum[1] + 0.15 * level)


def of_means(mean: Callable[[float, Stratum], float], planted: float, *, even: bool) -> Study:
    def outcome(level: float, stratum: Stratum, _: float) -> Outcomes:
        return around(mean(level, stratum), 1.2 if even else uneven(level, stratum))

    return Study(sample(kinds_of_people(outcome), 1000), mean, planted)


def years(stratum: Stratum) -> Mapping[float, float]:
    return {0.5: 0.3, 1.0: 0.4, 3.0: 0.3} if stratum[0] else {0.5: 0.1, 2.0: 0.9}


def expected_years(stratum: Stratum) -> float:
    return sum(time * there for time, there in years(stratum).items())


def log_rate(level: float, stratum: Stratum) -> float:
    return math.exp(-1.6 + 0.3 * stratum[0] + 0.2 * stratum[1] + 0.4 * level)


def linear_rate(level: float, stratum: Stratum) -> float:
    return 0.2 + 0.1 * stratum[0] + 0.05 * stratum[1] + 0.15 * level


def of_rates(rate: Callable[[float, Stratum], float], planted: float, *, scatter: float = 0.0) -> Study:
    """Counts in person-time, Poisson or with a variance of μ + scatter μ²."""

    def outcome(level: float, stratum: Stratum, time: float) -> Outcomes:
        mean, values = rate(level, stratum) * time, np.arange(60)
        law = nbinom(1 / scatter, 1 / (1 + scatter * mean)) if scatter else poisson(mean)
        chances = law.pmf(values)
        return {float(value): chance for value, chance in zip(values, chances, strict=True) if chance > 1e-12}

    atoms = kinds_of_people(outcome, years=years)
    return Study(sample(atoms, 1000, pooled=not scatter), rate, planted, expected_years)


def of_clusters() -> Study:
    """120 clusters of about 40 people: half of them with many exposed, and half, independently, with many ill."""
    kinds, sizes = [], 120

    def exposed(more: float) -> Callable[[Stratum], Mapping[float, float]]:
        return lambda stratum: yes_no(0.4 + 0.05 * stratum[0] + 0.1 * stratum[1] + more)

    def ill(more: float) -> Callable[[float, Stratum, float], Outcomes]:
        return lambda level, stratum, _: yes_no(linear_risk(level, stratum) + more)

    for many_exposed, many_ill in product((-0.35, 0.35), (-0.14, 0.14)):
        kinds.append(kinds_of_people(ill(many_ill), exposed(many_exposed)))
    atoms = pd.concat([kinds[0].assign(cluster=float(number)) for number in range(sizes)], ignore_index=True)
    atoms["pattern"] += 100 * atoms["cluster"].astype(int)
    chances = np.array([kind["chance"] for kind in kinds])

    def draw(random: np.random.Generator) -> Patterns:
        people, kind = 20 + random.poisson(20, sizes), random.integers(0, 4, sizes)
        return as_patterns(atoms, random.multinomial(people, chances[kind]).ravel())

    return Study(draw, linear_risk, 0.12)


def of_survival(planted: float) -> Study:
    """400 people with exponential times; a quarter leave before."""
    atoms = kinds_of_people(lambda *_: {1.0: 1.0})
    hazard = np.exp(-0.4 * atoms["site"] + 0.5 * atoms["senior"] + planted * atoms["night_work"]).to_numpy()

    def draw(random: np.random.Generator) -> Patterns:
        line = random.choice(len(atoms), 400, p=atoms["chance"])
        falls_ill, leaves = random.exponential(1 / hazard[line]), random.uniform(0, 5, 400)
        people = atoms.iloc[line].reset_index(drop=True).assign(outcome=(falls_ill <= leaves).astype(float))
        found = as_patterns(people, np.ones(400, dtype=np.int64), pooled=False)
        keys = pd.DataFrame({"time": np.minimum(falls_ill, leaves)})
        return Patterns(found.values, found.kinds, found.rows, found.moments, found.outcome, keys)

    return Study(draw, lambda *_: math.nan, planted)


def of_matched_sets(planted: float) -> Study:
    """150 sets of four people, each set with a risk of its own that goes with the exposure."""
    atoms = kinds_of_people(lambda *_: {1.0: 1.0})
    values = atoms[["night_work", "site", "senior"]].to_numpy()

    def draw(random: np.random.Generator) -> Patterns:
        matched = np.repeat(np.arange(150), 4)
        own = random.normal(0, 1, 150)[matched]
        line = random.choice(len(atoms), 600, p=atoms["chance"])
        exposed = (random.random(600) < 1 / (1 + np.exp(0.3 - own))).astype(float)
        lean = -1 + own + 0.4 * values[line, 1] - 0.5 * values[line, 2] + planted * exposed
        people = atoms.iloc[line].reset_index(drop=True)
        people = people.assign(
            night_work=exposed,
            outcome=(random.random(600) < 1 / (1 + np.exp(-lean))).astype(float),
            matched_set=matched.astype(float),
        )
        return as_patterns(people, np.ones(600, dtype=np.int64), pooled=False)

    return Study(draw, lambda *_: math.nan, planted)


STUDIES = {
    "logistic": of_risks(logistic_risk, 0.8),
    "log-linear": of_risks(log_risk, 0.45),
    "linear": of_risks(linear_risk, 0.12),
    "irregular": of_risks(irregular_risk),
    "three levels": of_risks(three_risks, 0.6, exposure=three_levels),
    "oversampled, log-linear": of_risks(log_risk, 0.45, sampled=oversampled),
    "oversampled, logistic": of_risks(logistic_risk, 0.8, sampled=oversampled),
    "small, logistic": of_risks(logistic_risk, 0.8, people=150),
    "even means": of_means(linear_mean, 0.3, even=True),
    "uneven means": of_means(linear_mean, 0.3, even=False),
    "log means": of_means(log_mean, 0.15, even=False),
    "log rates": of_rates(log_rate, 0.4),
    "linear rates": of_rates(linear_rate, 0.15),
    "scattered rates": of_rates(log_rate, 0.4, scatter=0.8),
    "clusters": of_clusters(),
    "survival": of_survival(0.5),
    "matched sets": of_matched_sets(0.6),
}
