"""Commands that hold plans to the rules and explain them: check, explain."""

from __future__ import annotations

import os
import sys
from enum import StrEnum
from pathlib import Path
from typing import Annotated

import typer

from adjustplan.cli.app import app
from adjustplan.cli.arguments import Force, Format, OutputFormat
from adjustplan.errors import AdjustplanError
from adjustplan.files import refuse_existing, write_whole

_COLOURS = {"error": "red", "warning": "yellow", "note": "blue", "passed": "green"}


class ReportFormat(StrEnum):
    """How a report of findings is written."""

    text = "text"
    json = "json"
    junit = "junit"
    sarif = "sarif"


@app.command()
def check(
    plans: Annotated[
        list[str],
        typer.Argument(metavar="PLAN...", help="Plans, folders to look for plans in, or patterns such as 'plans/*'."),
    ],
    strict: Annotated[bool, typer.Option("--strict", help="Let warnings fail the check as errors do.")] = False,
    form: Annotated[
        ReportFormat,
        typer.Option("--format", help="Text to read, JSON for programs, JUnit XML or SARIF for CI services."),
    ] = ReportFormat.text,
    output: Annotated[
        Path | None, typer.Option("--output", "-o", metavar="FILE", help="Write the report to a file.")
    ] = None,
    crosswalk: Annotated[
        bool,
        typer.Option("--crosswalk", help="In text, list published recommendations too, met or not. JSON always does."),
    ] = False,
    force: Force = False,
) -> None:
    """Check plans against the rules: for yourself, before a commit, or in CI.

    Each finding says what is wrong, where, why and what to do; `explain` tells more of its code. The data are not
    needed; where they are, the names of their columns are compared with the plan.

    The exit code is 0 when the check passed, 1 when a finding fails it (an error; with --strict a warning too), and 2
    when a plan could not be read; the other plans are checked all the same.

    \b
    adjustplan check plan.toml
    adjustplan check plans --strict --format junit -o report.xml
    """
    from adjustplan.check import check as check_plans
    from adjustplan.check.plan_files import find_plans
    from adjustplan.report.findings import as_text, crosswalk_as_text, write_report

    if output is not None:
        refuse_existing(output, force=force)
    found = find_plans(plans)
    if not found.paths:
        raise AdjustplanError(found.missing)
    for finding in found.missing:
        typer.echo(f"error: {finding}", err=True)
    report = check_plans(found.paths, strict=strict)
    before = crosswalk_as_text(report) if crosswalk and form is ReportFormat.text else ""
    if output is not None:
        write_whole(output, before + write_report(report, form.value), force=force)
        typer.echo(f"wrote {output}", err=True)
    elif form is ReportFormat.text and sys.stdout.isatty() and not os.environ.get("NO_COLOR"):
        painted = as_text(report, lambda text, kind: typer.style(text, fg=_COLOURS[kind], bold=True))
        typer.echo(before + painted, nl=False)
    else:
        typer.echo(before + write_report(report, form.value), nl=False)
    usable = report.readable and not found.missing
    raise typer.Exit((0 if report.passed else 1) if usable else 2)


@app.command()
def explain(
    code: Annotated[
        str | None, typer.Argument(metavar="[CODE]", help="What stands in brackets behind a finding.")
    ] = None,
    form: Format = OutputFormat.text,
) -> None:
    """Explain the code of a finding: what it means, why it matters, what mends it.

    Without a code, all of them are listed.

    \b
    adjustplan explain study-immortal-time
    """
    from adjustplan.check.explaining import explain as explain_code
    from adjustplan.check.explaining import explain_all
    from adjustplan.report import terminal

    terminal.show(explain_all() if code is None else explain_code(code), form.value)
