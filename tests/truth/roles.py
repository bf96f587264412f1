"""What part each variable plays, straight from the definitions.

A variable may have several roles. A *common cause* leads to the exposure, and to the outcome by a way that
avoids the exposure. A *mediator* stands on a directed path from exposure to outcome. A *collider* is met by
two arrows on some path between them. An *instrument* is not affected by the exposure, goes along with it,
and goes along with the outcome only through it. An *outcome predictor* causes the outcome but not the
exposure and is not affected by it. A *confounder* is a measured variable in some minimal sufficient set
(VanderWeele and Shpitser 2013, Annals of Statistics 41:196-220). What is *affected by* something is
downstream of it and off the causal paths.
"""

from __future__ import annotations

from truth.brute_force import Question
from truth.walks import Name


def roles(question: Question, name: Name) -> set[str]:
    """All roles of one variable."""
    if name == question.exposure:
        return {"exposure"}
    if name == question.outcome:
        return {"outcome"}
    tests = {
        "confounder": any(name in members for members in question.minimal_sets),
        "common cause": _leads_to(question, name, question.exposure) and _leads_round(question, name),
        "mediator": name in question.on_causal_paths,
        "collider": any(name in path.colliders for path in question.paths),
        "instrument": _is_instrument(question, name),
        "outcome predictor": (
            _leads_to(question, name, question.outcome)
            and not _leads_to(question, name, question.exposure)
            and not _leads_to(question, question.exposure, name)
        ),
        "affected by exposure": _is_affected(question, name, {question.exposure}),
        "affected by mediator": _is_affected(
            question, name, question.on_causal_paths - {question.exposure, question.outcome}
        ),
        "affected by outcome": _leads_to(question, question.outcome, name),
    }
    return {role for role, holds in tests.items() if holds} or {"unrelated"}


def advice(question: Question, name: Name) -> str | None:
    """What to do with one variable: the first that applies, from needed to optional."""
    if name in {question.exposure, question.outcome} | question.restricted:
        return None
    minimal = question.minimal_sets
    if minimal and all(name in members for members in minimal):
        return "needed"
    if any(name in members for members in minimal):
        return "useful"
    if not any(name in members for members in question.sufficient_sets):
        return "never"
    if any(not question.is_sufficient(members | {name}) for members in minimal):
        return "risky"
    causes_exposure_alone = _leads_to(question, name, question.exposure) and not _leads_round(question, name)
    if _is_instrument(question, name) or causes_exposure_alone:
        return "costly"
    return "optional"


def _leads_to(question: Question, cause: Name, effect: Name) -> bool:
    return effect in question.arrows.descendants[cause]


def _leads_round(question: Question, name: Name) -> bool:
    """Whether a directed path leads from the variable to the outcome and avoids the exposure."""
    ways = question.arrows.directed_paths(name, question.outcome)
    return any(question.exposure not in way for way in ways)


def _is_affected(question: Question, name: Name, sources: set[Name] | frozenset[Name]) -> bool:
    return name not in question.on_causal_paths and any(_leads_to(question, source, name) for source in sources)


def _is_instrument(question: Question, name: Name) -> bool:
    if _leads_to(question, question.exposure, name):
        return False
    given = question.restricted
    effects = question.arrows.effects[question.exposure]
    cut = question.arrows.without((question.exposure, effect) for effect in effects)
    return not cut.separated(name, question.exposure, given) and cut.separated(name, question.outcome, given)
