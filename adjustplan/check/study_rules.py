"""Rules about the study's design: what it can estimate, how people are drawn for it, how well it measures."""

from __future__ import annotations

import re
from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding
from adjustplan.identify.paths import directed_path
from adjustplan.identify.showing import list_text, with_article
from adjustplan.study import ODDS_RATIO_MEANS
from adjustplan.study.consequences import sampling_fault

_KEYS_OF = {
    "timing": {"cohort"},
    "sampling": {"case-control"},
    "sampled": {"case-control"},
    "matched": {"case-control", "cohort"},
    "matching": {"case-control", "cohort"},
    "lost": {"cohort", "trial"},
    "adherence": {"trial"},
    "controls_per_case": {"case-control"},
}
_PEOPLE = re.compile(
    r"\b(individuals?|persons?|people|patients?|participants?|subjects?|men|women|children|adults|workers|staff)\b",
    re.I,
)


@rule(
    "study-design",
    "warning",
    finds="A plan that does not state its study design.",
    matters="The design decides which measures can be estimated, what is held fixed, and what order in time is known.",
    mend="Add [study] with design = “cohort”, “case-control”, “cross-sectional” or whichever it is.",
    source="STROBE item 4 (von Elm et al. 2007, PLoS Med 4:e296).",
)
def design(subject: Subject) -> Iterator[Finding]:
    if subject.design is None:
        yield subject.finding("The plan states no study design.", 'Add [study] with design = "…".')


@rule(
    "study-measure",
    "error",
    finds="A measure of effect that the design cannot estimate.",
    matters="Its number would not be what its name says: a risk ratio among sampled cases and controls is none.",
    mend="Choose a measure that the design can estimate, or another design.",
    source="Rothman, Greenland and Lash 2008, Modern Epidemiology, 3rd ed., chapters 6 to 8.",
)
def measure(subject: Subject) -> Iterator[Finding]:
    known, analysis = subject.design, subject.plan.file.analysis
    if known is None or analysis is None or analysis.measure in known.measures:
        return
    allowed = list_text(known.measures, "or")
    remedy = f"It can estimate: {allowed}." if allowed else f"No measure of effect can. {known.can_do}"
    design_name = with_article(f"{known.name} study").capitalize()
    message = f"{design_name} cannot estimate {with_article(analysis.measure)}: {known.refusal}."
    yield subject.finding(message, remedy, "analysis", "measure")


@rule(
    "study-setting",
    "warning",
    finds="A key of [study] that means nothing for the stated design.",
    matters="Either the key or the design is a slip, and something meant is not done.",
    mend="Take the key out, or mend the design.",
)
def setting(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    for key, designs in _KEYS_OF.items() if study else ():
        if getattr(study, key) and study is not None and study.design not in designs:
            message = f"“{key}” means nothing for {with_article(study.design)} study."
            yield subject.finding(message, f"It belongs to: {list_text(sorted(designs))}.", "study", key)


@rule(
    "study-sampling",
    "warning",
    finds="A case-control study that does not say how its controls are drawn.",
    matters="By the sampling, the same odds ratio estimates a rate ratio, a risk ratio or an odds ratio.",
    mend="State sampling = “cumulative”, “incidence-density” or “case-cohort” in [study].",
    source="Miettinen 1976, Am J Epidemiol 103:226; Pearce 1993, Int J Epidemiol 22:1189.",
)
def sampling(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and study.design == "case-control" and study.sampling is None:
        remedy = 'State sampling = "cumulative", "incidence-density" or "case-cohort".'
        yield subject.finding("The plan does not say how controls are drawn.", remedy, "study", "design")


@rule(
    "study-meaning",
    "note",
    finds="What the odds ratio of a case-control study estimates under its sampling.",
    matters="A reader who takes every odds ratio for a risk ratio overstates common outcomes.",
    mend="Say it where the estimate stands; the document does.",
    source="Pearce 1993, Int J Epidemiol 22:1189.",
)
def meaning(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and study.design == "case-control" and study.sampling:
        message = f"With {study.sampling} sampling the odds ratio estimates {ODDS_RATIO_MEANS[study.sampling]}."
        yield subject.finding(message, "Say so where the estimate stands.", "study", "sampling")


@rule(
    "study-sampling-linked",
    "error",
    finds="A case-control study whose exposure and sampling are linked even given the outcome and the planned set.",
    matters="Then the odds ratio among the sampled is not that of the population, whatever the regression.",
    mend="Adjust for a variable on the path it names, or change how controls are drawn.",
    source="Didelez, Kreiner and Keiding 2010, Stat Sci 25:368.",
)
def sampling_linked(subject: Subject) -> Iterator[Finding]:
    plan = subject.plan
    if fault := sampling_fault(plan.graph, subject.exposure, subject.outcome, subject.members, plan.study):
        remedy = "Adjust for a variable on that path, or draw controls in another way."
        yield subject.finding(fault, remedy, "adjustment", "set")


@rule(
    "study-matching",
    "error",
    finds="A matching variable of a case-control study that is not in the planned set.",
    matters="Matching makes controls resemble cases in the exposure too; unless the model or the strata hold the"
    " matching variable, the odds ratio is drawn towards 1.",
    mend="Put the matching variable into the set.",
    source="Pearce 2016, BMJ 352:i969.",
)
def matching(subject: Subject) -> Iterator[Finding]:
    study = subject.plan.study
    if study and study.design == "case-control":
        for name in study.matched:
            if name not in subject.members:
                message = f"Cases and controls are matched for “{name}”, which is not in the set."
                yield subject.finding(message, f"Add “{name}” to the set.", "adjustment", "set")


@rule(
    "study-ecological-wording",
    "warning",
    finds="An ecological plan that speaks of people where it knows groups.",
    matters="What holds between groups need not hold between their people (the ecological fallacy).",
    mend="Write of districts, years or whatever the groups are.",
    source="Robinson 1950, Am Sociol Rev 15:351.",
)
def ecological_wording(subject: Subject) -> Iterator[Finding]:
    if subject.design is None or subject.design.unit != "group":
        return
    file = subject.plan.file
    texts: list[tuple[tuple[str, ...], str]] = [
        (("title",), file.title),
        (("question", "population"), file.question.population),
    ]
    if file.question.contrast:
        told = f"{file.question.contrast.exposed} {file.question.contrast.reference}"
        texts.append((("question", "contrast"), told))
    if file.adjustment:
        texts.append((("adjustment", "rationale"), file.adjustment.rationale))
    for key, words in texts:
        if found := _PEOPLE.search(words):
            message = f"“{found[0]}” in {'.'.join(key)} speaks of people, but the unit of the study is the group."
            yield subject.finding(message, "Write of the groups.", *key)


@rule(
    "study-misclassification",
    "warning",
    finds="A proxy whose error depends on exposure or outcome: an arrow leads from one into the other's proxy.",
    matters="Such differential misclassification (recall of the exposure by cases, say) biases in either direction.",
    mend="Measure it before the outcome is known, or blind whoever records it; else plan a bias analysis.",
    source="Rothman, Greenland and Lash 2008, Modern Epidemiology, 3rd ed., chapter 9.",
)
def misclassification(subject: Subject) -> Iterator[Finding]:
    graph = subject.plan.graph
    outcome, exposure = graph.number(subject.outcome), graph.number(subject.exposure)
    for variable in graph.variables:
        true = variable.proxy_of
        if not true:
            continue
        culprits = [(outcome, "the outcome")] if true != subject.outcome else []
        culprits += [(exposure, "the exposure")] if true == subject.outcome else []
        for place, words in culprits:
            path = directed_path(graph, place, graph.number(variable.name), avoid={graph.number(true)} - {place})
            if path:
                message = f"“{variable.name}”, a proxy of “{true}”, is affected by {words} ({path})."
                yield subject.in_graph(message, "Record it before, or blind to it; else plan a bias analysis.")
