"""From a plan to what the models need: the sets, the patterns of its data, and every choice settled.

The file is reduced to covariate patterns once, for all sets together. What makes every model impossible is raised here,
all of it at once.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from adjustplan.data import Patterns, Source, Wanted, check_columns, check_values, open_data, reduce_to_patterns
from adjustplan.data.checks import check_covariate, check_roles
from adjustplan.data.eligibility import eligible_rows
from adjustplan.data.flow import Flow
from adjustplan.data.sources.fingerprint import fingerprint
from adjustplan.errors import DataError, Finding, PlanError
from adjustplan.estimate.exposure import ExposureCoding, code_exposure, cut_points
from adjustplan.estimate.problem import Setting, Variance
from adjustplan.estimate.sets import ReportedSet, reported_sets
from adjustplan.identify.showing import with_article
from adjustplan.plan import Plan
from adjustplan.plan.analysis_faults import ROW_MODELS, analysis_faults, model_for
from adjustplan.plan.analysis_schema import Analysis, Weighting
from adjustplan.study import DESIGNS, KINDS


@dataclass(frozen=True, eq=False)
class Loaded:
    """What the models need.

    Attributes
    ----------
    plan : Plan
    setting : Setting
        The planned analysis with every choice made.
    patterns : Patterns
        Of the whole file, numbers cut into groups where the plan says so.
    sets : tuple of ReportedSet
        The planned one first.
    findings : tuple of Finding
        What concerns all of them.
    by_variable : mapping of str to tuple of Finding
        What concerns the sets with this variable, and the exposure.
    missing : mapping of str to int
        Rows of the file that lack each variable, or a column that the analysis needs besides.
    flow : Flow
        From the source to the eligible rows.
    place : str
        Where the data are, without secrets.
    fingerprint : str or None
        SHA-256 of the columns used, of all eligible rows in whatever order; None where it was not asked for.
    """

    plan: Plan
    setting: Setting
    patterns: Patterns
    sets: tuple[ReportedSet, ...]
    findings: tuple[Finding, ...]
    by_variable: Mapping[str, tuple[Finding, ...]]
    missing: dict[str, int]
    flow: Flow
    place: str
    fingerprint: str | None


def load(plan: Plan, limit: int, *, fingerprinted: bool = False) -> Loaded:
    """Read, reduce and check the data of a plan; ``fingerprinted`` takes one more pass over the rows.

    Raises
    ------
    PlanError
        If the plan lacks what is needed, or asks what cannot be estimated.
    DataError
        If the data cannot serve any model; every reason is among its findings.
    """
    _refuse(plan)
    question, analysis = plan.question, plan.analysis
    with open_data(plan.data_place, table=plan.data_table, folder=plan.path.parent) as raw:
        source, prepared = eligible_rows(plan, raw)
        ends = [question.exposure, question.outcome]
        usable = {
            variable.name
            for variable in plan.graph
            if source.kinds.get(plan.column(variable.name), "other") != "other"
            and plan.column(variable.name) not in source.repeated
        }
        sets, notes = reported_sets(plan, usable, limit)
        covariates = sorted({name for chosen in sets if not chosen.refused for name in chosen.members})
        faults = [*check_columns(plan, source, [*ends, *covariates]), *check_roles(plan, source)]
        if faults:
            raise DataError(faults)
        columns = {name: plan.column(name) for name in [question.exposure, *covariates]}
        patterns = reduce_to_patterns(source, _wanted(plan, columns))
        by_variable = _check(plan, source, patterns, covariates)
        missing = {name: patterns.missing(name) for name in columns} | _missing_roles(plan, source)
        used = sorted({plan.column(question.outcome), *columns.values(), *_roles(analysis).values()})
        mark = fingerprint(source, used) if fingerprinted else None
    missing[question.outcome] = patterns.total - patterns.outcome.observed
    forms = {name: _form(analysis, patterns, name) for name in covariates}
    notes_of_forms = {name: _form_note(plan, patterns, name) for name in covariates if name not in analysis.forms}
    by_variable = {name: (*found, *notes_of_forms.get(name, ())) for name, found in by_variable.items()}
    for name in columns:
        if cuts := cut_points(analysis.forms.get(name, "")):
            patterns = patterns.grouped(name, cuts)
    coding = code_exposure(plan, patterns)
    setting = _setting(plan, coding, forms)
    flow = prepared.flow if prepared else Flow.start(patterns.total)
    told = (*source.notes, *(prepared.findings if prepared else ()), *notes, *coding.findings)
    return Loaded(plan, setting, patterns, sets, told, by_variable, missing, flow, source.place, mark)


def _wanted(plan: Plan, columns: Mapping[str, str]) -> Wanted:
    analysis = plan.analysis
    model = model_for(analysis, analysis.way)
    by_rows = analysis.way == "regression" and model in ROW_MODELS
    keys = {"cluster": analysis.cluster}
    if by_rows and model == "cox":
        keys |= {"time": analysis.time, "entry": analysis.entry}
    if by_rows and model == "conditional logistic":
        keys["matched_set"] = analysis.matched_set
    atoms = by_rows or analysis.bootstrap is not None or analysis.missing != "complete cases"
    return Wanted(
        plan.column(plan.question.outcome),
        columns,
        {name: column for name, column in keys.items() if column is not None},
        analysis.person_time if KINDS[analysis.measure] == "rate" or model == "negative binomial" else None,
        analysis.weights,
        atoms,
    )


def _setting(plan: Plan, coding: ExposureCoding, forms: Mapping[str, str]) -> Setting:
    analysis = plan.analysis
    return Setting(
        plan.question.exposure,
        analysis.measure,
        model_for(analysis, analysis.way),
        analysis.way,
        _variance(analysis),
        coding,
        forms,
        analysis.modifier,
        analysis.weighting or Weighting.model_validate({}),
        analysis.ties,
    )


def _variance(analysis: Analysis) -> Variance:
    """The stated variance, or the usual one: of the model only where its family says how the outcome varies."""
    if analysis.cluster:
        return "cluster"
    if analysis.variance:
        return analysis.variance
    model = model_for(analysis, analysis.way)
    says = (
        analysis.measure == "mean difference"
        or model in ("logistic", "log-binomial", "penalised logistic", *ROW_MODELS)
        or analysis.measure == "rate ratio"
    )
    weighted = analysis.weights or analysis.missing == "inverse probability"
    return "model" if analysis.way == "regression" and says and not weighted else "robust"


def _refuse(plan: Plan) -> None:
    """PlanError where the plan asks what its design or this program cannot give."""
    measure = plan.analysis.measure
    if plan.study is not None and measure not in DESIGNS[plan.study.design].measures:
        design = DESIGNS[plan.study.design]
        subject = with_article(f"{design.name} study").capitalize()
        message = f"{subject} cannot estimate {with_article(measure)}: {design.refusal}."
        allowed = " or ".join(design.measures)
        remedy = f"Estimate the {allowed}." if allowed else "Choose a design with a comparison."
        raise plan.error("analysis-measure-design", message, remedy, ("analysis", "measure"))
    faults = [fault for fault in analysis_faults(plan.file) if fault.code != "model-unused"]
    if faults:
        raise PlanError(
            Finding(fault.code, fault.message, fault.remedy, file=str(plan.path), line=plan.line(*fault.key))
            for fault in faults
        )


def _check(plan: Plan, source: Source, patterns: Patterns, covariates: list[str]) -> dict[str, tuple[Finding, ...]]:
    """What is said of each variable; DataError if nothing can be fitted."""
    faults = list(check_values(plan, source, patterns))
    found = {name: tuple(check_covariate(plan, source, patterns, name)) for name in covariates}
    exposure = plan.question.exposure
    found[exposure] = tuple(check_covariate(plan, source, patterns, exposure))
    planned = [name for name in covariates if name in plan.adjustment.members]
    faults += [finding for name in planned for finding in found[name] if finding.severity == "error"]
    if (
        patterns.total
        and len(patterns.levels(exposure)) > 1
        and not any(f.severity == "error" for f in found[exposure])
    ):
        try:
            cuts = cut_points(plan.analysis.forms.get(exposure, ""))
            code_exposure(plan, patterns.grouped(exposure, cuts) if cuts else patterns)
        except DataError as error:
            faults += error.findings
    if faults:
        raise DataError(dict.fromkeys(faults))
    return found


def _missing_roles(plan: Plan, source: Source) -> dict[str, int]:
    """Rows that lack a column which the analysis needs besides variables."""
    columns = _roles(plan.analysis)
    if not columns:
        return {}
    table = source.table
    counted = table.aggregate(**{role: table[column].isnull().sum() for role, column in columns.items()}).execute()
    return {columns[role]: int(counted[role].fillna(0).iloc[0]) for role in columns}


def _form(analysis: Analysis, patterns: Patterns, name: str) -> str:
    """The form of a covariate; two values are categories whatever the plan calls them."""
    stated = analysis.forms.get(name, "linear" if patterns.kinds[name] == "number" else "category")
    if stated.startswith("cut") or (stated == "linear" and len(patterns.levels(name)) <= 2):
        return "category"
    return stated


def _form_note(plan: Plan, patterns: Patterns, name: str) -> tuple[Finding, ...]:
    if patterns.kinds[name] != "number" or len(patterns.levels(name)) <= 2:
        return ()
    message = f"“{name}” enters as linear, because the plan states no form for it."
    remedy = f'State {name} = "linear", "category", "cut(…)" or "spline(4)" in [analysis.forms].'
    line = plan.line("analysis", "forms")
    return (Finding("estimate-default-form", message, remedy, "note", str(plan.path), line),)


def _roles(analysis: Analysis) -> dict[str, str]:
    """The columns that the analysis needs besides variables."""
    roles = ("person_time", "time", "entry", "weights", "cluster", "matched_set")
    return {role: column for role in roles if (column := getattr(analysis, role)) is not None}
