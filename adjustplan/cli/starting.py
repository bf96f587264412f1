"""The command that begins a study: start."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from adjustplan.cli.app import app
from adjustplan.cli.arguments import Format, OutputFormat
from adjustplan.errors import Finding, PlanError, did_you_mean
from adjustplan.plan.starting import NewStudy, refuse_started
from adjustplan.plan.starting import start as start_study
from adjustplan.report import terminal
from adjustplan.study import DESIGNS, MEASURES

_NEEDED = ("title", "exposure", "outcome", "design")


@app.command()
def start(
    folder: Annotated[Path, typer.Argument(metavar="DIR", help="The folder of the study; made if need be.")],
    title: Annotated[str | None, typer.Option("--title", help="The study's title.")] = None,
    exposure: Annotated[str | None, typer.Option("--exposure", "-x", metavar="NAME", help="The exposure.")] = None,
    outcome: Annotated[str | None, typer.Option("--outcome", "-y", metavar="NAME", help="The outcome.")] = None,
    design: Annotated[str | None, typer.Option("--design", help=f"One of: {', '.join(DESIGNS)}.")] = None,
    measure: Annotated[str, typer.Option("--measure", help=f"One of: {', '.join(MEASURES)}.")] = "",
    covariate: Annotated[
        list[str] | None,
        typer.Option("--covariate", metavar="NAME", help="A common cause of exposure and outcome; may be repeated."),
    ] = None,
    form: Format = OutputFormat.text,
) -> None:
    """Start a study: a commented graph and plan to go on from.

    What the options leave open is asked for on a terminal. The covariates given are drawn as common causes of exposure
    and outcome (in a trial: of the outcome), and adjusted for. Nothing that exists is replaced.

    \b
    adjustplan start damp_homes
    adjustplan start damp_homes --title "Damp homes and asthma" -x damp -y asthma --design cohort --covariate income
    """
    refuse_started(folder)
    given = {"title": title, "exposure": exposure, "outcome": outcome, "design": design}
    asking = any(given[name] is None for name in _NEEDED)
    if asking and not sys.stdin.isatty():
        absent = ", ".join(f"--{name}" for name in _NEEDED if given[name] is None)
        raise PlanError(Finding("start-missing", f"There is no terminal to ask on; not given: {absent}.", "Add it."))
    told = {name: value if value is not None else _ask(name) for name, value in given.items()}
    covariates = tuple(covariate or (_ask_covariates() if asking else ()))
    written = start_study(folder, NewStudy(**told, measure=measure, covariates=covariates))
    terminal.show_written(written, form.value)


def _ask(name: str) -> str:
    if name == "design":
        return str(typer.prompt(f"Design ({', '.join(DESIGNS)})", value_proc=_known_design, err=True))
    return str(typer.prompt(name.capitalize(), err=True)).strip()


def _known_design(words: str) -> str:
    """The design that was typed; where there is none of that name, the terminal asks again."""
    if words.strip() not in DESIGNS:
        raise typer.BadParameter(did_you_mean(words.strip(), DESIGNS, "That is none of them."))
    return words.strip()


def _ask_covariates() -> list[str]:
    typer.echo("Common causes of exposure and outcome, one at a time; an empty line ends the list.", err=True)
    names: list[str] = []
    while name := str(typer.prompt("Covariate", default="", show_default=False, err=True)).strip():
        names.append(name)
    return names
