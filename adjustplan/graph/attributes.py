"""What a foreign format says of a variable, as attributes that may be text, made into a :class:`Variable`."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from adjustplan.errors import Finding, GraphError
from adjustplan.graph.model import Variable

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
