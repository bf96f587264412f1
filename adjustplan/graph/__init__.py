"""The causal graph: its model and the files it is read from and written to."""

from adjustplan.graph.edgelist import format_edge_list, parse_edge_list
from adjustplan.graph.elements import Arrow, Variable
from adjustplan.graph.files import read_graph, write_graph
from adjustplan.graph.model import CausalGraph

__all__ = [
    "Arrow",
    "CausalGraph",
    "Variable",
    "format_edge_list",
    "parse_edge_list",
    "read_graph",
    "write_graph",
]
