"""Drawing a causal graph: as DOT that a layout program turns into a picture.

A rounded box is a variable, a dashed one is unmeasured, a square one is conditioned on, a doubled one is exposure or
outcome. Heavy dark arrows are on causal paths, thin grey ones are not. Every box says in words what it is, so nothing
is told by colour or line alone. Time runs from left to right; variables of one wave share a column.

What a variable is called in its box, and which arrows are causal, the caller says: it follows from a question, and the
graph knows of none.
"""

from __future__ import annotations

import shutil
import sysconfig
import textwrap
from collections.abc import Collection, Mapping
from dataclasses import dataclass, field
from html import escape
from itertools import pairwise
from pathlib import Path
from typing import Any, Literal

from adjustplan.errors import Finding, OutputError
from adjustplan.graph.dot import quoted
from adjustplan.graph.elements import Variable
from adjustplan.graph.model import CausalGraph

PictureFormat = Literal["svg", "png"]

FONT = "Helvetica"
LABEL_WIDTH = 22
"""Characters after which a label goes on in a new line."""

# The palette of Okabe and Ito (2008, Color Universal Design), and greys that keep it company in print.
BLUE, VERMILION, GREEN = "#0072B2", "#D55E00", "#009E73"
INK, GREY = "#1a1a1a", "#7a7a7a"


@dataclass(frozen=True)
class Look:
    """How a question makes a graph look.

    Attributes
    ----------
    ends : mapping of str to str
        Exposure and outcome, each with the colour of its border.
    words : mapping of str to str
        What stands under a variable's name.
    conditioned : collection of str
        Variables in a square frame.
    causal : collection of (str, str)
        Arrows on causal paths, by cause and effect.
    """

    ends: Mapping[str, str] = field(default_factory=dict)
    words: Mapping[str, str] = field(default_factory=dict)
    conditioned: Collection[str] = ()
    causal: Collection[tuple[str, str]] = ()


def drawn_as_dot(graph: CausalGraph, look: Look) -> str:
    """The picture as DOT."""
    import pydot

    dot = pydot.Dot("causal_graph", graph_type="digraph", rankdir="LR", nodesep="0.35", ranksep="0.6", pad="0.2")
    dot.set_node_defaults(fontname=FONT, fontsize="12", fontcolor=quoted(INK), margin=quoted("0.14,0.09"))
    for variable in graph.variables:
        dot.add_node(pydot.Node(quoted(variable.name), **_box(variable, look)))
    for arrow in graph.arrows:
        heavy = (arrow.cause, arrow.effect) in look.causal
        style: dict[str, Any] = (
            {"penwidth": "2.2", "color": quoted(INK)} if heavy else {"penwidth": "0.9", "color": quoted(GREY)}
        )
        dot.add_edge(pydot.Edge(quoted(arrow.cause), quoted(arrow.effect), arrowsize="0.8", **style))
    _add_columns(dot, graph)
    return str(dot.to_string())


def render(dot: str, form: PictureFormat) -> bytes:
    """The picture that DOT describes, as SVG or PNG, laid out by the program in the ``graphviz-pure`` wheel.

    Raises
    ------
    OutputError
        If the program is not installed or fails.
    """
    import pydot

    scripts = Path(sysconfig.get_path("scripts"))
    program = shutil.which("graphviz-pure", path=str(scripts)) or shutil.which("graphviz-pure")
    if program is None:
        remedy = "Install it: pip install graphviz-pure."
        raise OutputError(Finding("output-no-layout", "The program graphviz-pure is not installed.", remedy))
    parsed: Any = pydot.graph_from_dot_data(dot)
    try:
        arguments = [program, "-Gdpi=144"] if form == "png" else [program]
        return bytes(parsed[0].create(prog=arguments, format=form))
    except (AssertionError, OSError) as error:
        message = f"The picture could not be laid out: {error}."
        raise OutputError(Finding("output-no-layout", message, "Write DOT instead and lay it out elsewhere.")) from None


def _box(variable: Variable, look: Look) -> dict[str, Any]:
    name = variable.name
    conditioned = name in look.conditioned or variable.restricted
    styles = ["filled"] + ["rounded"] * (not conditioned) + ["dashed"] * variable.unmeasured
    box = {
        "label": _label(variable.title, look.words.get(name, "")),
        "shape": "box",
        "style": quoted(",".join(styles)),
        "fillcolor": quoted("#ffffff"),
        "color": quoted(GREEN if conditioned else INK),
        "penwidth": "2" if conditioned else "1",
    }
    if name in look.ends:
        box |= {"peripheries": "2", "penwidth": "2", "color": quoted(look.ends[name])}
    return box


def _label(title: str, words: str) -> str:
    lines = textwrap.wrap(title, LABEL_WIDTH, break_long_words=True) or [title]
    shown = "<BR/>".join(escape(line) for line in lines)
    if not words:
        return f"<{shown}>"
    under = "<BR/>".join(escape(line.upper()) for line in words.split("\n"))
    return f'<{shown}<BR/><FONT POINT-SIZE="8.5">{under}</FONT>>'


def _add_columns(dot: Any, graph: CausalGraph) -> None:
    """One column a wave, under a heading, kept in order by arrows that are not drawn."""
    import pydot

    waves = sorted({variable.wave for variable in graph.variables if variable.wave is not None})
    headings = [quoted(f"wave {wave}") for wave in waves]
    for wave, heading in zip(waves, headings, strict=True):
        column = pydot.Subgraph(rank="same")
        look: dict[str, Any] = {"shape": "plaintext", "fontsize": "9", "fontcolor": quoted(GREY)}
        column.add_node(pydot.Node(heading, **look))
        for variable in graph.variables:
            if variable.wave == wave:
                column.add_node(pydot.Node(quoted(variable.name)))
        dot.add_subgraph(column)
    for earlier, later in pairwise(headings):
        dot.add_edge(pydot.Edge(earlier, later, style="invis"))
