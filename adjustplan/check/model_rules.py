"""Rules about the regression that is planned."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding
from adjustplan.identify.showing import list_text, with_article
from adjustplan.plan.analysis_faults import analysis_faults
from adjustplan.study import OUTCOME_TYPES


@rule(
    "model-outcome",
    "error",
    finds="A measure that does not fit the type of the outcome.",
    matters="A risk ratio of a continuous outcome, or a mean difference of times to an event, has no meaning.",
    mend="Choose a measure made for this type of outcome, or mend outcome_type.",
)
def outcome(subject: Subject) -> Iterator[Finding]:
    analysis = subject.plan.file.analysis
    if analysis and analysis.outcome_type and analysis.outcome_type not in OUTCOME_TYPES[analysis.measure]:
        fitting = [measure for measure, types in OUTCOME_TYPES.items() if analysis.outcome_type in types]
        message = f"{with_article(analysis.measure).capitalize()} does not fit a {analysis.outcome_type} outcome."
        yield subject.finding(message, f"Fitting are: {list_text(fitting, 'or')}.", "analysis", "measure")


@rule(
    "model-form",
    "warning",
    finds="A member of the set whose form in the model is not stated.",
    matters="A continuous covariate entered as a straight line adjusts only for a straight line; a coded category"
    " entered as a number adjusts for nonsense. What is left open now will be chosen with the data in view.",
    mend="State it in [analysis.forms]: “category”, “linear”, “cut(…)” or “spline(4)”.",
    source="STROBE item 11 (von Elm et al. 2007, PLoS Med 4:e296).",
)
def form(subject: Subject) -> Iterator[Finding]:
    analysis = subject.plan.file.analysis
    if analysis:
        for name in subject.members:
            if name not in analysis.forms:
                message = f"The form of “{name}” is not stated."
                remedy = f'Write {name} = "category", "linear", "cut(…)" or "spline(4)" in [analysis.forms].'
                yield subject.finding(message, remedy, "analysis", "forms")


@rule(
    "model-choice",
    "error",
    finds="A model, a way to adjust or a variance that cannot give the planned measure.",
    matters="The fit would have to choose another in silence, or to print a number that is not what the plan says.",
    mend="Choose one of those that the message names, or another measure.",
)
def choice(subject: Subject) -> Iterator[Finding]:
    yield from _of(subject, "model-choice")


@rule(
    "model-needs",
    "error",
    finds="An analysis that lacks a column or a setting it cannot do without: time at risk for a rate, the time of"
    " follow-up for a hazard, the matched sets, a seed.",
    matters="The planned analysis cannot be run as it stands.",
    mend="Name the column in [analysis], or add the table that the message names.",
)
def needs(subject: Subject) -> Iterator[Finding]:
    yield from _of(subject, "model-needs")


@rule(
    "model-unused",
    "warning",
    finds="Something stated in [analysis] that the planned analysis does not use.",
    matters="A reader takes it for part of the analysis; often another measure or model was meant.",
    mend="Take it out, or choose the analysis to which it belongs.",
)
def unused(subject: Subject) -> Iterator[Finding]:
    yield from _of(subject, "model-unused")


def _of(subject: Subject, code: str) -> Iterator[Finding]:
    for fault in analysis_faults(subject.plan.file):
        if fault.code == code:
            yield subject.finding(fault.message, fault.remedy, *fault.key)
