"""Arguments and options that several commands share, and the question they add up to."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from adjustplan.errors import Finding, QuestionError
from adjustplan.graph import CausalGraph, read_graph
from adjustplan.identify import Effect

if TYPE_CHECKING:
    from adjustplan.plan.schema import Study


class OutputFormat(StrEnum):
    """How a result is printed."""

    text = "text"
    json = "json"


class EffectName(StrEnum):
    """The effect asked for."""

    total = "total"
    direct = "direct"


Subject = Annotated[
    Path, typer.Argument(metavar="GRAPH|PLAN", help="A causal graph (.edges, .dot, .graphml, .csv) or a plan (.toml).")
]
PlanPath = Annotated[Path, typer.Argument(metavar="PLAN", help="A plan file (.toml).")]
Exposure = Annotated[
    str | None, typer.Option("--exposure", "-x", metavar="NAME", help="The exposure; a plan states its own.")
]
Outcome = Annotated[
    str | None, typer.Option("--outcome", "-y", metavar="NAME", help="The outcome; a plan states its own.")
]
EffectOption = Annotated[
    EffectName | None,
    typer.Option("--effect", help="The total effect, or the direct one: not through any mediator.  [default: total]"),
]
Members = Annotated[
    list[str] | None,
    typer.Argument(metavar="[VARIABLE]...", help="The set: variables to adjust for, separated by spaces."),
]
Format = Annotated[OutputFormat, typer.Option("--format", help="Text to read, or JSON for programs.")]
Force = Annotated[bool, typer.Option("--force", help="Replace files that exist already.")]


@dataclass(frozen=True, slots=True)
class Asked:
    """A graph and the question put to it, with the set a plan names (None: not from a plan, or none planned yet)."""

    graph: CausalGraph
    exposure: str
    outcome: str
    effect: Effect
    planned: tuple[str, ...] | None = None
    study: Study | None = None

    @property
    def question(self) -> tuple[CausalGraph, str, str]:
        """Graph, exposure and outcome, as most functions take them."""
        return self.graph, self.exposure, self.outcome


def ask(subject: Path, exposure: str | None, outcome: str | None, effect: EffectName | None) -> Asked:
    """The question: from the options, and what they leave out from the plan."""
    stated: Effect = "direct" if effect is EffectName.direct else "total"
    if subject.suffix.lower() == ".toml":
        from adjustplan.plan import read_plan  # a graph alone does not need it

        plan = read_plan(subject)
        asked = plan.question
        return Asked(
            plan.judged_graph,
            exposure or asked.exposure,
            outcome or asked.outcome,
            stated if effect else asked.effect,
            None if plan.file.adjustment is None else tuple(plan.file.adjustment.members),
            plan.study,
        )
    graph = read_graph(subject)
    absent = [option for option, value in (("--exposure/-x", exposure), ("--outcome/-y", outcome)) if value is None]
    if exposure is None or outcome is None:
        message = f"A graph alone does not say what is asked: {' and '.join(absent)} missing."
        remedy = "Add -x EXPOSURE -y OUTCOME, or name a plan."
        raise QuestionError(Finding("question-missing", message, remedy, file=str(subject)))
    return Asked(graph, exposure, outcome, stated)
