"""A crosswalk from published recommendations to the plan: met, not met, or not checkable, and where in the plan.

The recommendations of Tennant et al. (2021, Int J Epidemiol 50:620) on reporting causal diagrams, and STROBE's items on
confounding (von Elm et al. 2007, PLoS Med 4:e296), are given in our own words, from memory of the published tables.
What no program can decide, such as whether a graph holds every relevant variable, is called not checkable; what it can
count is said beside it.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from math import comb
from pathlib import Path
from typing import Literal

from adjustplan.check.subject import Subject
from adjustplan.plan.places import Key

Status = Literal["met", "not met", "not checkable"]
Answer = tuple[Status, str, Key]

TENNANT = "Tennant et al. 2021"
STROBE = "STROBE"


@dataclass(frozen=True, slots=True)
class Item:
    """One recommendation held against a plan: where it is from, its words, and the answer with its place."""

    source: str
    number: str
    words: str
    status: Status
    remark: str
    key: Key
    line: int | None

    def to_dict(self, path: Path) -> dict[str, str | int | None]:
        """The item as JSON has it, with the plan that it was held against."""
        told = {name: getattr(self, name) for name in ("source", "number", "words", "status", "remark", "line")}
        return {"file": str(path), **told}


def crosswalk(subject: Subject) -> Iterator[Item]:
    """Every recommendation, in the order of its source."""
    for source, number, words, answer in _ITEMS:
        status, remark, key = answer(subject)
        yield Item(source, number, words, status, remark, key, subject.plan.line(*key) if key else None)


def _question(subject: Subject) -> Answer:
    question = subject.plan.question
    absent = [name for name in ("population", "contrast") if not getattr(question, name)]
    if subject.plan.file.analysis is None:
        absent.append("measure")
    if absent:
        return "not met", f"Not stated: {', '.join(absent)}.", ("question",)
    return "met", "Exposure, outcome, effect, population, contrast and measure are stated.", ("question",)


def _diagram(subject: Subject) -> Answer:
    return "met", f"The graph is {subject.plan.file.graph}; the document draws it.", ("graph",)


def _unmeasured(subject: Subject) -> Answer:
    hidden = sum(variable.unmeasured for variable in subject.plan.graph)
    return "not checkable", f"Unmeasured variables in the graph: {hidden}.", ("graph",)


def _direction(subject: Subject) -> Answer:
    unplaced = [variable.name for variable in subject.plan.graph if variable.wave is None]
    said = "by waves" if not unplaced else "by its arrows"
    return "met", f"The picture runs from left to right, {said}.", ("graph",)


def _absent_arrows(subject: Subject) -> Answer:
    graph = subject.plan.graph
    bare = comb(len(graph), 2) - len(graph.arrows)
    return "not checkable", f"{bare} pairs of variables have no arrow; each is an assumption.", ("graph",)


def _implied_set(subject: Subject) -> Answer:
    key = ("adjustment", "set")
    if subject.plan.file.adjustment is None:
        return "not met", "No set is chosen.", key
    if not subject.verdict.sufficient:
        return "not met", "The chosen set is not sufficient by the graph.", key
    return "met", "The chosen set is sufficient; the document lists every minimal one.", key


def _implied_estimate(subject: Subject) -> Answer:
    status, remark, key = _implied_set(subject)
    if status == "met" and subject.plan.file.analysis is None:
        return "not met", "No analysis is planned.", key
    return status, "“fit” reports it for the chosen set." if status == "met" else remark, key


def _alternatives(subject: Subject) -> Answer:
    adjustment = subject.plan.file.adjustment
    others = adjustment.alternative if adjustment else []
    if any(not other.rationale.strip() for other in others):
        return "not met", "An alternative has no rationale.", ("adjustment", "alternative")
    return (
        "met",
        f"{len(others)} alternatives, each with a rationale." if others else "There are none.",
        ("adjustment",),
    )


def _variables(subject: Subject) -> Answer:
    count = len(subject.roles.variables) - 2
    return "met", f"Exposure, outcome and {count} covariates are named, and their roles follow.", ("question",)


def _bias(subject: Subject) -> Answer:
    study = subject.plan.study
    if study is None:
        return "not met", "No study design is stated.", ()
    return "met", "Confounding, selection and misclassification are judged on the graph.", ("study",)


def _control(subject: Subject) -> Answer:
    adjustment = subject.plan.file.adjustment
    if adjustment is None or not adjustment.rationale.strip():
        return "not met", "The chosen set has no rationale.", ("adjustment",)
    return "met", "The set, its rationale and the regression are stated.", ("adjustment",)


def _losses(subject: Subject) -> Answer:
    study = subject.plan.study
    if study is None:
        return "not met", "No study design is stated.", ()
    if study.design in ("cohort", "trial") and study.lost is None:
        return "not met", "Losses to follow-up are not in the graph.", ("study",)
    if study.design == "case-control" and study.matched and not set(study.matched) <= set(subject.members):
        return "not met", "A matching variable is not in the set.", ("study", "matched")
    return "met", "What the design calls for is stated.", ("study",)


def _sensitivity(subject: Subject) -> Answer:
    adjustment = subject.plan.file.adjustment
    others = len(adjustment.alternative) if adjustment else 0
    if others:
        return "met", f"{others} alternative sets are fitted beside the chosen one.", ("adjustment", "alternative")
    return "not checkable", "No alternative set is planned; other analyses may be.", ("adjustment",)


def _results(subject: Subject) -> Answer:
    if subject.plan.file.analysis is None:
        return "not met", "No analysis is planned.", ()
    return "met", "“fit” and the document show crude and adjusted estimates with intervals.", ("analysis",)


_ITEMS: tuple[tuple[str, str, str, Callable[[Subject], Answer]], ...] = (
    (TENNANT, "1", "State which effect of what on what is asked for, and in whom.", _question),
    (TENNANT, "2", "Show the causal diagram behind each question.", _diagram),
    (TENNANT, "3", "Draw every relevant variable, measured or not.", _unmeasured),
    (TENNANT, "4", "Lay the diagram out so that all arrows run one way.", _direction),
    (TENNANT, "5", "Leave an arrow out only for a reason.", _absent_arrows),
    (TENNANT, "6", "Name the adjustment set that the diagram implies.", _implied_set),
    (TENNANT, "7", "Report the estimate for that set as it is.", _implied_estimate),
    (TENNANT, "8", "Justify other sets, and report their estimates apart.", _alternatives),
    (STROBE, "7", "Define exposure, outcome, and what may confound.", _variables),
    (STROBE, "9", "Say what is done about each source of bias.", _bias),
    (STROBE, "12a", "Describe how confounding is controlled.", _control),
    (STROBE, "12d", "Describe how losses, matching or sampling are dealt with.", _losses),
    (STROBE, "12e", "Describe sensitivity analyses.", _sensitivity),
    (STROBE, "16a", "Report crude and adjusted estimates, and why these covariates.", _results),
)
