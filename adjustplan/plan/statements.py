"""A plan and its graph as statements: sorted one-line sentences, one for each fact.

A plan is a contract about what will be done, not about how its file is laid out. Two files that say the same must
count as the same plan, and two that differ in anything a reader could hold the team to must not. So the content is
spelt out as statements ::

    adjustment.set has "age"
    analysis.measure = "risk ratio"
    arrow age -> diabetes
    arrow age -> diabetes: reason = "incidence rises with age"
    variable chronotype: unmeasured

Comments, the order of keys, of set members, of arrows and of variables, layout, runs of white space inside prose, the
graph's file format and keys that only write out a default leave no trace in them; everything else does. The statements
follow from the models, so a key added to the plan is part of the contract from its first day. They are sorted, and
hashed with SHA-256 to one *fingerprint* of the graph and one of the plan. Texts are quoted and escaped, so different
contents never give the same statements.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterable, Iterator
from dataclasses import MISSING, dataclass, fields
from typing import Any

from adjustplan.graph import Arrow, CausalGraph, Variable
from adjustplan.plan.reading import Plan
from adjustplan.plan.schema import PlanFile
from adjustplan.plan.table import Table
from adjustplan.plan.toml_text import collapsed, key_text, quoted, value_text

PROSE = frozenset({"title", "population", "rationale", "reason", "label"})
"""Keys whose text is read by people, where white space means nothing; any other text may be a value of the data."""
_NOT_CONTENT = frozenset({"graph"})
"""Root keys that only say where something stands: the graph counts by what it says, not by its file."""
_BARE_NAME = re.compile(r"[A-Za-z_][A-Za-z0-9_]*(?:\.[A-Za-z0-9_]+)*")


@dataclass(frozen=True, slots=True)
class Statements:
    """What a graph and a plan say, each sorted."""

    graph: tuple[str, ...]
    plan: tuple[str, ...]

    @property
    def graph_fingerprint(self) -> str:
        """SHA-256 of the graph's statements."""
        return fingerprint(self.graph)

    @property
    def plan_fingerprint(self) -> str:
        """SHA-256 of the plan's statements."""
        return fingerprint(self.plan)


def statements(plan: Plan) -> Statements:
    """Everything that a plan and its graph state."""
    return Statements(graph_statements(plan.graph), plan_statements(plan.file))


def fingerprint(sentences: Iterable[str]) -> str:
    """SHA-256, in hexadecimal, of sentences that hold no line break, one a line, in UTF-8."""
    return hashlib.sha256("\n".join(sentences).encode("utf-8")).hexdigest()


def graph_statements(graph: CausalGraph) -> tuple[str, ...]:
    """Everything that a graph states, sorted."""
    told: list[str] = []
    for variable in graph.variables:
        told += _with_details(f"variable {name_text(variable.name)}", variable, {"name"})
    for arrow in graph.arrows:
        ends = f"{name_text(arrow.cause)} -> {name_text(arrow.effect)}"
        told += _with_details(f"arrow {ends}", arrow, {"cause", "effect"})
    return tuple(sorted(told))


def plan_statements(file: PlanFile) -> tuple[str, ...]:
    """Everything that a plan file states itself, sorted."""
    return tuple(sorted(_of_table(file, "")))


def name_text(name: str) -> str:
    """A variable's name as statements write it: bare where it is a plain ASCII word, else quoted.

    ASCII alone, because what counts as a letter elsewhere differs between versions of Unicode, and a fingerprint must
    not.
    """
    return name if _BARE_NAME.fullmatch(name) else quoted(name)


def _with_details(about: str, thing: Variable | Arrow, named: set[str]) -> Iterator[str]:
    yield about
    for detail in fields(thing):
        value = _content(detail.name, getattr(thing, detail.name))
        if detail.name in named or value is None or (detail.default is not MISSING and value == detail.default):
            continue
        if isinstance(detail.default, float):
            value = float(value) + 0.0  # a cost of 0 is one of 0.0, and of -0.0
        yield f"{about}: {detail.name}" if value is True else f"{about}: {detail.name} = {value_text(value)}"


def _of_table(table: Table, path: str) -> Iterator[str]:
    for name, key, value in _stated(table):
        if path or name not in _NOT_CONTENT:
            yield from _of_value(f"{path}.{key}" if path else key, value)


def _stated(table: Table) -> Iterator[tuple[str, str, Any]]:
    """Name, key in the file and content of each field that is required or differs from its default."""
    for name, info in type(table).model_fields.items():
        value = _content(name, getattr(table, name))
        if info.is_required() or (value is not None and value != info.get_default(call_default_factory=True)):
            yield name, info.alias or name, value


def _content(name: str, value: Any) -> Any:
    return collapsed(value) if name in PROSE and isinstance(value, str) else value


def _of_value(path: str, value: Any) -> Iterator[str]:
    if isinstance(value, Table):
        yield from list(_of_table(value, path)) or [f"{path} is empty"]
    elif isinstance(value, dict):
        for key, part in value.items():
            yield from _of_value(f"{path}.{key_text(key)}", part)
    elif isinstance(value, list):
        yield from (f"{path} has {item}" for item in _items(value)) if value else [f"{path} is empty"]
    else:
        yield f"{path} = {value_text(value)}"


def _items(values: list[Any]) -> list[str]:
    """The members of a list, sorted: variables once each, as in a set; tables as often as they stand there."""
    told = map(_inline, values)
    return sorted(told if isinstance(values[0], Table) else set(told))


def _inline(value: Any) -> str:
    """A value on one line, a table in braces with its keys sorted; TOML reads it back."""
    if isinstance(value, Table):
        told = sorted(f"{key} = {_inline(part)}" for _, key, part in _stated(value))
        return "{ " + ", ".join(told) + " }" if told else "{}"
    if isinstance(value, dict):
        return "{ " + ", ".join(sorted(f"{key_text(key)} = {_inline(part)}" for key, part in value.items())) + " }"
    if isinstance(value, list):
        return f"[{', '.join(_items(value)) if value else ''}]"
    return value_text(value)
