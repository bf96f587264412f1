"""The edge list: a causal graph as plain text that two people can discuss in a merge request.

::

    # Rotating night work and type 2 diabetes
    age, site  -> night_work
    age        -> diabetes               : incidence rises with age
    night_work -> sleep_debt -> diabetes
    chronotype: unmeasured, "Chronotype (evening preference)"

Reading goes in stages, each a file: the words of a line (``words``), the statement it makes (``statements``), and here
the graph that the statements describe. All that is wrong in a file is said at once.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from itertools import groupby, pairwise, product
from pathlib import Path

from adjustplan.errors import AdjustplanWarning, Finding, GraphError, nearest
from adjustplan.files import read_text
from adjustplan.graph.elements import Arrow, Variable, attributes
from adjustplan.graph.faults import Fault, faults
from adjustplan.graph.model import CausalGraph
from adjustplan.graph.statements import ArrowLine, Value, VariableLine, parse_line
from adjustplan.graph.words import Line, is_quoted, quote, split_line, without_comment, written_name

Place = tuple[int, int]
"""Line and column, from 1."""


def read_edge_list(path: str | Path) -> CausalGraph:
    """Read a ``.edges`` file.

    Raises
    ------
    GraphError
        With one finding for everything wrong in the file, each with line, column and the line itself.
    """
    return parse_edge_list(read_text(path, GraphError, "graph"), file=str(path))


def parse_edge_list(text: str, file: str | None = None) -> CausalGraph:
    """The graph that the text of an edge list describes; ``file`` is the name used in findings."""
    reading = _Reading(file)
    for number, raw in enumerate(text.replace("\r\n", "\n").split("\n"), start=1):
        reading.take(split_line(number, raw))
    return reading.graph()


@dataclass(slots=True)
class _Reading:
    """What has been read so far, and where."""

    file: str | None
    lines: dict[int, str] = field(default_factory=dict)
    findings: list[Finding] = field(default_factory=list)
    told: dict[str, dict[str, Value]] = field(default_factory=dict)
    variable_places: dict[str, Place] = field(default_factory=dict)
    arrows: list[Arrow] = field(default_factory=list)
    arrow_places: list[Place] = field(default_factory=list)

    def take(self, line: Line) -> None:
        before = len(self.findings)
        statement = parse_line(line, lambda *what: self._complain(line.number, *what))
        if isinstance(statement, ArrowLine):
            self._draw(statement, line.number)
        elif isinstance(statement, VariableLine):
            self._describe(statement, line.number)
        if statement is not None or len(self.findings) > before:
            self.lines[line.number] = line.raw

    def graph(self) -> CausalGraph:
        variables = [Variable(name, **said) for name, said in self.told.items()]  # type: ignore[arg-type]
        broken = [fault for fault in faults(variables, self.arrows) if not self.findings or fault.subject]
        self.findings += map(self._place, broken)
        if self.findings:
            in_order = sorted(self.findings, key=lambda finding: (finding.line or 0, finding.column or 0))
            raise GraphError(map(self._shown, in_order))
        graph = CausalGraph(self.arrows, variables)
        self._warn_of_near_misses()
        return graph

    def _draw(self, statement: ArrowLine, number: int) -> None:
        for word in (word for group in statement.groups for word in group):
            self._meet(word.text, (number, word.column))
        for causes, effects in pairwise(statement.groups):
            for cause, effect in product(causes, effects):
                self.arrows.append(Arrow(cause.text, effect.text, statement.reason))
                self.arrow_places.append((number, effect.column))

    def _describe(self, statement: VariableLine, number: int) -> None:
        for word in statement.names:
            said = self._meet(word.text, (number, word.column))
            self.variable_places[word.text] = (number, word.column)
            for attribute, value, column in statement.items:
                if attribute in said:
                    message = f"The {attribute.replace('_of', '')} of “{word.text}” is given twice."
                    if value is True:
                        message = f"“{word.text}” is called {attribute} twice."
                    self._complain(number, "graph-item-twice", message, "Keep one.", column)
                said[attribute] = value

    def _meet(self, name: str, place: Place) -> dict[str, Value]:
        self.variable_places.setdefault(name, place)
        return self.told.setdefault(name, {})

    def _complain(self, number: int, code: str, message: str, remedy: str, column: int) -> None:
        self.findings.append(Finding(code, message, remedy, file=self.file, line=number, column=column))

    def _place(self, fault: Fault) -> Finding:
        """The fault, where its arrow or variable stands."""
        place: Place | None = None
        if isinstance(fault.subject, Variable):
            place = self.variable_places.get(fault.subject.name)
        elif isinstance(fault.subject, Arrow):
            same = [i for i, arrow in enumerate(self.arrows) if arrow is fault.subject]
            ends = (fault.subject.cause, fault.subject.effect)
            alike = [i for i, arrow in enumerate(self.arrows) if (arrow.cause, arrow.effect) == ends]
            place = self.arrow_places[(same or alike)[0]]
        line, column = place or (None, None)
        return Finding(fault.code, fault.message, fault.remedy, file=self.file, line=line, column=column)

    def _shown(self, finding: Finding) -> Finding:
        excerpt = self.lines.get(finding.line or 0)
        return replace(finding, excerpt=excerpt)

    def _warn_of_near_misses(self) -> None:
        """A variable that is described, on no arrow, and almost called like one that is: probably a slip."""
        drawn = dict.fromkeys(end for arrow in self.arrows for end in (arrow.cause, arrow.effect))
        for name in self.told:
            if name not in drawn and (match := nearest(name, drawn)):
                line, column = self.variable_places[name]
                message = f"“{name}” is on no arrow."
                finding = Finding(
                    "graph-near-miss", message, f"Did you mean “{match}”?", "warning", self.file, line, column
                )
                warnings.warn(str(finding), AdjustplanWarning, stacklevel=4)


def format_edge_list(graph: CausalGraph) -> str:
    """The graph as an edge list; reading it gives an equal graph.

    Arrows that follow one another into the same effect for the same reason share a line; a variable has a line when
    there is something to say about it, or no arrow to show it.
    """
    lines = []
    for (effect, reason), arrows in groupby(graph.arrows, key=lambda arrow: (arrow.effect, arrow.reason)):
        causes = ", ".join(written_name(arrow.cause) for arrow in arrows)
        lines.append(f"{causes} -> {written_name(effect)}" + (f" : {_written_reason(reason)}" if reason else ""))
    drawn = {end for arrow in graph.arrows for end in (arrow.cause, arrow.effect)}
    for variable in graph.variables:
        items = list(_written_items(variable))
        if items or variable.name not in drawn:
            lines.append(f"{written_name(variable.name)}: {', '.join(items)}".rstrip())
    return "\n".join(lines) + "\n"


def _written_items(variable: Variable) -> Iterable[str]:
    for attribute, value in attributes(variable).items():
        if attribute == "label":
            yield quote(str(value))
        elif attribute == "proxy_of":
            yield f"proxy of {written_name(str(value))}"
        elif value is True:
            yield attribute
        else:
            yield f"{attribute}={value!r}"


def _written_reason(reason: str) -> str:
    plain = (
        reason == reason.strip()
        and without_comment(reason) == reason
        and not is_quoted(reason)
        and not any(letter in reason for letter in "\n\r")
    )
    return reason if plain else quote(reason)
