"""The picture of a graph for a question: which boxes are what, and which arrows carry the effect."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass
from pathlib import Path

from adjustplan.errors import Finding, OutputError
from adjustplan.files import refuse_existing, write_whole
from adjustplan.graph import CausalGraph
from adjustplan.graph.drawing import BLUE, VERMILION, Look, drawn_as_dot, render
from adjustplan.identify import Roles, VariableRole
from adjustplan.identify.query import query


@dataclass(frozen=True, slots=True)
class Picture:
    """A picture, as the DOT that a layout program turns into one."""

    dot: str

    def svg(self) -> bytes:
        """The picture as SVG."""
        return render(self.dot, "svg")

    def save(self, path: Path, *, force: bool = False) -> None:
        """Write ``.svg``, ``.png`` or ``.dot``; OutputError for other endings, or where the file exists."""
        refuse_existing(path, force=force)
        match path.suffix.lower():
            case ".svg":
                content: bytes | str = self.svg()
            case ".png":
                content = render(self.dot, "png")
            case ".dot" | ".gv":
                content = self.dot
            case ending:
                message = f"A picture cannot be written as “{ending or path.name}”."
                remedy = "End the file's name in .svg, .png or .dot."
                raise OutputError(Finding("output-unknown-format", message, remedy, file=str(path)))
        write_whole(path, content, force=force)


def draw_picture(graph: CausalGraph, roles: Roles | None = None, adjust: Collection[str] = ()) -> Picture:
    """The picture of the graph alone, or with the roles towards a question and a set that is adjusted for."""
    if roles is None:
        words = {v.name: "unmeasured" for v in graph.variables if v.unmeasured}
        words |= {v.name: "restricted" for v in graph.variables if v.restricted}
        return Picture(drawn_as_dot(graph, Look(words=words)))
    asked = query(graph, roles.exposure, roles.outcome, roles.effect)
    asked.set_of(adjust)  # an unknown variable, or exposure or outcome, cannot be adjusted for
    between = asked.names(asked.on_causal_paths)
    causal = {
        (arrow.cause, arrow.effect)
        for arrow in graph.arrows
        if arrow.effect in between and (arrow.cause in between or arrow.cause == roles.exposure)
    }
    look = Look(
        ends={roles.exposure: BLUE, roles.outcome: VERMILION},
        words={role.name: box_words(role, adjusted=role.name in adjust) for role in roles.variables},
        conditioned=adjust,
        causal=causal,
    )
    return Picture(drawn_as_dot(graph, look))


def box_words(role: VariableRole, *, adjusted: bool = False) -> str:
    """What stands under a variable's name: its telling roles, and what is done about it, each on a line."""
    told = list(role.roles)
    if "confounder" in told and "common cause" in told:
        told.remove("common cause")
    affected = [word for word in told if word.startswith("affected by")]
    told = [word for word in told if word not in affected[:-1]]  # the last is the most telling
    state = [word for word, said in (("adjusted for", adjusted), ("restricted", role.restricted)) if said]
    state += ["unmeasured"] * role.unmeasured
    return "\n".join(filter(None, [" · ".join(told), " · ".join(state)]))


def spoken(graph: CausalGraph, roles: Roles, adjust: Collection[str] = ()) -> str:
    """The picture in words, for those who cannot see it."""
    count = f"{len(graph.variables)} variables and {len(graph.arrows)} arrows"
    direct = "an arrow" if graph.arrow(roles.exposure, roles.outcome) else "no arrow"
    parts = [f"Causal graph of {count}; {direct} leads from {roles.exposure} to {roles.outcome}."]
    for role in ("confounder", "mediator", "collider", "instrument"):
        if names := [variable.name for variable in roles.variables if role in variable.roles]:
            parts.append(f"{role.capitalize()}{'s' * (len(names) > 1)}: {', '.join(names)}.")
    if unmeasured := [variable.name for variable in roles.variables if variable.unmeasured]:
        parts.append(f"Unmeasured: {', '.join(unmeasured)}.")
    if adjust:
        parts.append(f"Adjusted for: {', '.join(sorted(adjust))}.")
    return " ".join(parts)
