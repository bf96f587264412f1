"""Which sets are reported: the planned one, its alternatives, and the minimal sufficient sets of the graph.

Seeing the estimate move, or stay, from one sufficient set to the next is the cheapest check of a graph: were
the graph right, all of them would estimate the same effect. A set is reported once, with every reason for it.
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass, replace
from itertools import islice

from adjustplan.errors import Finding
from adjustplan.estimate.results import Origin
from adjustplan.graph import CausalGraph
from adjustplan.identify import is_sufficient, iterate_sufficient_sets
from adjustplan.plan import Plan
from adjustplan.plan.places import Key


@dataclass(frozen=True, slots=True)
class ReportedSet:
    """A set to adjust for, why it is reported, and what the graph says of it; see ``AdjustedEstimate``."""

    members: tuple[str, ...]
    origins: tuple[Origin, ...]
    sufficient: bool
    rationale: str = ""
    findings: tuple[Finding, ...] = ()

    @property
    def refused(self) -> bool:
        """Whether the set cannot be adjusted for at all."""
        return any(finding.severity == "error" for finding in self.findings)


def reported_sets(
    plan: Plan, usable: Collection[str], limit: int
) -> tuple[tuple[ReportedSet, ...], tuple[Finding, ...]]:
    """The sets to report, planned first, and what to know about the choice.

    Parameters
    ----------
    plan : Plan
    usable : collection of str
        Variables that have a column in the data.
    limit : int
        Most minimal sufficient sets that are taken, in the order in which the graph's engine finds them.
    """
    question, adjustment = plan.question, plan.adjustment
    chosen: dict[tuple[str, ...], ReportedSet] = {}
    _choose(chosen, plan, adjustment.members, "planned", adjustment.rationale, ("adjustment", "set"))
    for place, alternative in enumerate(adjustment.alternative):
        key = ("adjustment", "alternative", place, "set")
        _choose(chosen, plan, alternative.members, "alternative", alternative.rationale, key)
    lacking = [
        variable.name
        for variable in plan.judged_graph
        if not (variable.unmeasured or variable.restricted or variable.name in usable)
        and variable.name not in (question.exposure, question.outcome)
    ]
    within = _without(plan.judged_graph, lacking) if lacking else plan.judged_graph
    found = list(
        islice(iterate_sufficient_sets(within, question.exposure, question.outcome, question.effect), limit + 1)
    )
    minimal = sorted((tuple(sorted(members)) for members in found[:limit]), key=lambda names: (len(names), names))
    for members in minimal:
        known = chosen.get(members)
        if known is None:
            chosen[members] = ReportedSet(members, ("minimal",), True)
        else:
            chosen[members] = replace(known, origins=(*known.origins, "minimal"))
    findings = []
    if len(found) > limit:
        message = f"The graph has more minimal sufficient sets than the {limit} considered here."
        findings.append(Finding("estimate-limit", message, "Raise the limit to see more of them.", "note"))
    if left_out := _left_out(plan, lacking, limit):
        message = f"Minimal sufficient sets with {', '.join(left_out)} were left out: no usable column."
        remedy = "Name their columns in [analysis.columns], or mark them unmeasured in the graph."
        findings.append(Finding("estimate-sets-without-data", message, remedy, "note"))
    return tuple(chosen.values()), tuple(findings)


def _choose(
    chosen: dict[tuple[str, ...], ReportedSet],
    plan: Plan,
    names: Collection[str],
    origin: Origin,
    rationale: str,
    key: Key,
) -> None:
    """Add a set of the plan, with what the graph says against it."""
    members = tuple(sorted(set(names)))
    if known := chosen.get(members):
        if origin not in known.origins:
            chosen[members] = replace(known, origins=(*known.origins, origin))
        return
    question, file, line = plan.question, str(plan.path), plan.line(*key)
    for end, role in ((question.exposure, "exposure"), (question.outcome, "outcome")):
        if end in members:
            message = f"The {origin} set contains the {role} “{end}”."
            raise plan.error("adjustment-exposure-outcome", message, "Take it out.", key)
    shown = "{" + ", ".join(members) + "}"
    unmeasured = [name for name in members if plan.graph[name].unmeasured]
    if unmeasured:
        message = f"The {origin} set {shown} contains {', '.join(unmeasured)}, unmeasured in the graph."
        remedy = "Choose a set of measured variables, or correct the graph."
        found = Finding("adjustment-unmeasured", message, remedy, "error", file, line)
        chosen[members] = ReportedSet(members, (origin,), False, rationale, (found,))
        return
    sufficient = is_sufficient(plan.judged_graph, question.exposure, question.outcome, set(members), question.effect)
    message = f"The {origin} set {shown} is not sufficient by the graph for the {question.effect} effect."
    remedy = "Judge it against the graph to see which paths stay open, or which member does harm."
    warning = Finding("adjustment-insufficient", message, remedy, "warning", file, line)
    chosen[members] = ReportedSet(members, (origin,), sufficient, rationale, () if sufficient else (warning,))


def _without(graph: CausalGraph, names: Collection[str]) -> CausalGraph:
    """The same graph with more variables unmeasured, so that its sufficient sets do without them."""
    return CausalGraph(
        graph.arrows,
        [replace(variable, unmeasured=variable.unmeasured or variable.name in names) for variable in graph],
    )


def _left_out(plan: Plan, lacking: Collection[str], limit: int) -> list[str]:
    """Variables without a column that are in some of the first minimal sufficient sets of the whole graph."""
    if not lacking:
        return []
    question = plan.question
    every = iterate_sufficient_sets(plan.judged_graph, question.exposure, question.outcome, question.effect)
    return sorted(set(lacking) & set().union(*islice(every, limit + 1)))
