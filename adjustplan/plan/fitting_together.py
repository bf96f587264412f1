"""Whether a plan and its graph fit together: every variable it names is there, and its question can be asked."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.errors import did_you_mean
from adjustplan.graph import CausalGraph
from adjustplan.plan.misfit import Misfit
from adjustplan.plan.places import Key
from adjustplan.plan.schema import PlanFile


def faults(file: PlanFile, graph: CausalGraph) -> Iterator[Misfit]:
    """Everything in which a plan and its graph do not fit together."""
    unknown = list(_unknown(file, graph))
    yield from unknown
    if not unknown:
        yield from _unaskable(file, graph)
        yield from _ends_misplaced(file)


def _sets(file: PlanFile) -> Iterator[tuple[Key, str]]:
    """The members of the planned set and of its alternatives, each with the key of its set."""
    if file.adjustment:
        yield from ((("adjustment", "set"), name) for name in file.adjustment.members)
        for place, alternative in enumerate(file.adjustment.alternative):
            yield from ((("adjustment", "alternative", place, "set"), name) for name in alternative.members)


def _study(file: PlanFile) -> Iterator[tuple[Key, str]]:
    """The variables that the study is said to be restricted or matched by."""
    if file.study:
        yield from ((("study", "matched"), name) for name in file.study.matched)
        yield from ((("study", key), name) for key in ("sampled", "lost") if (name := getattr(file.study, key)))


def _unknown(file: PlanFile, graph: CausalGraph) -> Iterator[Misfit]:
    named: list[tuple[Key, str]] = [
        (("question", "exposure"), file.question.exposure),
        (("question", "outcome"), file.question.outcome),
        *((("question", "other_exposures"), name) for name in file.question.other_exposures),
        *_study(file),
        *_sets(file),
    ]
    if file.analysis:
        named += [(("analysis", "columns", name), name) for name in file.analysis.columns]
        named += [(("analysis", "forms", name), name) for name in file.analysis.forms]
        if file.analysis.imputation:
            named += [(("analysis", "imputation", "normal"), name) for name in file.analysis.imputation.normal]
        named += [(("analysis", "modifier"), file.analysis.modifier)] if file.analysis.modifier else []
    for key, name in named:
        if name not in graph:
            message = f"“{name}” in {'.'.join(map(str, key[:2]))} is not a variable of {file.graph}."
            remedy = did_you_mean(name, graph.numbers, "Add it to the graph or take it out here.")
            yield Misfit("plan-unknown-variable", message, remedy, key)


def _unaskable(file: PlanFile, graph: CausalGraph) -> Iterator[Misfit]:
    question = file.question
    if question.exposure == question.outcome:
        message = f"Exposure and outcome are both “{question.exposure}”."
        yield Misfit("question-same", message, "Name two variables.", ("question", "outcome"))
    asked: list[tuple[Key, str]] = [
        (("question", "exposure"), question.exposure),
        (("question", "outcome"), question.outcome),
        *((("question", "other_exposures"), name) for name in question.other_exposures),
    ]
    for key, name in asked:
        if graph[name].restricted:
            message = f"“{name}” is restricted: it does not vary in the data, so no effect of or on it can be seen."
            yield Misfit("question-restricted", message, "Take “restricted” off it, or ask another question.", key)


def _ends_misplaced(file: PlanFile) -> Iterator[Misfit]:
    ends = {file.question.outcome: "outcome", file.question.exposure: "exposure"}
    for key, name in (*_sets(file), *_study(file)):
        if name in ends:
            message = f"“{name}” is the {ends[name]}; it cannot stand in {'.'.join(map(str, key[:2]))}."
            yield Misfit("adjustment-member-is-end", message, "Take it out.", key)
