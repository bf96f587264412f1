"""Commands that run a plan: fit, write."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from adjustplan.cli.app import app
from adjustplan.cli.arguments import Force, Format, OutputFormat, PlanPath
from adjustplan.plan import read_plan
from adjustplan.report import terminal
from adjustplan.report.progress import progress_bar

Limit = Annotated[int, typer.Option("--limit", min=0, help="Fit at most this many minimal sufficient sets.")]


@app.command()
def fit(plan: PlanPath, limit: Limit = 20, form: Format = OutputFormat.text) -> None:
    """Run the planned analysis: the adjusted estimate beside the crude one.

    Crude and adjusted estimates come from the same rows.

    The planned set, its alternatives and every minimal sufficient set that the data allow are adjusted for, and tested
    for whether they agree. Everything else follows from [analysis] in the plan: the way to adjust and the others to
    show beside it, effect modification, weights, clusters, resampling, and what is done about missing values.
    Diagnostics come along. The exit code is 1 when there are findings above a note.

    \b
    adjustplan fit plan.toml
    """
    from adjustplan.estimate import fit as fit_plan

    with progress_bar() as progress:
        result = fit_plan(read_plan(plan), limit=limit, progress=progress)
    terminal.show(result, form.value)
    raise typer.Exit(0 if result.clean else 1)


@app.command()
def write(
    plan: PlanPath,
    output: Annotated[Path, typer.Option("--output", "-o", metavar="DIR", help="The folder to write into.")],
    limit: Limit = 20,
    force: Force = False,
    form: Format = OutputFormat.text,
) -> None:
    """Write the document that defends the adjustment.

    It holds the question, the picture, the roles, the sufficient sets, the chosen set and why, every arrow and its
    reason, crude beside adjusted estimates, and the cautions: Markdown, with the picture as SVG beside it.

    \b
    adjustplan write plan.toml -o document
    """
    from adjustplan.report import write_document

    terminal.show_written(write_document(read_plan(plan), output, limit=limit, force=force), form.value)
