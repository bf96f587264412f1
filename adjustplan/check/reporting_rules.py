"""Rules about reporting: published recommendations that the plan does not meet."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.crosswalk import STROBE, TENNANT, crosswalk
from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding


@rule(
    "reporting-diagram",
    "note",
    finds="A recommendation on reporting causal diagrams that the plan does not meet.",
    matters="Readers can only weigh an adjustment whose question, diagram and set they see.",
    mend="Add what the finding names; the crosswalk shows all eight recommendations.",
    source="Tennant et al. 2021, Int J Epidemiol 50:620.",
)
def diagram(subject: Subject) -> Iterator[Finding]:
    yield from _unmet(subject, TENNANT)


@rule(
    "reporting-strobe",
    "note",
    finds="An item of STROBE on confounding that the plan does not meet.",
    matters="Journals ask for it, and a reader misses it.",
    mend="Add what the finding names; the crosswalk shows items 7, 9, 12 and 16.",
    source="von Elm et al. 2007, PLoS Med 4:e296.",
)
def strobe(subject: Subject) -> Iterator[Finding]:
    yield from _unmet(subject, STROBE)


def _unmet(subject: Subject, source: str) -> Iterator[Finding]:
    for item in crosswalk(subject):
        if item.source == source and item.status == "not met":
            message = f"{item.source}, {item.number}: {item.remark}"
            yield subject.finding(message, item.words, *item.key)
