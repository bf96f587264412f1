"""The document's section on the design: what it can show, what it holds fixed, and what it leaves unproven."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.identify.showing import list_text
from adjustplan.plan import Plan
from adjustplan.report.markdown import code, paths, text
from adjustplan.study import DESIGNS, ODDS_RATIO_MEANS
from adjustplan.study.consequences import sampling_fault, unproven_arrows


def design_section(plan: Plan) -> Iterator[str]:
    """The section, as paragraphs of Markdown; nothing where the plan states no design."""
    if plan.study is None:
        return
    design = DESIGNS[plan.study.design]
    yield "## What the design can and cannot show"
    yield f"{text(design.meaning)} {text(design.can_do)}"
    can = f"It can estimate: {text(list_text(design.measures))}." if design.measures else "It can estimate no effect:"
    yield f"{can} {text(_cannot(design.refusal, some=bool(design.measures)))}"
    yield "\n".join(
        (
            f"- Order in time. {text(design.time_order)}",
            f"- Held fixed. {text(design.holds_fixed)}",
            f"- Threats. {text(list_text(design.threats).capitalize())}.",
        )
    )
    yield from _particulars(plan)


def _cannot(refusal: str, *, some: bool) -> str:
    return f"It cannot estimate others: {refusal}." if some else f"{refusal}."


def _particulars(plan: Plan) -> Iterator[str]:
    study = plan.study
    assert study is not None  # the section is empty otherwise
    if study.design == "case-control":
        members = plan.file.adjustment.members if plan.file.adjustment else []
        fault = sampling_fault(plan.graph, plan.question.exposure, plan.question.outcome, members, study)
        if study.sampling:
            yield f"With {study.sampling} sampling, the odds ratio estimates {text(ODDS_RATIO_MEANS[study.sampling])}."
        separated = "Given the outcome and the chosen set, exposure and sampling are separated by the graph"
        yield paths(fault or f"{separated}, so sampling leaves the odds ratio what it is.")
        if study.matched:
            yield f"Matched for: {', '.join(map(code, study.matched))}."
    if study.design == "cross-sectional":
        arrows = [paths(str(arrow)) for arrow in unproven_arrows(plan.graph)]
        if arrows:
            yield f"No wave shows the direction of {list_text(arrows)}; it could be the reverse."
    if study.lost:
        yield f"Still being followed ({code(study.lost)}) is held fixed; whether that opens a path is judged below."


def estimate_prefix(plan: Plan) -> str:
    """What stands before every estimate of a design whose unit is not the person."""
    unit = DESIGNS[plan.study.design].unit if plan.study else "person"
    return "Between groups, not people: " if unit == "group" else ""
