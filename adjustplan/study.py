"""Study designs: what kind of study stands behind a plan, and which measures it can estimate.

How people came to be in the data decides what can be read off them. A case-control study takes as many non-cases as
its planner likes, so the risk among its people says nothing about the risk in the population, and no risk ratio can
come of it; a case series has no comparison at all. Each design is one row of data here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal, get_args

DesignName = Literal["cohort", "case-control", "cross-sectional", "trial", "ecological", "case-series"]
Measure = Literal["mean difference", "risk ratio", "odds ratio"]

MEASURES: tuple[Measure, ...] = get_args(Measure)


@dataclass(frozen=True, slots=True)
class Design:
    """A study design.

    Attributes
    ----------
    name : str
        As the plan writes it.
    meaning : str
        One sentence on who is observed and in what order.
    measures : tuple of str
        The measures of effect that it can estimate.
    refusal : str
        Why it cannot estimate the others; empty where it can estimate all.
    """

    name: DesignName
    meaning: str
    measures: tuple[Measure, ...]
    refusal: str = ""


_DESIGNS = (
    Design("cohort", "People are followed from exposure to outcome.", MEASURES),
    Design(
        "case-control",
        "People with the outcome and people without it are sampled, and their past exposure is compared.",
        ("odds ratio",),
        "the sampling fixes how many people have the outcome, so risks and means in the data are not those of the"
        " population; an odds ratio does not depend on it",
    ),
    Design("cross-sectional", "Exposure and outcome are observed at the same time.", MEASURES),
    Design("trial", "The exposure is assigned at random.", MEASURES),
    Design("ecological", "Groups, not people, are observed.", MEASURES),
    Design(
        "case-series",
        "Only people with the outcome are described.",
        (),
        "nobody without the outcome is observed, so there is nothing to compare with",
    ),
)

DESIGNS: Mapping[str, Design] = MappingProxyType({design.name: design for design in _DESIGNS})
