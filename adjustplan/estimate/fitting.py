"""Running the planned analysis: from the plan and its data file to crude and adjusted estimates.

The file is reduced to covariate patterns once; then each set gets the rows that are complete for it, one
crude and one adjusted model on exactly these rows, and either an estimate or the reason why there is none. A
model that fails does not take the others with it. What makes every model impossible is raised, all of it at
once.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, replace

from adjustplan.data import Patterns, Source, check_columns, check_values, open_data, reduce_to_patterns
from adjustplan.data.checks import check_covariate
from adjustplan.errors import DataError, Finding
from adjustplan.estimate.exposure import ExposureCoding, code_exposure
from adjustplan.estimate.kernel import Variance
from adjustplan.estimate.modelling import estimate_effect
from adjustplan.estimate.results import AdjustedEstimate, Estimate, Fit
from adjustplan.estimate.sets import ReportedSet, reported_sets
from adjustplan.estimate.threads import one_thread
from adjustplan.identify.showing import with_article
from adjustplan.plan import Plan
from adjustplan.study import DESIGNS, Measure

BUILT: tuple[Measure, ...] = ("mean difference", "odds ratio", "risk ratio")
"""The measures for which there is a regression."""


def fit(plan: Plan, *, limit: int = 20) -> Fit:
    """Estimate the planned measure of effect, crude and adjusted for every set worth reporting.

    Parameters
    ----------
    plan : Plan
        With an adjustment and an analysis that names the data.
    limit : int
        Most minimal sufficient sets of the graph that are reported beside the plan's own sets.

    Returns
    -------
    Fit

    Raises
    ------
    PlanError
        If the plan lacks what is needed, or its measure cannot be estimated in a study of its design.
    DataError
        If the data cannot serve any model; every reason is among its findings.

    Notes
    -----
    A mean difference comes from a linear model, an odds ratio from a logistic one, a risk ratio
    from a Poisson model with a robust variance (Zou 2004). Memory grows with the number of covariate
    patterns, not of rows.
    """
    _refuse_by_design(plan)
    question = plan.question
    with open_data(plan.data_path) as source:
        ends = [question.exposure, question.outcome]
        usable = {
            variable.name
            for variable in plan.graph
            if source.kinds.get(plan.column(variable.name), "other") != "other"
            and plan.column(variable.name) not in source.repeated
        }
        sets, notes = reported_sets(plan, usable, limit)
        fitted_sets = [chosen for chosen in sets if not _refused(chosen)]
        covariates = sorted({name for chosen in fitted_sets for name in chosen.members})
        if faults := list(check_columns(plan, source, [*ends, *covariates])):
            raise DataError(faults)
        columns = {name: plan.column(name) for name in [question.exposure, *covariates]}
        patterns = reduce_to_patterns(source, plan.column(question.outcome), columns)
        by_covariate, coding = _check(plan, source, patterns, covariates)
    variance: Variance = plan.analysis.variance or ("robust" if plan.analysis.measure == "risk ratio" else "model")
    with one_thread():
        adjusted = tuple(_estimate_set(plan, patterns, chosen, coding, variance, by_covariate) for chosen in sets)
    rows = adjusted[0].rows
    dropped = patterns.total - rows
    missing = {name: patterns.missing(name) for name in columns}
    missing[question.outcome] = patterns.total - patterns.outcome.observed
    told = list(notes) + list(coding.findings)
    if dropped and not _refused(sets[0]):
        lacks = ", ".join(f"{name} {missing[name]}" for name in [*ends, *sets[0].members] if missing.get(name))
        message = f"{dropped} of {patterns.total} rows lack a value the planned model needs ({lacks})."
        remedy = "Say in the document why they may be left out."
        told.append(Finding("data-rows-dropped", message, remedy, "note", str(plan.data_path)))
    return Fit(
        plan.analysis.measure,
        question.effect,
        question.exposure,
        question.outcome,
        coding.words,
        variance,
        rows,
        patterns.total,
        missing,
        len(patterns),
        adjusted[0].crude,
        adjusted,
        tuple(told),
    )


def _refuse_by_design(plan: Plan) -> None:
    if plan.analysis.measure not in BUILT:
        message = f"“{plan.analysis.measure}” cannot be fitted by adjustplan yet."
        key = ("analysis", "measure")
        raise plan.error("analysis-measure-not-built", message, f"It fits: {', '.join(BUILT)}.", key)
    if plan.study is None:
        return
    design, measure = DESIGNS[plan.study.design], plan.analysis.measure
    if measure not in design.measures:
        subject = with_article(f"{design.name} study").capitalize()
        message = f"{subject} cannot estimate {with_article(measure)}: {design.refusal}."
        allowed = " or ".join(design.measures)
        remedy = f"Estimate the {allowed}." if allowed else "Choose a design with a comparison."
        raise plan.error("analysis-measure-design", message, remedy, ("analysis", "measure"))


def _refused(chosen: ReportedSet) -> bool:
    return any(finding.severity == "error" for finding in chosen.findings)


def _check(
    plan: Plan, source: Source, patterns: Patterns, covariates: list[str]
) -> tuple[dict[str, tuple[Finding, ...]], ExposureCoding]:
    """What is said of each variable, and the coding of the exposure; DataError if nothing can be fitted."""
    faults = list(check_values(plan, source, patterns))
    found = {name: tuple(check_covariate(plan, source, patterns, name)) for name in covariates}
    exposure = plan.question.exposure
    found[exposure] = tuple(check_covariate(plan, source, patterns, exposure))
    planned = [name for name in covariates if name in plan.adjustment.members]
    faults += [finding for name in planned for finding in found[name] if finding.severity == "error"]
    coding = None
    try:
        if patterns.total and len(patterns.levels(exposure)) > 1:
            coding = code_exposure(plan, patterns)
    except DataError as error:
        faults += error.findings
    if faults or coding is None:
        raise DataError(dict.fromkeys(faults))
    return found, coding


def _estimate_set(
    plan: Plan,
    patterns: Patterns,
    chosen: ReportedSet,
    coding: ExposureCoding,
    variance: Variance,
    by_covariate: Mapping[str, tuple[Finding, ...]],
) -> AdjustedEstimate:
    """The adjusted and the crude estimate of one set, on the rows complete for it."""
    told = list(chosen.findings)
    blank = AdjustedEstimate(chosen.members, chosen.origins, chosen.sufficient, chosen.rationale)
    if _refused(chosen):
        return _filled(blank, None, 0, None, told)
    exposure, measure = plan.question.exposure, plan.analysis.measure
    told += [finding for name in (exposure, *chosen.members) for finding in by_covariate[name]]
    complete = patterns.complete([exposure, *chosen.members])
    rows = int(complete.rows.sum())
    if rows == 0:
        lacks = max(chosen.members, key=patterns.missing, default=exposure)
        message = f"No row has a value for everything this set needs; “{lacks}” is missing most often."
        told.append(Finding("data-no-complete-rows", message, "Choose a set that the data can serve."))
        return _filled(blank, None, 0, None, told)
    crude, of_crude = estimate_effect(complete.complete([exposure]), exposure, coding, {}, measure, variance)
    if not chosen.members:
        return _filled(blank, crude, rows, crude, [*told, *of_crude])
    forms = {name: plan.analysis.forms.get(name, _default_form(complete, name)) for name in chosen.members}
    told += [
        _form_note(plan, name)
        for name in chosen.members
        if name not in plan.analysis.forms and forms[name] == "linear" and len(patterns.levels(name)) > 2
    ]
    if any(finding.severity == "error" for finding in told):
        return _filled(blank, None, rows, crude, told)
    adjusted, of_adjusted = estimate_effect(complete, exposure, coding, forms, measure, variance)
    if crude is None:
        told += [replace(finding, message=f"Crude: {finding.message}", severity="warning") for finding in of_crude]
    return _filled(blank, adjusted, rows, crude, [*told, *of_adjusted])


def _filled(
    blank: AdjustedEstimate,
    result: Estimate | None,
    rows: int,
    crude: Estimate | None,
    findings: list[Finding],
) -> AdjustedEstimate:
    said = tuple(dict.fromkeys(findings))
    return replace(blank, **(asdict(result) if result else {}), rows=rows, crude=crude, findings=said)


def _default_form(patterns: Patterns, name: str) -> str:
    return "linear" if patterns.kinds[name] == "number" else "category"


def _form_note(plan: Plan, name: str) -> Finding:
    message = f"“{name}” enters as linear, because the plan states no form for it."
    remedy = f'State {name} = "linear", "category" or "spline(4)" in [analysis.forms].'
    line = plan.line("analysis", "forms")
    return Finding("estimate-default-form", message, remedy, "note", str(plan.path), line)
