"""Commands that ask a graph: sets, judge, roles, trace, draw, convert."""

from __future__ import annotations

from enum import StrEnum
from itertools import islice
from pathlib import Path
from typing import Annotated

import typer

from adjustplan.cli.app import app
from adjustplan.cli.arguments import (
    EffectOption,
    Exposure,
    Force,
    Format,
    Members,
    Outcome,
    OutputFormat,
    Subject,
    ask,
)
from adjustplan.graph import read_graph, write_graph
from adjustplan.identify import judge as judge_set
from adjustplan.identify import list_sets
from adjustplan.identify import roles as roles_of
from adjustplan.identify import trace as trace_paths
from adjustplan.report import terminal
from adjustplan.study.consequences import sampling_fault


class WhichSets(StrEnum):
    """Which sufficient sets are listed."""

    all = "all"
    one = "one"
    smallest = "smallest"
    cheapest = "cheapest"
    precise = "precise"


class PathState(StrEnum):
    """Which paths are listed."""

    all = "all"
    open = "open"
    blocked = "blocked"


@app.command()
def sets(
    subject: Subject,
    exposure: Exposure = None,
    outcome: Outcome = None,
    effect: EffectOption = None,
    which: Annotated[
        WhichSets,
        typer.Option("--which", help="All minimal sets, or one that is best: smallest, cheapest (by cost=), precise."),
    ] = WhichSets.all,
    limit: Annotated[
        int, typer.Option("--limit", min=1, help="List at most this many; what is left out is said.")
    ] = 1000,
    form: Format = OutputFormat.text,
) -> None:
    """List sufficient sets: what to adjust for.

    A set is sufficient when adjusting for it leaves no open path that confounds (the back-door criterion), and minimal
    when none of its members can be left out. When no set is sufficient, a path is named that nothing measured can
    block, and the exit code is 1.

    \b
    adjustplan sets night_work.edges -x night_work -y diabetes
    adjustplan sets plan.toml --which smallest --format json
    """
    asked = ask(subject, exposure, outcome, effect)
    found = list_sets(*asked.question, asked.effect, which.value, limit)
    terminal.show(found, form.value)
    if not found.complete and which is WhichSets.all:
        typer.echo(f"Stopped at --limit {limit}: there are more minimal sufficient sets.", err=True)
    raise typer.Exit(0 if found.sets else 1)


@app.command()
def judge(
    subject: Subject,
    members: Members = None,
    exposure: Exposure = None,
    outcome: Outcome = None,
    effect: EffectOption = None,
    form: Format = OutputFormat.text,
) -> None:
    """Judge a set of yours: is it sufficient, and if not, why?

    The verdict names the open paths that the set leaves, the members that do harm and those that are not needed.

    Without variables, a plan's own set is judged, or for a graph the empty set (adjusting for nothing). The exit code
    is 1 when the set is not sufficient.

    \b
    adjustplan judge night_work.edges -x night_work -y diabetes age site
    adjustplan judge plan.toml
    """
    asked = ask(subject, exposure, outcome, effect)
    verdict = judge_set(*asked.question, members or asked.planned or (), asked.effect)
    terminal.show(verdict, form.value)
    linked = sampling_fault(*asked.question, verdict.adjust, asked.study)
    if linked:
        typer.echo(linked, err=True)
    raise typer.Exit(1 if linked or not verdict.sufficient else 0)


@app.command()
def roles(
    subject: Subject,
    exposure: Exposure = None,
    outcome: Outcome = None,
    effect: EffectOption = None,
    form: Format = OutputFormat.text,
) -> None:
    """Say what every variable is, and whether to adjust for it.

    Each gets its roles (confounder, mediator, collider, ...) and one piece of advice, with a path that shows why.

    \b
    adjustplan roles night_work.edges -x night_work -y diabetes
    """
    asked = ask(subject, exposure, outcome, effect)
    found = roles_of(*asked.question, asked.effect)
    terminal.show(found, form.value)
    if not found.complete:
        typer.echo("Too many minimal sets to look at them all: some variables may have further roles.", err=True)


@app.command()
def trace(
    subject: Subject,
    members: Members = None,
    exposure: Exposure = None,
    outcome: Outcome = None,
    effect: EffectOption = None,
    state: Annotated[
        PathState, typer.Option("--state", help="Only the paths that are open, or blocked.")
    ] = PathState.all,
    limit: Annotated[int, typer.Option("--limit", min=1, help="Look at no more than this many paths.")] = 100,
    form: Format = OutputFormat.text,
) -> None:
    """Trace the paths, and what opens or blocks each.

    Lists the paths between exposure and outcome, the shortest first, with the state of each given a set.

    Without variables, a plan's own set is held fixed, or for a graph nothing. Paths are exponential in number: the list
    stops at --limit and says so.

    \b
    adjustplan trace night_work.edges -x night_work -y diabetes age
    """
    asked = ask(subject, exposure, outcome, effect)
    held = members or asked.planned or ()
    looked_at = list(islice(trace_paths(*asked.question, held, asked.effect), limit + 1))
    complete = len(looked_at) <= limit
    shown = [path for path in looked_at[:limit] if state is PathState.all or path.open is (state is PathState.open)]
    terminal.show_paths(shown, asked.exposure, asked.outcome, sorted(held), form.value, complete=complete)
    if not complete:
        typer.echo(f"Stopped at --limit {limit}: there are more paths.", err=True)


@app.command()
def draw(
    subject: Subject,
    members: Members = None,
    exposure: Exposure = None,
    outcome: Outcome = None,
    effect: EffectOption = None,
    output: Annotated[
        Path | None,
        typer.Option("--output", "-o", metavar="FILE", help="An .svg, .png or .dot file; without it, DOT to stdout."),
    ] = None,
    force: Force = False,
    form: Format = OutputFormat.text,
) -> None:
    """Draw the graph as SVG, PNG or DOT.

    A graph without exposure and outcome is drawn plain. Given variables, or a plan's own set, stand in square frames.

    \b
    adjustplan draw night_work.edges -x night_work -y diabetes age site -o night_work.svg
    """
    from adjustplan.report.picture import draw_picture

    if subject.suffix.lower() != ".toml" and exposure is None and outcome is None and not members:
        picture = draw_picture(read_graph(subject))
    else:
        asked = ask(subject, exposure, outcome, effect)
        held = members or asked.planned or ()
        picture = draw_picture(asked.graph, roles_of(*asked.question, asked.effect), held)
    if output is not None:
        picture.save(output, force=force)
        terminal.show_written([output], form.value)
    elif form is OutputFormat.json:
        terminal.print_json({"dot": picture.dot})
    else:
        typer.echo(picture.dot, nl=False)


@app.command()
def convert(
    source: Annotated[
        Path, typer.Argument(metavar="SOURCE", help="A causal graph: .edges, .dot, .gv, .graphml or .csv.")
    ],
    target: Annotated[
        Path, typer.Argument(metavar="TARGET", help="The file to write, in the format its ending names.")
    ],
    force: Force = False,
    form: Format = OutputFormat.text,
) -> None:
    """Convert a graph to another format.

    What the new format cannot carry is said.

    \b
    adjustplan convert night_work.edges night_work.graphml
    """
    write_graph(read_graph(source), target, force=force)
    terminal.show_written([target], form.value)
