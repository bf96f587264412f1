"""Rules about the planned set: is it sufficient, and what does each member do?"""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding
from adjustplan.identify import VariableRole, judge, why_no_set
from adjustplan.identify.showing import set_text

_SET = ("adjustment", "set")


@rule(
    "adjustment-none",
    "warning",
    finds="A plan that has chosen no set yet.",
    matters="What is not written down before the data are seen cannot be shown to have been planned.",
    mend="Add [adjustment] with set = […] and a rationale; the set may be empty.",
)
def none(subject: Subject) -> Iterator[Finding]:
    estimates = subject.design is None or bool(subject.design.measures)
    if estimates and subject.plan.file.adjustment is None:
        yield subject.finding("The plan chooses no set.", "Add [adjustment] with set = […] and a rationale.")


@rule(
    "adjustment-insufficient",
    "error",
    finds="A planned set that leaves open a path between exposure and outcome that is not the effect.",
    matters="What flows along that path is mistaken for the effect: confounding.",
    mend="Add a variable that blocks the path; “adjustplan sets” lists the sets that do.",
    source="Pearl 1993, Stat Sci 8:266; Shpitser, VanderWeele and Robins 2010, UAI 26:527.",
)
def insufficient(subject: Subject) -> Iterator[Finding]:
    if subject.plan.file.adjustment is None:
        return
    none_at_all = why_no_set(subject.graph, subject.exposure, subject.outcome, subject.plan.question.effect)
    absent = {role.name for role in _absent_though_needed(subject)}
    for path in subject.verdict.open_paths:
        if path.opened_by or absent & set(path.path.others):
            continue  # what opens it, or the needed variable that would block it, is named by a rule of its own
        remedy = "No set of measured variables is sufficient." if none_at_all else "“adjustplan sets” lists what does."
        message = f"{set_text(subject.members)} leaves {path.text} open."
        yield subject.finding(message, f"Add a variable that blocks it. {remedy}", *_SET)


@rule(
    "adjustment-mediator",
    "error",
    finds="A member of the set that lies on a causal path from exposure to outcome.",
    matters="Holding a mediator fixed takes away the part of the total effect that runs through it.",
    mend="Take it out; if the direct effect is meant, say effect = “direct” in [question].",
    source="Schisterman, Cole and Platt 2009, Epidemiology 20:488.",
)
def mediator(subject: Subject) -> Iterator[Finding]:
    if subject.plan.question.effect == "total":
        for role in _members(subject):
            if "mediator" in role.roles:
                path = role.evidence[role.roles.index("mediator")]
                message = f"“{role.name}” is a mediator: {path}."
                yield subject.finding(message, 'Take it out, or ask for effect = "direct".', *_SET)


@rule(
    "adjustment-affected",
    "error",
    finds="A member of the set that the outcome affects, or a mediator, off the causal paths.",
    matters="Holding it fixed holds part of the outcome fixed, which distorts the effect.",
    mend="Take it out.",
    source="Shpitser, VanderWeele and Robins 2010, UAI 26:527.",
)
def affected(subject: Subject) -> Iterator[Finding]:
    for role in _members(subject):
        if found := [word for word in _affections(subject) if word in role.roles]:
            path = role.evidence[role.roles.index(found[0])]
            yield subject.finding(f"“{role.name}” is {found[0]}: {path}.", "Take it out.", *_SET)


@rule(
    "adjustment-collider",
    "error",
    finds="A member of the set that opens a path which the rest of the set does not block.",
    matters="Two causes of a collider, unrelated before, become related once it is held fixed: a new, false link.",
    mend="Take it out, or add a variable that blocks the path it opens.",
    source="Greenland 2003, Epidemiology 14:300.",
)
def collider(subject: Subject) -> Iterator[Finding]:
    opened = {name: path for path in reversed(subject.verdict.open_paths) for name in path.opened_by}
    for role in _members(subject):
        if role.name in opened and not _is_forbidden(subject, role):
            message = f"“{role.name}” is a collider or lies below one; holding it fixed opens {opened[role.name].text}."
            yield subject.finding(message, "Take it out, or block that path.", *_SET)


@rule(
    "adjustment-instrument",
    "warning",
    finds="A member of the set that is related to the outcome only through the exposure.",
    matters="Adjusting for an instrument, or another cause of the exposure alone, costs precision and amplifies what"
    " confounding is left.",
    mend="Take it out.",
    source="Myers et al. 2011, Am J Epidemiol 174:1213.",
)
def instrument(subject: Subject) -> Iterator[Finding]:
    for role in _members(subject):
        if role.advice == "costly":
            yield subject.finding(f"“{role.name}”: {role.reason}", "Take it out.", *_SET)


@rule(
    "adjustment-unmeasured",
    "error",
    finds="A member of the set that the graph calls unmeasured.",
    matters="No data will hold it, so the planned analysis cannot be run.",
    mend="Measure it, find a set without it, or name its proxy.",
)
def unmeasured(subject: Subject) -> Iterator[Finding]:
    for role in _members(subject):
        if role.unmeasured:
            yield subject.finding(f"“{role.name}” is unmeasured.", "Find a set without it, or measure it.", *_SET)


@rule(
    "adjustment-needed",
    "error",
    finds="A variable that is in every minimal sufficient set, and not in the planned one.",
    matters="Without it nothing that is measured makes up for its absence.",
    mend="Add it.",
    source="VanderWeele and Shpitser 2013, Ann Stat 41:196.",
)
def needed(subject: Subject) -> Iterator[Finding]:
    if subject.plan.file.adjustment is not None:
        for role in _absent_though_needed(subject):
            message = f"“{role.name}” is in every sufficient set. {role.reason}"
            yield subject.finding(message, f"Add “{role.name}”.", *_SET)


@rule(
    "adjustment-rationale",
    "warning",
    finds="A chosen set without a rationale.",
    matters="Reviewers ask why these covariates, and months later so will the team.",
    mend="Write rationale = “…” beside the set.",
    source="STROBE items 12a and 16a (von Elm et al. 2007, PLoS Med 4:e296).",
)
def rationale(subject: Subject) -> Iterator[Finding]:
    adjustment = subject.plan.file.adjustment
    if adjustment and not adjustment.rationale.strip():
        yield subject.finding("The chosen set has no rationale.", 'Write rationale = "…" beside it.', *_SET)


@rule(
    "adjustment-alternative",
    "warning",
    finds="An alternative set without a rationale, or one that is not sufficient.",
    matters="A second estimate without a reason invites choosing the one that pleases.",
    mend="Say why it is fitted, or take it out.",
    source="Tennant et al. 2021, Int J Epidemiol 50:620, recommendation on alternative sets.",
)
def alternative(subject: Subject) -> Iterator[Finding]:
    adjustment = subject.plan.file.adjustment
    for place, other in enumerate(adjustment.alternative if adjustment else ()):
        key = ("adjustment", "alternative", place, "set")
        if not other.rationale.strip():
            message = f"The alternative {set_text(other.members)} has no rationale."
            yield subject.finding(message, 'Write rationale = "…" beside it.', *key)
        if not subject.judge(other.members).sufficient:
            message = f"The alternative {set_text(other.members)} is not sufficient."
            yield subject.finding(message, "“adjustplan judge” says why; take it out or mend it.", *key)


@rule(
    "adjustment-second-exposure",
    "error",
    finds="A further exposure read off the same model, though the model's set is not sufficient for its effect.",
    matters="Covariates chosen for one exposure are mediators or colliders for another; its coefficient is then no"
    " total effect, and often no effect at all.",
    mend="Give it a plan of its own, with its own set.",
    source="Westreich and Greenland 2013, Am J Epidemiol 177:292.",
)
def second_exposure(subject: Subject) -> Iterator[Finding]:
    question = subject.plan.question
    for place, other in enumerate(question.other_exposures):
        if other in (subject.exposure, subject.outcome):
            continue
        others = ({subject.exposure} | set(subject.members)) - {other}
        verdict = judge(subject.graph, other, subject.outcome, others, question.effect)
        if not verdict.sufficient:
            why = next(iter(verdict.reasons.values()), "") or f"It leaves {verdict.open_paths[0].text} open."
            message = f"{verdict.caption()} {why}"
            key = ("question", "other_exposures", place)
            yield subject.finding(message, f"Write a plan of its own for “{other}”.", *key)


def _affections(subject: Subject) -> tuple[str, ...]:
    """The ways to be affected that forbid a variable."""
    by_mediator = ("affected by mediator",) if subject.plan.question.effect == "total" else ()
    return ("affected by outcome", *by_mediator)


def _is_forbidden(subject: Subject, role: VariableRole) -> bool:
    """Whether another rule says already that the variable is in no sufficient set."""
    on_path = subject.plan.question.effect == "total" and "mediator" in role.roles
    return on_path or any(word in role.roles for word in _affections(subject))


def _absent_though_needed(subject: Subject) -> Iterator[VariableRole]:
    return (v for v in subject.roles.variables if v.advice == "needed" and v.name not in subject.members)


def _members(subject: Subject) -> Iterator[VariableRole]:
    return (role for role in subject.roles.variables if role.name in subject.members)
