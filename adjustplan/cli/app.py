"""The application: its commands, and what becomes of everything that can go wrong in one.

Results go to stdout, words about the work to stderr. Exit codes: 0 done and clean; 1 findings or an insufficient set;
2 the input or the usage is wrong; 3 a fault of the program itself. No traceback reaches a user.
"""

from __future__ import annotations

import os
import sys
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from typing import NoReturn

import typer

from adjustplan.errors import AdjustplanError, AdjustplanWarning

app = typer.Typer(
    name="adjustplan",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)


@app.callback(invoke_without_command=True)
def adjustplan(
    version: bool = typer.Option(False, "--version", help="Print the version and stop."),
) -> None:
    """Plan which covariates an observational study adjusts for, run that analysis, and document why.

    Write a causal graph as plain text, one arrow a line (cause -> effect). `roles` and `sets` say what it implies,
    `judge` and `trace` hold a set of yours against it, `draw` and `convert` make pictures and other formats. With a
    plan file, `fit` runs the planned regression beside the crude one, and `write` makes the document.

    An adjusted estimate is causal only if the graph is right and nothing unmeasured confounds. It is no clinical advice
    and replaces neither ethics approval nor a statistician's or physician's judgement.
    """
    if version:
        from adjustplan import __version__

        typer.echo(f"adjustplan {__version__}")
        raise typer.Exit
    # nothing else to do: a command follows


def main() -> NoReturn:
    """Run the command line."""
    from adjustplan.cli import (  # noqa: F401 (importing them registers their commands)
        checking,
        graphs,
        plans,
        registration,
        starting,
        stressing,
    )

    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(encoding="utf-8", errors="replace")
    with _faults_said(), _warnings_said():
        app()
    sys.exit(0)


@contextmanager
def _warnings_said() -> Iterator[None]:
    """Our warnings as lines on stderr; other libraries' are for developers and are left out."""

    def show(message: Warning | str, category: type[Warning], *_rest: object) -> None:
        if issubclass(category, AdjustplanWarning):
            typer.echo(f"warning: {message}", err=True)

    with warnings.catch_warnings():
        warnings.simplefilter("always", AdjustplanWarning)
        warnings.showwarning = show  # type: ignore[assignment]
        yield


@contextmanager
def _faults_said() -> Iterator[None]:
    try:
        yield
    except AdjustplanError as error:
        for finding in error.findings:
            typer.echo(f"{finding.severity}: {finding}", err=True)
        sys.exit(2)
    except KeyboardInterrupt:
        typer.echo("stopped", err=True)
        sys.exit(130)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())  # the reader left; nothing is lost
        sys.exit(0)
    except Exception as error:
        if os.environ.get("ADJUSTPLAN_TRACEBACK"):
            raise
        message = f"adjustplan failed, and it is not your input: {type(error).__name__}: {error}"
        typer.echo(f"{message}\nSet ADJUSTPLAN_TRACEBACK=1 to see where, and report it.", err=True)
        sys.exit(3)
