"""What a foreign format says of a variable, as attributes that may be text, made into a :class:`Variable`."""

from __future__ import annotations

import warnings
from collections.abc import Iterable, Mapping
from typing import Any

from adjustplan.errors import AdjustplanWarning, Finding, GraphError
from adjustplan.graph.elements import Arrow, Variable
from adjustplan.graph.model import CausalGraph


def assemble(
    described: Iterable[tuple[str, Mapping[str, Any]]], arrows: Iterable[Arrow], ignored: set[str], file: str | None
) -> CausalGraph:
    """The graph of what a foreign format describes; attributes that mean nothing here are named in a warning.

    Raises
    ------
    GraphError
        If an attribute has a value that it cannot have, or the graph is no causal graph; its findings name the file.
    """
    try:
        graph = CausalGraph(arrows, [read_variable(name, data, ignored) for name, data in described])
    except GraphError as error:
        raise GraphError(finding.at(file) for finding in error.findings) if file else error from None
    if ignored:
        message = f"Attributes without a meaning here are left out: {', '.join(sorted(ignored))}."
        warnings.warn(f"{file}: {message}" if file else message, AdjustplanWarning, stacklevel=4)
    return graph


_FLAGS = {"true": True, "1": True, "yes": True, "false": False, "0": False, "no": False, "": False}


def read_variable(name: str, data: Mapping[str, Any], ignored: set[str]) -> Variable:
    """The variable that ``data`` describes; the names of attributes that mean nothing are added to ``ignored``.

    Raises
    ------
    GraphError
        If an attribute has a value that it cannot have.
    """
    known = {"label", "unmeasured", "restricted", "wave", "cost", "proxy_of"}
    ignored |= set(data) - known
    return Variable(
        name,
        label=str(data.get("label", "")),
        unmeasured=_flag(name, "unmeasured", data),
        restricted=_flag(name, "restricted", data),
        wave=_number(name, "wave", data, int, None),
        cost=_number(name, "cost", data, float, 1.0),
        proxy_of=str(data.get("proxy_of", "")),
    )


def _flag(name: str, attribute: str, data: Mapping[str, Any]) -> bool:
    told = str(data.get(attribute, "")).strip().lower()
    if told not in _FLAGS:
        raise _bad(name, attribute, told, "Write true or false.")
    return _FLAGS[told]


def _number(name: str, attribute: str, data: Mapping[str, Any], kind: type, default: Any) -> Any:
    if attribute not in data:
        return default
    try:
        return kind(str(data[attribute]))
    except ValueError:
        raise _bad(name, attribute, data[attribute], "Write a number (a whole one for a wave).") from None


def _bad(name: str, attribute: str, told: object, remedy: str) -> GraphError:
    return GraphError(Finding("graph-bad-attribute", f"The {attribute} of “{name}” is “{told}”.", remedy))
