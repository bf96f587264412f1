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

_WAYS = {
    "regression": "an outcome regression ({model})",
    "standardisation": "standardisation over an outcome regression ({model})",
    "weighting": "inverse-probability weighting",
    "doubly robust": "the doubly robust combination of weighting and an outcome regression ({model})",
    "stratification": "stratification (Mantel–Haenszel)",
}
_MODELS = {
    "linear": "linear",
    "logistic": "logistic",
    "penalised logistic": "logistic, with Firth's penalised likelihood",
    "log-binomial": "log-binomial",
    "poisson": "Poisson",
    "negative binomial": "negative binomial",
    "cox": "Cox",
    "conditional logistic": "conditional logistic",
}
_VARIANCES = {
    "model": "standard errors of the model",
    "robust": "robust (sandwich) standard errors",
    "cluster": "standard errors robust to clusters",
}


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
    yield f"{_method(fit)} In each line the crude and the adjusted estimate come from the same rows."
    yield _meaning(fit)
    yield from _ways(fit)
    for section in fit.sections:
        head, *lines = section.lines()
        yield f"### {text(head)}"
        yield "\n".join(f"    {line.strip()}" if line.startswith("  ") else line for line in lines)
    yield from _rows(fit)
    said = fit.said
    if said:
        yield "\n".join(
            f"- **{finding.severity.capitalize()}.** {text(f'{finding.message} {finding.remedy}')}" for finding in said
        )
    mark = f" The columns used have the fingerprint {code(fit.fingerprint)} (SHA-256)." if fit.fingerprint else ""
    yield f"Data: {code(str(plan.analysis.data))}.{mark}"


def _method(fit: Fit) -> str:
    """How the estimates were made, in a sentence."""
    way = _WAYS[fit.way].format(model=_MODELS[fit.model])
    if fit.intervals == "bootstrap":
        return f"95 % confidence intervals from resampled people (bootstrap percentiles), adjusted by {way}."
    return f"95 % confidence intervals, from {way} with {_VARIANCES[fit.variance]}."


def _meaning(fit: Fit) -> str:
    """Whether the estimate is conditional or marginal, and what follows."""
    from adjustplan.estimate.ways import CONDITIONAL  # there is a fit, so it is loaded

    conditional = CONDITIONAL[fit.way]
    odd = fit.measure in ("odds ratio", "hazard ratio")
    compared = (
        "The estimate is *conditional*: it compares people who are alike in the covariates."
        if conditional
        else "The estimate is *marginal*: it compares two states of the whole population."
    )
    if not (odd and conditional):
        return f"{compared} If the graph is right, all sufficient sets estimate the same effect, up to chance."
    return (
        f"{compared} A {fit.measure} depends on the covariates in the model even where nothing confounds"
        " (non-collapsibility), so sufficient sets may differ a little even if the graph is right."
    )


def _ways(fit: Fit) -> Iterator[str]:
    """The planned set by each way to adjust."""
    if len(fit.ways) < 2:
        return
    yield "### Ways to adjust"
    rows = [
        (
            text(way.way.capitalize()),
            "conditional" if way.conditional else "marginal",
            interval(way.estimate),
            f"{figure(way.means[0])} and {figure(way.means[1])}" if way.means else "–",
        )
        for way in fit.ways
    ]
    yield table(("Way", "Kind of effect", fit.measure.capitalize(), "Had all been exposed, and had none"), rows)
    if fit.measure.startswith("rate"):
        yield (
            "Standardised rates are averaged over the time at risk there was, weighted ones over people. Where the"
            " exposure changes how long people are followed, the two answer different questions."
        )


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
