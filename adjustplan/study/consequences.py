"""What a design means for a causal graph: what is held fixed, what is unproven, what selection opens.

In a case-control study being sampled depends on the outcome, and on what is matched for. That is a restricted variable
below the outcome. Holding it fixed distorts every measure but one: the odds ratio given the adjustment set stays what
it is, provided that exposure and sampling are separated given the outcome and that set (Didelez, Kreiner and Keiding
2010, Stat Sci 25:368). So the sampling variable is judged by that condition, and taken out of the graph for the others.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence
from dataclasses import replace
from typing import Protocol

from adjustplan.graph import Arrow, CausalGraph, Variable
from adjustplan.identify.paths import Path, open_passes, stream_paths


class StudyTable(Protocol):
    """What the plan says of its study; see ``adjustplan.plan.schema.Study``."""

    @property
    def design(self) -> str: ...
    @property
    def sampled(self) -> str | None: ...
    @property
    def matched(self) -> Sequence[str]: ...


SAMPLING = "being sampled"
"""The name of the sampling variable where the graph has none of its own."""


def under_design(graph: CausalGraph, outcome: str, study: StudyTable | None) -> CausalGraph:
    """The graph to which the sufficiency criterion is put under a design.

    It is the graph itself, but that the sampling variable of a case-control study, where the graph draws one, is no
    longer held fixed, for it has a criterion of its own: :func:`path_to_sampling`.
    """
    if study is None or study.design != "case-control" or study.sampled is None:
        return graph
    sampled, name = with_sampling(graph, outcome, study)
    freed = (replace(variable, restricted=variable.restricted and variable.name != name) for variable in sampled)
    return CausalGraph(sampled.arrows, freed)


def with_sampling(graph: CausalGraph, outcome: str, study: StudyTable) -> tuple[CausalGraph, str]:
    """The graph of a case-control study with its sampling variable, and that variable's name.

    A graph that draws its own is left as it is, but for arrows from the outcome and from what is matched for, which the
    sampling depends on by the design.
    """
    name = study.sampled or SAMPLING
    drawn = {(arrow.cause, arrow.effect) for arrow in graph.arrows}
    added = [Arrow(cause, name) for cause in (outcome, *study.matched) if (cause, name) not in drawn]
    variables = list(graph.variables) if name in graph else [*graph.variables, Variable(name, restricted=True)]
    return CausalGraph([*graph.arrows, *added], variables), name


def path_to_sampling(
    graph: CausalGraph, exposure: str, outcome: str, members: Collection[str], study: StudyTable
) -> Path | None:
    """A path that links exposure and sampling given the outcome and the set, or None where they are separated.

    While there is one, the odds ratio among the sampled is not that of the population, even with the set held fixed.
    """
    sampled, name = with_sampling(graph, outcome, study)
    fixed = {outcome, *members} | {variable.name for variable in graph.variables if variable.restricted}
    held = {sampled.number(variable) for variable in fixed - {name}}
    paths = stream_paths(sampled, sampled.number(exposure), sampled.number(name), open_passes(sampled, held))
    return next(paths, None)


def sampling_fault(
    graph: CausalGraph, exposure: str, outcome: str, members: Collection[str], study: StudyTable | None
) -> str | None:
    """What keeps the odds ratio of a case-control study from being the population's, in one sentence; None: nothing."""
    if study is None or study.design != "case-control":
        return None
    path = path_to_sampling(graph, exposure, outcome, members, study)
    if path is None:
        return None
    return f"Given the outcome and the set, exposure and sampling are linked by {path}, which distorts the odds ratio."


def unproven_arrows(graph: CausalGraph) -> Iterator[Arrow]:
    """The arrows whose direction no wave shows: cause and effect are of one wave, or of none."""
    for arrow in graph.arrows:
        first, second = graph[arrow.cause].wave, graph[arrow.effect].wave
        if first is None or second is None or first == second:
            yield arrow
