"""GraphML, read and written by networkx: variables are nodes, arrows are edges, the rest are their attributes."""

from __future__ import annotations

from typing import Any

from adjustplan.errors import Finding, GraphError
from adjustplan.graph.attributes import assemble
from adjustplan.graph.elements import Arrow
from adjustplan.graph.model import CausalGraph


def parse_graphml(text: str, file: str | None = None) -> CausalGraph:
    """The graph a GraphML text describes. Attributes that mean nothing here are named in a warning."""
    import networkx as nx

    try:
        graph: Any = nx.parse_graphml(text)
    except Exception as error:  # networkx and the XML parser raise many kinds for broken input
        message = f"Not a GraphML file: {str(error) or type(error).__name__}."
        raise GraphError(Finding("graph-syntax", message, "Write it anew as GraphML.", file=file)) from None
    if not graph.is_directed():
        message = "The graph is undirected."
        remedy = "A causal graph has arrows: set edgedefault to directed."
        raise GraphError(Finding("graph-undirected", message, remedy, file=file))
    ignored: set[str] = set()
    arrows = []
    for cause, effect, data in graph.edges(data=True):
        arrows.append(Arrow(str(cause), str(effect), str(data.get("reason", ""))))
        ignored |= set(data) - {"reason", "id"}
    return assemble(((str(node), data) for node, data in graph.nodes(data=True)), arrows, ignored, file)


def format_graphml(graph: CausalGraph) -> str:
    """The graph as GraphML."""
    import networkx as nx

    return "\n".join(nx.generate_graphml(graph.to_networkx(), named_key_ids=True)) + "\n"
