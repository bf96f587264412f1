"""Rules about the course of a study: who stays in it, and what comes before what."""

from __future__ import annotations

import datetime
from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding
from adjustplan.identify.paths import directed_path
from adjustplan.identify.showing import list_text
from adjustplan.study.consequences import unproven_arrows


@rule(
    "study-order",
    "error",
    finds="A cohort or trial whose graph lets the outcome cause the exposure.",
    matters="The design itself puts the exposure first, so either the graph is wrong or the exposure is not the one"
    " that was there at the start.",
    mend="Give the earlier and the later value of the outcome each a name, or turn the arrow.",
    source="Rothman, Greenland and Lash 2008, Modern Epidemiology, 3rd ed., chapter 7.",
)
def order(subject: Subject) -> Iterator[Finding]:
    graph = subject.plan.graph
    if subject.design and subject.design.exposure_first:
        path = directed_path(graph, graph.number(subject.outcome), graph.number(subject.exposure))
        if path:
            message = f"By the design the exposure comes first, but the graph says {path}."
            yield subject.in_graph(message, "Name earlier and later values apart, or turn the arrow.")


@rule(
    "study-reverse-causation",
    "warning",
    finds="Arrows of a cross-sectional study on which the effect rests and whose direction no wave shows.",
    matters="Observed at one time, the outcome may as well have caused the exposure (reverse causation).",
    mend="Give waves to variables whose order is known, such as age, or say in the document why the order is believed.",
)
def reverse_causation(subject: Subject) -> Iterator[Finding]:
    if subject.design is None or subject.design.name != "cross-sectional":
        return
    unproven = list(unproven_arrows(subject.plan.graph))
    between = {role.name for role in subject.roles.variables if "mediator" in role.roles}
    ends = {subject.exposure, subject.outcome} | between
    carrying = [str(arrow) for arrow in unproven if {arrow.cause, arrow.effect} <= ends]
    if carrying:
        others = len(unproven) - len(carrying)
        more = f" So is the direction of {others} other arrow{'s' * (others > 1)}." if others else ""
        message = f"The direction of {list_text(carrying)} rests on time alone and is unproven.{more}"
        yield subject.finding(message, "Give waves where the order is known.", "study", "design")


@rule(
    "study-losses",
    "note",
    finds="A cohort or trial whose graph says nothing of losses to follow-up.",
    matters="Who is lost depends on exposure and health; analysing those who stayed can open paths.",
    mend="Draw the variable “still followed”, mark it restricted, and name it as lost in [study].",
    source="Hernán, Hernández-Díaz and Robins 2004, Epidemiology 15:615; STROBE item 12d.",
)
def losses(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and study.design in ("cohort", "trial") and study.lost is None:
        remedy = "Draw the variable “still followed” as restricted, and name it as lost in [study]."
        yield subject.finding("Losses to follow-up are not in the graph.", remedy, "study", "design")


@rule(
    "study-lost-free",
    "error",
    finds="A variable named for losses or sampling that the graph does not mark as restricted.",
    matters="The analysis holds it fixed in any case; unless the graph says so, what that opens is not judged.",
    mend="Mark it restricted in the graph.",
)
def lost_free(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    for key in ("lost", "sampled"):
        name = getattr(study, key, None)
        if name and not subject.plan.graph[name].restricted:
            message = f"“{name}” is named as {key}, but the graph does not mark it restricted."
            yield subject.finding(message, f"Write “{name}: restricted” in the graph.", "study", key)


@rule(
    "study-selection",
    "error",
    finds="A restricted variable that opens a path which the planned set leaves open, or that distorts the effect.",
    matters="That is selection bias: how people came into the data, or stayed, links exposure and outcome.",
    mend="Adjust for a variable on the path, or select and follow people in another way.",
    source="Hernán, Hernández-Díaz and Robins 2004, Epidemiology 15:615.",
)
def selection(subject: Subject) -> Iterator[Finding]:
    if subject.design and not subject.design.measures:
        return  # no effect is estimated that could be biased
    verdict = subject.verdict
    for path in verdict.open_paths:
        openers = [name for name in path.opened_by if subject.graph[name].restricted]
        if openers:
            message = f"“{openers[0]}” is held fixed and opens {path.text}."
            yield subject.finding(message, "Adjust for a variable on that path.", "adjustment", "set")
    for name in verdict.distorting:
        message = f"“{name}” is held fixed. {verdict.reasons[name]}"
        yield subject.finding(message, "No set mends this; select people in another way.", "study", "design")


@rule(
    "study-immortal-time",
    "warning",
    finds="A study that settles who is exposed only after the outcome has begun to count.",
    matters="Until then the exposed cannot have had the outcome, or they would not have become exposed: that time is"
    " immortal, and makes the exposure look protective.",
    mend="Begin follow-up when exposure is settled, or let exposure change with time in the analysis.",
    source="Suissa 2008, Am J Epidemiol 167:492.",
)
def immortal_time(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and _later(study.exposure_known, study.follow_up_begins):
        message = f"Exposure is settled at {study.exposure_known}, after follow-up begins ({study.follow_up_begins})."
        yield subject.finding(message, "Begin follow-up when exposure is settled.", "study", "exposure_known")


@rule(
    "study-prevalent-users",
    "warning",
    finds="A study whose exposure can have begun before follow-up.",
    matters="Those who had the outcome early, or stopped, are missing among the exposed; who is left tolerates it.",
    mend="Follow people from when their exposure begins (new users), or say why this does no harm.",
    source="Ray 2003, Am J Epidemiol 158:915.",
)
def prevalent_users(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and study.design in ("cohort", "trial") and _later(study.follow_up_begins, study.exposure_begins):
        message = f"Exposure can begin at {study.exposure_begins}, before follow-up does ({study.follow_up_begins})."
        yield subject.finding(message, "Follow people from when their exposure begins.", "study", "exposure_begins")


@rule(
    "study-trial-arrow",
    "error",
    finds="An arrow into the assigned exposure of a randomised trial.",
    matters="Chance alone assigns it, so nothing causes it; with an arrow the graph describes another study.",
    mend="Take the arrow out; if the question is about adhering, say adherence = true in [study].",
)
def trial_arrow(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and study.design == "trial" and not study.adherence:
        for arrow in subject.plan.graph.arrows:
            if arrow.effect == subject.exposure:
                message = f"The arrow {arrow} leads into an exposure that is assigned at random."
                yield subject.in_graph(message, "Take it out, or say adherence = true in [study].")


@rule(
    "study-trial-after",
    "error",
    finds="A trial that adjusts for something after randomisation.",
    matters="What the assignment may have changed is part of the effect or a collider; adjusting undoes randomisation.",
    mend="Take it out of the set.",
    source="ICH E9 (1998), section 5.7; Rosenbaum 1984, J R Stat Soc A 147:656.",
)
def trial_after(subject: Subject) -> Iterator[Finding]:
    if subject.design is None or subject.design.name != "trial":
        return
    graph = subject.plan.graph
    assigned = graph[subject.exposure].wave
    for name in subject.members:
        wave = graph[name].wave
        path = directed_path(graph, graph.number(subject.exposure), graph.number(name))
        if path or (wave is not None and assigned is not None and wave > assigned):
            why = (
                f"affected by the assignment ({path})" if path else f"of wave {wave}, the assignment of wave {assigned}"
            )
            message = f"“{name}” comes after randomisation: it is {why}."
            yield subject.finding(message, f"Take “{name}” out of the set.", "adjustment", "set")


@rule(
    "study-trial-baseline",
    "note",
    finds="A trial that adjusts for baseline variables.",
    matters="Randomisation leaves nothing to confound; such adjustment serves precision, and changes what an odds or"
    " hazard ratio means.",
    mend="Say in the rationale that it is for precision.",
    source="EMA 2015, Guideline on adjustment for baseline covariates in clinical trials.",
)
def trial_baseline(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and study.design == "trial" and not study.adherence and subject.members:
        message = f"Adjusting for {list_text(subject.members)} in a trial serves precision only."
        yield subject.finding(message, "Say so in the rationale.", "adjustment", "set")


def _later(first: datetime.date | int | None, second: datetime.date | int | None) -> bool:
    """Whether one moment is known to come after another; a date and a wave cannot be compared."""
    if isinstance(first, datetime.date) and isinstance(second, datetime.date):
        return first > second
    return isinstance(first, int) and isinstance(second, int) and first > second
