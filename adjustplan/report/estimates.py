"""The document's section on estimates: crude beside adjusted, for the planned set and for the others."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from adjustplan.plan import Plan
from adjustplan.report.design import estimate_prefix
from adjustplan.report.markdown import code, codes, table, text
from adjustplan.report.numbers import figure, interval

if TYPE_CHECKING:
    from adjustplan.estimate import AdjustedEstimate, Fit

_MODELS = {
    "mean difference": "linear regression",
    "odds ratio": "logistic regression",
    "risk ratio": "Poisson regression of the risk",
}
_VARIANCES = {"model": "standard errors of the model", "robust": "robust (sandwich) standard errors"}


def estimate_section(plan: Plan, fit: Fit | None) -> Iterator[str]:
    """The section, as paragraphs of Markdown."""
    yield "## Crude and adjusted estimates"
    if fit is None:
        yield "The plan names no set or no data yet, so nothing is estimated."
        return
    planned = fit.adjusted[0]
    prefix = estimate_prefix(plan)
    yield f"{prefix}{_headline(fit, planned)}"
    rows = [
        (codes(result.members), text(_origins(result)), str(result.rows), *map(interval, (result.crude, result)))
        for result in fit.adjusted
    ]
    between = " between groups" if prefix else ""
    heads = ("Adjusted for", "Which set", "Rows", f"Crude {fit.measure}{between}", f"Adjusted {fit.measure}{between}")
    yield table(heads, rows, right=(2,))
    yield (
        f"95 % confidence intervals, from {_MODELS[fit.measure]} with {_VARIANCES[fit.variance]}. In each line the"
        " crude and the adjusted estimate come from the same rows."
    )
    if len([result for result in fit.adjusted if result.sufficient]) > 1:
        yield (
            "If the graph is right, all sufficient sets estimate the same effect, up to chance"
            + (" and to the way an odds ratio depends on its covariates." if fit.measure == "odds ratio" else ".")
        )
    yield from _rows(fit)
    said = dict.fromkeys([*fit.findings, *(finding for result in fit.adjusted for finding in result.findings)])
    if said:
        yield "\n".join(
            f"- **{finding.severity.capitalize()}.** {text(f'{finding.message} {finding.remedy}')}" for finding in said
        )
    yield f"Data: {code(plan.data_path.name)}."


def _headline(fit: Fit, planned: AdjustedEstimate) -> str:
    exposed, reference = fit.contrast
    compared = f"{text(exposed)} compared with {text(reference)}"
    if planned.estimate is None or fit.crude is None:
        return f"**The planned {fit.measure} could not be estimated** ({compared})."
    return (
        f"For {compared}, the crude {fit.measure} is **{interval(fit.crude)}**; adjusted for"
        f" {codes(planned.members)} it is **{interval(planned)}**."
        f" Adjustment moved the estimate from {figure(fit.crude.estimate)} to {figure(planned.estimate)}."
    )


def _origins(result: AdjustedEstimate) -> str:
    words = {"planned": "planned", "alternative": "alternative", "minimal": "minimal sufficient"}
    listed = ", ".join(words[origin] for origin in result.origins)
    return listed if result.sufficient else f"{listed}; not sufficient"


def _rows(fit: Fit) -> Iterator[str]:
    dropped = fit.rows_total - fit.rows
    if not dropped:
        yield f"All {fit.rows_total} rows of the data are complete for the planned analysis."
        return
    needed = [fit.exposure, fit.outcome, *fit.adjusted[0].members]
    rows = [(code(variable), str(fit.missing[variable])) for variable in needed if fit.missing.get(variable)]
    yield (
        f"Of {fit.rows_total} rows, {fit.rows} are complete for the planned analysis; {dropped} were left out because a"
        " variable is missing:"
    )
    yield table(("Variable", "Rows that lack it"), rows, right=(1,))
