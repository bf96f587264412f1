"""Rules about the causal graph as a document: reasons for its arrows, and what no data can show."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding
from adjustplan.identify.showing import list_text

_SHOWN = 5


@rule(
    "graph-reason",
    "warning",
    finds="Arrows for which the graph gives no reason.",
    matters="An arrow is a claim about the world; without its reason nobody can weigh it, or notice when it changes.",
    mend="Write the reason behind a colon: cause -> effect : why.",
    source="Tennant et al. 2021, Int J Epidemiol 50:620, recommendations on justifying the diagram.",
)
def reason(subject: Subject) -> Iterator[Finding]:
    bare = [str(arrow) for arrow in subject.plan.graph.arrows if not arrow.reason]
    if bare:
        shown = list_text(bare[:_SHOWN]) + (f", and {len(bare) - _SHOWN} more" if len(bare) > _SHOWN else "")
        message = f"{len(bare)} of {len(subject.plan.graph.arrows)} arrows have no reason: {shown}."
        yield subject.in_graph(message, "Write the reason behind a colon: cause -> effect : why.")


@rule(
    "graph-apart",
    "note",
    finds="A variable that no arrow leads to or from.",
    matters="It claims that the variable has nothing to do with the study, which is seldom meant.",
    mend="Draw its arrows, or take it out.",
)
def apart(subject: Subject) -> Iterator[Finding]:
    graph = subject.plan.graph
    for place, variable in enumerate(graph.variables):
        if not graph.causes[place] and not graph.effects[place]:
            yield subject.in_graph(f"“{variable.name}” is on no arrow.", "Draw its arrows, or take it out.")
