"""DOT, read and written through pydot: variables are nodes, arrows are edges, the rest are their attributes.

Node attributes ``label``, ``unmeasured``, ``restricted``, ``wave`` and ``cost`` and the edge attribute ``reason`` carry
what the edge list says. A file drawn for looks has others (shapes, colours); they are named in a warning.
"""

from __future__ import annotations

import contextlib
import io
import re
from collections.abc import Iterator, Mapping
from itertools import product
from typing import Any

from adjustplan.errors import Finding, GraphError
from adjustplan.graph.attributes import assemble
from adjustplan.graph.elements import Arrow, attributes
from adjustplan.graph.model import CausalGraph

_DEFAULTS = ("node", "edge", "graph")
_ESCAPE = re.compile(r"\\(.)", re.DOTALL)
_LINE_BREAKS = {"n": "\n", "l": "\n", "r": "\n"}


def parse_dot(text: str, file: str | None = None) -> CausalGraph:
    """The graph a DOT text describes, subgraphs flattened. What means nothing here is named in a warning."""
    root = _digraph(text, file)
    described: dict[str, dict[str, str]] = {}
    arrows: dict[tuple[str, str], Arrow] = {}
    doubled: list[Arrow] = []
    ignored: set[str] = set()
    for part in _parts(root):
        for node in part.get_nodes():
            if node.get_name() in _DEFAULTS:
                ignored |= {f"{node.get_name()} [{key}]" for key in node.get_attributes()}
                continue
            described.setdefault(_name(node.get_name()), {}).update(_attributes(node.get_attributes()))
        for edge in part.get_edges():
            told = _attributes(edge.get_attributes())
            ignored |= set(told) - {"reason"}
            for cause, effect in product(_ends(edge.get_source()), _ends(edge.get_destination())):
                arrow = Arrow(cause, effect, told.get("reason", ""))
                described.setdefault(cause, {})
                described.setdefault(effect, {})
                if (cause, effect) in arrows and not root.get_strict():
                    doubled.append(arrow)
                arrows.setdefault((cause, effect), arrow)
    return assemble(described.items(), [*arrows.values(), *doubled], ignored, file)


def format_dot(graph: CausalGraph) -> str:
    """The graph as DOT, with everything that is said of it; for a picture see ``adjustplan.graph.drawing``."""
    import pydot

    dot = pydot.Dot("causal_graph", graph_type="digraph")
    told: dict[str, Any]
    for variable in graph.variables:
        told = {key: quoted(_text(value)) for key, value in attributes(variable).items()}
        dot.add_node(pydot.Node(quoted(variable.name), **told))
    for arrow in graph.arrows:
        told = {"reason": quoted(arrow.reason)} if arrow.reason else {}
        dot.add_edge(pydot.Edge(quoted(arrow.cause), quoted(arrow.effect), **told))
    return str(dot.to_string())


def quoted(text: str) -> str:
    """``text`` as a quoted DOT identifier."""
    escaped = text.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n")
    return f'"{escaped}"'


def _digraph(text: str, file: str | None) -> Any:
    import pydot

    said = io.StringIO()
    with contextlib.redirect_stdout(said), contextlib.redirect_stderr(said):
        graphs = pydot.graph_from_dot_data(text)
    if not graphs:
        place = re.search(r"\(line:(\d+), col:(\d+)\)", said.getvalue())
        line, column = (int(place[1]), int(place[2])) if place else (None, None)
        why = said.getvalue().strip().splitlines()
        message = f"Not DOT: {why[-1].split('  (at')[0]}." if why else "Not DOT."
        remedy = "Write it as digraph { cause -> effect }."
        raise GraphError(Finding("graph-syntax", message, remedy, file=file, line=line, column=column))
    if len(graphs) > 1:
        raise GraphError(Finding("graph-syntax", "The file holds several graphs.", "Keep one.", file=file))
    if graphs[0].get_type() != "digraph":
        message = "The graph is undirected."
        raise GraphError(Finding("graph-undirected", message, "Write digraph and “->”.", file=file))
    return graphs[0]


def _parts(graph: Any) -> Iterator[Any]:
    """The graph and everything nested in it, those that stand as the end of an edge included."""
    import pydot

    yield graph
    for subgraph in graph.get_subgraphs():
        yield from _parts(subgraph)
    for edge in graph.get_edges():
        for end in (edge.get_source(), edge.get_destination()):
            if isinstance(end, Mapping):
                yield from _parts(pydot.Subgraph(obj_dict=dict(end)))


def _ends(end: Any) -> list[str]:
    """The variables at one end of an edge: one, or all those of a subgraph."""
    import pydot

    if not isinstance(end, Mapping):
        return [_name(end)]
    names = []
    for part in _parts(pydot.Subgraph(obj_dict=dict(end))):
        names += [_name(node.get_name()) for node in part.get_nodes() if node.get_name() not in _DEFAULTS]
        names += [name for edge in part.get_edges() for side in (edge.get_source(), edge.get_destination())
                  if not isinstance(side, Mapping) for name in _ends(side)]  # fmt: skip
    return list(dict.fromkeys(names))


def _name(identifier: str) -> str:
    """A node's name without quotes and without the port that an edge may be fixed to."""
    text = str(identifier)
    match = re.match(r'"(?:[^"\\]|\\.)*"|[^:]*', text, re.DOTALL)
    return _unquoted(match[0] if match else text)


def _attributes(told: Mapping[str, Any]) -> dict[str, str]:
    return {key: _unquoted(str(value)) for key, value in told.items()}


def _unquoted(text: str) -> str:
    if len(text) < 2 or not (text[0] == text[-1] == '"'):
        return text
    return _ESCAPE.sub(lambda match: _LINE_BREAKS.get(match[1], match[1]), text[1:-1])


def _text(value: str | bool | int | float) -> str:
    return str(value).lower() if isinstance(value, bool) else str(value)
