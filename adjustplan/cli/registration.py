"""Commands for the plan as a contract: seal, amend."""

from __future__ import annotations

from datetime import datetime
from typing import Annotated

import typer

from adjustplan.cli.app import app
from adjustplan.cli.arguments import Format, OutputFormat, PlanPath
from adjustplan.errors import Finding, SealError
from adjustplan.plan import read_plan, sealing
from adjustplan.report import terminal

By = Annotated[str, typer.Option("--by", metavar="NAME", help="Who does it, in any words.")]
Day = Annotated[
    datetime | None,
    typer.Option("--date", metavar="YYYY-MM-DD", formats=["%Y-%m-%d"], help="The day it was agreed.  [default: today]"),
]


@app.command()
def seal(
    plan: PlanPath,
    by: By = "",
    day: Day = None,
    data_seen: Annotated[
        bool, typer.Option("--data-seen", help="The data have been seen already; the document says so.")
    ] = False,
    form: Format = OutputFormat.text,
) -> None:
    """Seal a plan once it is agreed.

    Writes what plan and graph say, with their fingerprints, to a file beside the plan (plan.toml: plan.seal), to be
    kept under version control. From then on `check` fails when plan or graph change without an amendment. Comments,
    layout and the order of things may change.

    A plan in which `check` finds an error is not sealed (exit code 1), nor is one that is sealed already (2).

    \b
    adjustplan seal plan.toml --by "A. Okafor, for the steering group"
    """
    from adjustplan.check import check_plan

    read = read_plan(plan)
    sealing.refuse_sealed(read)
    if errors := [finding for finding in check_plan(plan).findings if finding.severity == "error"]:
        for finding in errors:
            typer.echo(f"{finding.severity}: {finding}", err=True)
        typer.echo(f"{plan} was not sealed: mend or waive what stands above.", err=True)
        raise typer.Exit(1)
    history = sealing.seal(read, by, day.date() if day else None, data_seen)
    terminal.show(history, form.value)
    typer.echo(f"wrote {history.path}", err=True)


@app.command()
def amend(
    plan: PlanPath,
    reason: Annotated[str, typer.Option("--reason", metavar="WHY", help="Why the plan changed.")],
    data_seen: Annotated[
        bool | None,
        typer.Option("--data-seen/--data-not-seen", help="Whether the data had been seen by then; one must be said."),
    ] = None,
    by: By = "",
    day: Day = None,
    form: Format = OutputFormat.text,
) -> None:
    """Record that a sealed plan changed, and why.

    Change plan or graph first. The amendment says what changed since the seal or the last amendment, in words, and is
    added to the seal file and to the document's table of revisions. What stands there already is never altered.

    \b
    adjustplan amend plan.toml --data-not-seen --reason "The depot is not on the file; the canteen is."
    """
    if data_seen is None:
        message = "An amendment says whether the data had been seen when it was decided."
        raise SealError(Finding("seal-data-unsaid", message, "Add --data-seen or --data-not-seen."))
    history = sealing.amend(read_plan(plan), reason, by, day.date() if day else None, data_seen=data_seen)
    terminal.show(history, form.value)
    typer.echo(f"wrote {history.path}", err=True)
