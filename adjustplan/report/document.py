"""The document that defends an adjustment: from a plan to Markdown, with the picture beside it.

Its sections come in the order in which a reader asks: what is the question, what is thought to cause what, what does
that imply, what was chosen and why, what came out, and what it does not show.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from adjustplan import __version__
from adjustplan.files import refuse_existing, write_whole
from adjustplan.identify import Roles, SetList, Verdict, judge, list_sets, roles
from adjustplan.plan import Plan
from adjustplan.report.design import design_section
from adjustplan.report.estimates import estimate_section
from adjustplan.report.fragility import fragility_section
from adjustplan.report.history import revision_section, waiver_section
from adjustplan.report.markdown import code, codes, paths, prose, table, text
from adjustplan.report.picture import Picture, draw_picture, spoken
from adjustplan.report.recommendations import recommendations_section
from adjustplan.study import DESIGNS

if TYPE_CHECKING:
    from adjustplan.estimate import Fit
    from adjustplan.estimate.stress import Fragility

MOST_SETS = 50
CAUTIONS = (
    "An adjusted estimate is the effect of the exposure only if the graph is right: if no arrow is missing or points"
    " the wrong way, and nothing unmeasured confounds. No data can prove that.",
    "Measurement error, missing data, selection into the study and the form of the regression can each mislead, however"
    " well the covariates are chosen.",
    "This document is no clinical advice. It replaces neither approval by an ethics committee, nor local rules, nor the"
    " judgement of a qualified statistician and, where people are treated, of a licensed physician.",
)


@dataclass(frozen=True)
class Material:
    """Everything the document says, worked out before a word of it is written."""

    plan: Plan
    roles: Roles
    sets: SetList
    verdicts: tuple[Verdict, ...]
    picture: Picture
    fit: Fit | None
    fragility: Fragility | None = None

    @property
    def chosen(self) -> tuple[str, ...]:
        """The planned set; empty where none is chosen yet."""
        return tuple(self.plan.file.adjustment.members) if self.plan.file.adjustment else ()


def write_document(plan: Plan, folder: str | Path, *, limit: int = 20, force: bool = False) -> tuple[Path, ...]:
    """Write the document of a plan into a folder: ``NAME.md`` and ``NAME-graph.svg``, after the plan's own name.

    The planned analysis is run when the plan names data. The same inputs give the same bytes.

    Parameters
    ----------
    plan : Plan
    folder : str or Path
        Made where it does not exist.
    limit : int
        Fit at most this many minimal sufficient sets.
    force : bool
        Replace files that exist already.

    Returns
    -------
    tuple of Path
        The files written, the document first.

    Raises
    ------
    OutputError
        If a file exists already; nothing is written then.
    DataError, PlanError
        If the planned analysis cannot be run.
    """
    document = Path(folder) / f"{plan.path.stem}.md"
    image = Path(folder) / f"{plan.path.stem}-graph.svg"
    for path in (document, image):
        refuse_existing(path, force=force)
    material = gather(plan, limit=limit)
    svg = material.picture.svg()
    write_whole(image, svg, force=force)
    write_whole(document, compose(material, image.name), force=force)
    return document, image


def gather(plan: Plan, *, limit: int = 20) -> Material:
    """Work out what the document says."""
    question, adjustment = plan.question, plan.file.adjustment
    asked = (plan.judged_graph, question.exposure, question.outcome)
    found = roles(*asked, question.effect)
    proposals = [adjustment, *adjustment.alternative] if adjustment else []
    verdicts = tuple(judge(*asked, proposal.members, question.effect) for proposal in proposals)
    chosen = adjustment.members if adjustment else []
    fitted = fragile = None
    if adjustment and plan.file.analysis and plan.file.analysis.data:
        from adjustplan.estimate.fitting import analyse, fit_of
        from adjustplan.estimate.stress.running import stress_analysed

        done = analyse(plan, limit, fingerprinted=True)
        fitted = fit_of(done)
        fragile = stress_analysed(done) if fitted.adjusted[0].estimate is not None else None
    sets = list_sets(*asked, question.effect, limit=MOST_SETS)
    return Material(plan, found, sets, verdicts, draw_picture(plan.graph, found, chosen), fitted, fragile)


def compose(material: Material, image: str) -> str:
    """The document as Markdown; ``image`` is how it refers to the picture."""
    sections = [
        f"# {text(material.plan.title)}",
        *_question(material),
        *design_section(material.plan),
        *_graph(material, image),
        *_variables(material),
        *_sets(material),
        *_choice(material),
        *estimate_section(material.plan, material.fit),
        *fragility_section(material.fragility),
        *waiver_section(material.plan),
        *revision_section(material.plan),
        *recommendations_section(material.plan),
        "## Cautions",
        "\n".join(f"- {caution}" for caution in CAUTIONS),
        f"Made by adjustplan {__version__} from {code(material.plan.path.name)} and {code(material.plan.file.graph)}.",
    ]
    return "\n\n".join(sections) + "\n"


def _question(material: Material) -> Iterator[str]:
    plan, graph = material.plan, material.plan.graph
    question = plan.question
    exposure, outcome = graph[question.exposure].title, graph[question.outcome].title
    yield "## The question"
    if question.effect == "total":
        yield f"What is the total effect of {text(exposure)} on {text(outcome)}, through whatever path?"
    else:
        yield f"What is the direct effect of {text(exposure)} on {text(outcome)}, not through any mediator?"
    rows = [
        ("Exposure", f"{text(exposure)} ({code(question.exposure)})"),
        ("Outcome", f"{text(outcome)} ({code(question.outcome)})"),
    ]
    if question.contrast:
        exposed, reference = str(question.contrast.exposed), str(question.contrast.reference)
        rows.append(("Contrast", f"{text(exposed)}, compared with {text(reference)}"))
    rows.append(("Population", text(question.population) or "not stated"))
    if plan.study:
        design = DESIGNS[plan.study.design]
        rows.append(("Design", f"{text(design.name.capitalize())}. {text(design.meaning)}"))
    if plan.file.analysis:
        rows.append(("Measure", text(plan.file.analysis.measure.capitalize())))
    yield table(("", ""), [(f"**{head}**", cell) for head, cell in rows])


def _graph(material: Material, image: str) -> Iterator[str]:
    plan = material.plan
    yield "## What is thought to cause what"
    yield f"![{text(spoken(plan.graph, material.roles, material.chosen))}]({image})"
    yield (
        "A doubled box is the exposure or the outcome, a dashed box is unmeasured, a square box is conditioned on."
        " Heavy arrows carry the effect."
    )
    yield "Every arrow is an assumption, and so is every arrow that is not there."
    rows = [
        (code(arrow.cause), code(arrow.effect), text(arrow.reason) or "*no reason given*")
        for arrow in plan.graph.arrows
    ]
    yield table(("Cause", "Effect", "Reason for the arrow"), rows)


def _variables(material: Material) -> Iterator[str]:
    yield "## The part each variable plays"
    rows = [
        (
            text(role.title) + (f" ({code(role.name)})" if role.title != role.name else ""),
            text(", ".join(role.role_words)),
            f"**{role.advice}**" if role.advice else "–",
            paths(role.reason),
        )
        for role in material.roles.variables
    ]
    yield table(("Variable", "Roles", "Adjust?", "Why"), rows)
    if not material.roles.complete:
        yield "There are too many minimal sufficient sets to look at all of them; a variable may have further roles."


def _sets(material: Material) -> Iterator[str]:
    found = material.sets
    yield "## Sufficient sets"
    if not found.sets:
        yield f"**No set of measured variables is sufficient.** {paths(found.note)}"
        return
    yield (
        "By the back-door criterion, each of these sets blocks every open path that would confound the effect, and no"
        " member of it can be left out."
    )
    yield "\n".join(f"{number}. {codes(members)}" for number, members in enumerate(found.sets, start=1))
    if not found.complete:
        yield f"These are the first {len(found.sets)}; there are more."
    if found.restricted:
        yield f"How people came into the data holds fixed besides: {codes(found.restricted)}."


def _choice(material: Material) -> Iterator[str]:
    adjustment = material.plan.file.adjustment
    yield "## The chosen set and why"
    if adjustment is None:
        yield "No set is chosen yet."
        return
    chosen, *others = material.verdicts
    yield f"The plan adjusts for {codes(chosen.adjust)}."
    yield prose(adjustment.rationale) or "*No rationale is given.*"
    yield from _verdict(chosen)
    if others:
        yield "### Alternatives"
    for alternative, verdict in zip(adjustment.alternative, others, strict=True):
        yield f"{codes(verdict.adjust)}. {prose(alternative.rationale) or '*No rationale is given.*'}"
        yield from _verdict(verdict)


def _verdict(verdict: Verdict) -> Iterator[str]:
    if verdict.sufficient:
        yield "By the graph, the set is **sufficient**."
    else:
        yield "By the graph, the set is **not sufficient**."
    said = [f"- {code(name)}: {paths(reason)}" for name, reason in verdict.reasons.items()]
    said += [f"- Open: {paths(path.text)}. {paths(path.reason)}" for path in verdict.open_paths]
    if not verdict.complete:
        said.append("- There are more open paths than these.")
    if said:
        yield "\n".join(said)
