"""Study designs: what each can estimate, what order in time it shows, what it holds fixed, what threatens it.

How people came to be in the data decides what can be read off them. A case-control study takes as many people without
the outcome as its planner likes, so the risk among its people says nothing about the risk in the population; a case
series has nobody to compare with. Each design is one entry of data here; what follows from it for a graph is worked out
in ``consequences``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal, get_args

DesignName = Literal["cohort", "case-control", "cross-sectional", "trial", "ecological", "case-series"]
Measure = Literal[
    "mean difference",
    "mean ratio",
    "risk difference",
    "risk ratio",
    "odds ratio",
    "prevalence difference",
    "prevalence ratio",
    "rate difference",
    "rate ratio",
    "hazard ratio",
]
Sampling = Literal["cumulative", "incidence-density", "case-cohort"]
OutcomeType = Literal["binary", "continuous", "count", "time to event"]

MEASURES: tuple[Measure, ...] = get_args(Measure)
_MEANS: tuple[Measure, ...] = ("mean difference", "mean ratio")
_RISKS: tuple[Measure, ...] = ("risk difference", "risk ratio")
_PREVALENCES: tuple[Measure, ...] = ("prevalence difference", "prevalence ratio")
_RATES: tuple[Measure, ...] = ("rate difference", "rate ratio", "hazard ratio")

OUTCOME_TYPES: Mapping[Measure, tuple[OutcomeType, ...]] = MappingProxyType(
    {
        "mean difference": ("continuous", "count"),
        "mean ratio": ("continuous", "count"),
        "risk difference": ("binary",),
        "risk ratio": ("binary",),
        "odds ratio": ("binary",),
        "prevalence difference": ("binary",),
        "prevalence ratio": ("binary",),
        "rate difference": ("count", "time to event"),
        "rate ratio": ("count", "time to event"),
        "hazard ratio": ("time to event",),
    }
)
"""The types of outcome that each measure is made for."""


@dataclass(frozen=True, slots=True)
class Design:
    """A study design.

    Attributes
    ----------
    name : str
        As the plan writes it.
    meaning : str
        One sentence on who is observed, and in what order.
    measures : tuple of str
        The measures of effect that it can estimate.
    refusal : str
        Why it cannot estimate the others, as the end of a sentence; empty where it can estimate all.
    time_order : str
        Which order in time it shows, in one sentence.
    exposure_first : bool
        Whether the design itself puts the exposure before the outcome.
    holds_fixed : str
        What it conditions on, in one sentence.
    threats : tuple of str
        What threatens it most, each a few words.
    can_do : str
        What it is good for, in one sentence.
    unit : {"person", "group"}
        Whom a row of its data describes.
    """

    name: DesignName
    meaning: str
    measures: tuple[Measure, ...]
    refusal: str
    time_order: str
    exposure_first: bool
    holds_fixed: str
    threats: tuple[str, ...]
    can_do: str
    unit: Literal["person", "group"] = "person"


_DESIGNS = (
    Design(
        "cohort",
        "People free of the outcome are grouped by exposure and followed.",
        (*_MEANS, *_RISKS, "odds ratio", *_RATES),
        "its people are free of the outcome at the start, so it sees new cases and not how common the outcome is",
        "The exposure is known before the outcome comes about.",
        True,
        "Being free of the outcome at the start, and still being followed at the end.",
        ("confounding", "losses to follow-up", "immortal time", "prevalent users"),
        "It gives risks, rates and their comparison, for several outcomes of one exposure.",
    ),
    Design(
        "case-control",
        "People with the outcome and people without it are sampled, and their past exposure is compared.",
        ("odds ratio",),
        "the sampling fixes how many of its people have the outcome, so risks, rates, prevalences and means among them"
        " are not those of the population; an odds ratio does not depend on it",
        "The exposure is looked up after the outcome came about.",
        False,
        "Being sampled, which depends on the outcome and on what is matched for.",
        ("confounding", "selection of controls", "recall of the exposure", "unadjusted matching"),
        "It studies rare outcomes with few people, and several exposures of one outcome.",
    ),
    Design(
        "cross-sectional",
        "Exposure and outcome are observed in the same people at the same time.",
        (*_MEANS, *_PREVALENCES, "odds ratio"),
        "it sees who has the outcome and not who gets it, so it knows prevalence and no incidence",
        "None: which came first, the exposure or the outcome, cannot be seen.",
        False,
        "Being alive and present when observed, so long-lasting outcomes are over-represented.",
        ("confounding", "reverse causation", "selective survival"),
        "It gives the prevalence of exposure and outcome, and first comparisons.",
    ),
    Design(
        "trial",
        "The exposure is assigned at random, and people are followed.",
        (*_MEANS, *_RISKS, "odds ratio", *_RATES),
        "its people are free of the outcome at the start, so it sees new cases and not how common the outcome is",
        "The exposure is assigned before the outcome comes about.",
        True,
        "Being eligible and consenting, and still being followed at the end.",
        ("losses to follow-up", "non-adherence", "lack of blinding"),
        "It gives the effect of assignment without confounding.",
    ),
    Design(
        "ecological",
        "Groups, such as districts or years, are observed in place of people.",
        (*_MEANS, "rate difference", "rate ratio", *_RISKS, *_PREVALENCES),
        "it does not know which people in a group are exposed and which have the outcome",
        "Only between the periods in which the groups are observed.",
        False,
        "Belonging to a group.",
        ("confounding between groups", "reading group associations as individual ones", "migration between groups"),
        "It compares groups, and generates hypotheses about people.",
        "group",
    ),
    Design(
        "case-series",
        "Only people with the outcome are described.",
        (),
        "nobody without the outcome is observed, so there is nothing to compare with",
        "None.",
        False,
        "Having the outcome, and having been noticed.",
        ("no comparison", "selective reporting"),
        "It describes what cases have in common, raises signals, and shows what a comparative study should ask.",
    ),
)

DESIGNS: Mapping[str, Design] = MappingProxyType({design.name: design for design in _DESIGNS})

ODDS_RATIO_MEANS: Mapping[Sampling, str] = MappingProxyType(
    {
        "cumulative": "the odds ratio of the population, which is near the risk ratio only when the outcome is rare in"
        " every group (common practice: below 10 %)",
        "incidence-density": "the rate ratio, whether or not the outcome is rare, because controls are drawn from those"
        " at risk when each case comes about",
        "case-cohort": "the risk ratio, whether or not the outcome is rare, because controls are drawn from everybody"
        " at the start",
    }
)
"""What an odds ratio estimates under each sampling of controls (Miettinen 1976, Am J Epidemiol 103:226; Pearce 1993,
Int J Epidemiol 22:1189)."""
