"""The command that asks how fragile the planned estimate is: stress."""

from __future__ import annotations

import typer

from adjustplan.cli.app import app
from adjustplan.cli.arguments import Format, OutputFormat, PlanPath
from adjustplan.plan import read_plan
from adjustplan.report import terminal
from adjustplan.report.progress import progress_bar


@app.command()
def stress(plan: PlanPath, form: Format = OutputFormat.text) -> None:
    """Ask how strong unmeasured confounding and other biases would have to be.

    It says how strong an unmeasured confounder must be to explain the planned estimate away (E-values), what one with
    the strengths that the plan assumes would leave, what one as strong as a covariate of the study would leave, and, by
    drawing from the distributions that the plan states, what is left without misclassification, selection or a
    confounder that is not measured. The plan's [stress] says what is assumed; without it E-values and yardsticks are
    given. The exit code is 1 when there are findings above a note.

    \b
    adjustplan stress plan.toml
    """
    from adjustplan.estimate.stress.running import stress_plan

    with progress_bar() as progress:
        result = stress_plan(read_plan(plan), progress)
    terminal.show(result, form.value)
    raise typer.Exit(0 if result.clean else 1)
