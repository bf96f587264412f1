"""Which file holds a graph in which format, by the ending of its name.

The edge list carries everything. What another format cannot carry is said in a warning, never dropped in silence.
"""

from __future__ import annotations

import unicodedata
import warnings
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType

from adjustplan.errors import AdjustplanWarning, Finding, GraphError, did_you_mean
from adjustplan.files import read_text, write_whole
from adjustplan.graph import dot, edgelist, graphml, pairs
from adjustplan.graph.elements import attributes
from adjustplan.graph.model import CausalGraph


@dataclass(frozen=True, slots=True)
class Format:
    """A file format: how its text becomes a graph, how a graph becomes its text, and what it carries.

    ``parse`` takes the text and the file's name for findings; ``carries_all`` is False where only the arrows survive.
    """

    title: str
    parse: Callable[[str, str | None], CausalGraph]
    write: Callable[[CausalGraph], str]
    carries_all: bool = True


FORMATS: Mapping[str, Format] = MappingProxyType(
    {
        ".edges": Format("edge list", edgelist.parse_edge_list, edgelist.format_edge_list),
        ".dot": Format("DOT", dot.parse_dot, dot.format_dot),
        ".gv": Format("DOT", dot.parse_dot, dot.format_dot),
        ".graphml": Format("GraphML", graphml.parse_graphml, graphml.format_graphml),
        ".csv": Format("two-column CSV", pairs.parse_pairs, pairs.format_pairs, carries_all=False),
    }
)


def format_of(path: str | Path) -> Format:
    """The format that a file's ending names; GraphError where it names none."""
    ending = Path(path).suffix.lower()
    if ending not in FORMATS:
        message = f"The ending “{ending}” names no graph format." if ending else "The file's name has no ending."
        remedy = did_you_mean(ending, FORMATS, f"Known are {', '.join(FORMATS)}.")
        raise GraphError(Finding("graph-unknown-format", message, remedy, file=str(path)))
    return FORMATS[ending]


def read_graph(path: str | Path) -> CausalGraph:
    """Read a causal graph: an edge list (``.edges``), DOT, GraphML or two-column CSV, by the file's ending.

    Raises
    ------
    GraphError
        If the file cannot be read or is no causal graph; all that is wrong is among its findings.
    """
    known = format_of(path)
    return known.parse(read_text(path, GraphError, "graph"), str(path))


def write_graph(graph: CausalGraph, path: str | Path, *, force: bool = False) -> None:
    """Write a causal graph in the format that the file's ending names.

    Raises
    ------
    OutputError
        If the file exists already and ``force`` is not set.
    GraphError
        If the ending names no format, or the format cannot carry a sign in some text.

    Warns
    -----
    AdjustplanWarning
        If the format cannot carry all of the graph, with what is left out.
    """
    known = format_of(path)
    if known.write is not edgelist.format_edge_list:
        _refuse_control_signs(graph, path, known)
    text = known.write(graph)
    write_whole(path, text, force=force)
    if lost := [] if known.carries_all else left_out(graph):
        message = f"{path}: {known.title} carries arrows only; left out: {'; '.join(lost)}."
        warnings.warn(message, AdjustplanWarning, stacklevel=2)


def _refuse_control_signs(graph: CausalGraph, path: str | Path, known: Format) -> None:
    """Control signs and unassigned ones come back altered from other formats, or make the file unreadable."""
    told = [variable.name for variable in graph]
    if known.carries_all:
        told += [variable.label for variable in graph] + [arrow.reason for arrow in graph.arrows]
    for text in told:
        trimmed = not known.carries_all and text != text.strip()
        if trimmed or any(unicodedata.category(letter) in ("Cc", "Cs", "Cn") for letter in text):
            message = f"{known.title} cannot carry the signs in {text!r}."
            remedy = "Write an edge list (.edges), or take out line breaks and control signs."
            raise GraphError(Finding("graph-unwritable", message, remedy, file=str(path)))


def left_out(graph: CausalGraph) -> list[str]:
    """What a format that carries only arrows leaves out of this graph, in words."""
    lost = []
    if reasons := sum(bool(arrow.reason) for arrow in graph.arrows):
        lost.append(f"the reasons of {reasons} arrow{'s' * (reasons > 1)}")
    drawn = {end for arrow in graph.arrows for end in (arrow.cause, arrow.effect)}
    for variable in graph.variables:
        said = ["the variable itself, on no arrow"] if variable.name not in drawn else []
        said += attributes(variable)
        if said:
            lost.append(f"“{variable.name}” ({', '.join(said)})")
    return lost
