"""The first two files of a study: a commented causal graph and a plan, ready for ``check``.

A blank page is the hardest part of a plan. What is known at the start (title, exposure, outcome, design, and the common
causes one can think of at once) is enough for a graph in which those causes confound, and for a plan that adjusts for
them. Nothing is made up: each arrow's reason and the rationale say that they were named when the study was started, and
comments ask the team for reasons of its own.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from adjustplan.errors import Finding, OutputError, PlanError, did_you_mean
from adjustplan.files import write_whole
from adjustplan.graph.words import written_name
from adjustplan.plan.toml_text import collapsed, quoted, refuse_undecodable
from adjustplan.study import DESIGNS, MEASURES
from adjustplan.study.designs import Design

GRAPH_NAME = "graph.edges"
PLAN_NAME = "plan.toml"


@dataclass(frozen=True, slots=True)
class NewStudy:
    """What is known of a study when it is started.

    Attributes
    ----------
    title, exposure, outcome, design : str
    measure : str
        The measure of effect; empty: not decided yet.
    covariates : tuple of str
        Common causes of exposure and outcome; in a trial, causes of the outcome.
    """

    title: str
    exposure: str
    outcome: str
    design: str
    measure: str = ""
    covariates: tuple[str, ...] = ()


def start(folder: str | Path, study: NewStudy) -> tuple[Path, Path]:
    """Write the graph and the plan of a new study into a folder, which is made where it does not exist.

    Returns
    -------
    tuple of Path
        The graph and the plan.

    Raises
    ------
    PlanError
        If what is known does not fit together; everything found is among its findings.
    OutputError
        If one of the files exists already, or cannot be written; nothing is written then.
    """
    graph, plan = Path(folder) / GRAPH_NAME, Path(folder) / PLAN_NAME
    refuse_started(folder)
    if found := list(_faults(study)):
        raise PlanError(found)
    write_whole(graph, graph_text(study))
    try:
        write_whole(plan, plan_text(study))
    except BaseException:
        graph.unlink()  # it was written just above
        raise
    return graph, plan


def refuse_started(folder: str | Path) -> None:
    """OutputError where the folder holds a study already, or is none."""
    if Path(folder).exists() and not Path(folder).is_dir():
        raise OutputError(Finding("start-no-folder", "This is a file.", "Name a folder.", file=str(folder)))
    for path in (Path(folder) / GRAPH_NAME, Path(folder) / PLAN_NAME):
        if path.exists() or path.is_symlink():
            remedy = "Name another folder; what is there is kept."
            raise OutputError(Finding("start-exists", "The file exists already.", remedy, file=str(path)))


def graph_text(study: NewStudy) -> str:
    """The graph of a new study, as an edge list with comments."""
    exposure, outcome = written_name(study.exposure), written_name(study.outcome)
    lines = [
        "# What is thought to cause what. One arrow a line, cause -> effect, and behind the colon why it is believed.",
        "# Every arrow is an assumption, and so is every arrow that is not drawn.",
        "",
        f"{exposure} -> {outcome} : the effect that the study asks about",
    ]
    if study.covariates:
        lines += ["", "# Put the team's own reasons in place of these, a line for each arrow."]
    for covariate in map(written_name, study.covariates):
        if study.design == "trial":
            lines.append(f"{covariate} -> {outcome} : named as a cause of the outcome when the study was started")
        else:
            causes = f"{covariate} -> {exposure}, {outcome}"
            lines.append(f"{causes} : named as a cause of both when the study was started")
    lines += [
        "",
        "# Still to draw: what lies between exposure and outcome, what both of them affect, what decides who is in the",
        "# data, and what nobody measured. What can be said of a variable:",
        "#",
        "#     chronotype: unmeasured",
        "#     employed:   restricted                  (how people came into the data holds it fixed)",
        '#     age:        wave=0, "Age at baseline"   (when it is measured, and how documents call it)',
    ]
    return "\n".join(lines) + "\n"


def plan_text(study: NewStudy) -> str:
    """The plan of a new study, as TOML with comments."""
    members = ", ".join(map(quoted, study.covariates))
    design = DESIGNS[study.design]
    lines = [
        "# The plan of a study. Under version control it shows what was decided, when, and why.",
        "",
        f"title = {quoted(collapsed(study.title))}",
        f"graph = {quoted(GRAPH_NAME)}",
        "",
        "[question]",
        f"exposure = {quoted(study.exposure)}",
        f"outcome  = {quoted(study.outcome)}",
        'effect   = "total"   # or "direct": not through any mediator',
        '# population = "whom the answer is about, where, and from which day"',
        '# contrast   = { exposed = "…", reference = "…" }',
        "",
        "[study]",
        f"# {design.meaning}",
        f"design = {quoted(design.name)}",
        *_design_hints(study.design),
        "",
        "[adjustment]",
        "# “adjustplan sets plan.toml” lists the sets that the graph allows; put the team's own rationale here.",
        f"set       = [{members}]",
        f"rationale = {quoted(_rationale(study))}",
        "",
        *_analysis(study, design),
        "",
        "# Then: adjustplan check plan.toml, and once all agree, before the data are seen: adjustplan seal plan.toml",
    ]
    return "\n".join(lines) + "\n"


def _rationale(study: NewStudy) -> str:
    if not study.covariates:
        return "No covariate was named when the study was started."
    if study.design == "trial":
        return "Named as causes of the outcome when the study was started; in a trial they serve precision only."
    return "Named as common causes of exposure and outcome when the study was started."


def _design_hints(design: str) -> Iterator[str]:
    if design == "case-control":
        yield '# sampling = "cumulative"   # or "incidence-density", "case-cohort": how controls are drawn'
        yield '# matched  = ["…"]'
    if design in ("cohort", "trial"):
        yield '# lost = "…"   # the restricted variable that stands for still being followed'


def _analysis(study: NewStudy, design: Design) -> Iterator[str]:
    if not design.measures:
        yield "# No [analysis]: with nobody to compare with, no measure of effect can be estimated."
        return
    mark = "" if study.measure else "# "
    yield f"{mark}[analysis]"
    yield f"{mark}measure = {quoted(study.measure or design.measures[0])}   # or {', '.join(_others(study, design))}"
    yield '# data    = "data.csv"'
    yield "#"
    yield "# [analysis.forms]   # of each covariate in the model: category, linear or spline(4)"
    for covariate in study.covariates:
        yield f'# {quoted(covariate)} = "…"'


def _others(study: NewStudy, design: Design) -> list[str]:
    return [measure for measure in design.measures if measure != (study.measure or design.measures[0])]


def _faults(study: NewStudy) -> Iterator[Finding]:
    given = [("title", study.title), ("exposure", study.exposure), ("outcome", study.outcome)]
    given += [("covariate", name) for name in study.covariates]
    for what, words in given:
        refuse_undecodable(words, what, PlanError)
        if not words.strip():
            yield Finding("start-empty", f"The {what} is empty.", f"Give it with --{what}.")
    yield from _same_names([study.exposure, study.outcome, *study.covariates])
    design = DESIGNS.get(study.design)
    if design is None:
        remedy = did_you_mean(study.design, DESIGNS, f"Known are: {', '.join(DESIGNS)}.")
        yield Finding("start-design", f"There is no study design “{collapsed(study.design)}”.", remedy)
    elif study.measure and study.measure not in design.measures:
        allowed = f"It can estimate: {', '.join(design.measures)}." if design.measures else design.can_do
        if study.measure not in MEASURES:
            message, allowed = f"There is no measure “{study.measure}”.", did_you_mean(study.measure, MEASURES, allowed)
        else:
            message = f"A {design.name} study cannot estimate a {study.measure}: {design.refusal}."
        yield Finding("start-measure", message, allowed)


def _same_names(names: Sequence[str]) -> Iterator[Finding]:
    for name in dict.fromkeys(name for place, name in enumerate(names) if name in names[:place]):
        message = f"“{collapsed(name)}” is named twice."
        yield Finding("start-same-name", message, "Exposure, outcome and covariates are different variables.")
