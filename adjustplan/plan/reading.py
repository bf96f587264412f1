"""Reading a plan: from the bytes of the file to a :class:`Plan`, with everything wrong in it said at once."""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any, TypeVar, get_args, get_origin

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from adjustplan.errors import Finding, PlanError, did_you_mean
from adjustplan.files import read_text
from adjustplan.graph import CausalGraph, read_graph
from adjustplan.plan.analysis_schema import FORMS, Analysis
from adjustplan.plan.fitting_together import faults
from adjustplan.plan.places import Key, line_numbers, line_of
from adjustplan.plan.schema import Adjustment, PlanFile, Question, Study
from adjustplan.study.consequences import under_design

T = TypeVar("T")


@dataclass(frozen=True)
class Plan:
    """A plan as read, with its causal graph.

    Attributes
    ----------
    path : Path
        The plan file; what it names is relative to the folder it is in.
    file : PlanFile
        Its tables.
    graph : CausalGraph
        The graph it names, read.
    """

    path: Path
    file: PlanFile
    graph: CausalGraph

    @property
    def title(self) -> str:
        """The study's title."""
        return self.file.title

    @property
    def question(self) -> Question:
        """What is asked."""
        return self.file.question

    @property
    def study(self) -> Study | None:
        """The study, where the plan states it."""
        return self.file.study

    @property
    def adjustment(self) -> Adjustment:
        """The planned set and its alternatives; PlanError where the plan has none yet."""
        return self._needed(self.file.adjustment, "adjustment", 'set = ["…"]')

    @property
    def analysis(self) -> Analysis:
        """The planned analysis; PlanError where the plan has none yet."""
        return self._needed(self.file.analysis, "analysis", 'measure = "risk ratio" and data = "…"')

    @cached_property
    def judged_graph(self) -> CausalGraph:
        """The graph to which sufficiency is put under the study's design; see ``study.consequences``."""
        return under_design(self.graph, self.question.outcome, self.study)

    @property
    def graph_path(self) -> Path:
        """Where the graph is."""
        return self.path.parent / self.file.graph

    @cached_property
    def data_place(self) -> Path | str:
        """Where the data are: a path, or as it stands the URL of a server or what Spark is asked for.

        Raises
        ------
        PlanError
            If the plan names none.
        """
        if self.analysis.data is None:
            raise self.error("plan-no-data", "The plan names no data.", 'Add data = "…" to [analysis].', ("analysis",))
        elsewhere = "://" in self.analysis.data or self.analysis.data.startswith("spark:")
        return self.analysis.data if elsewhere else self.path.parent / self.analysis.data

    @property
    def data_table(self) -> str | None:
        """The table of a database, or the sheet of a workbook."""
        return self.file.data.table if self.file.data else None

    def column(self, variable: str) -> str:
        """The data's column that holds ``variable``."""
        return self.analysis.columns.get(variable, variable)

    def line(self, *key: str | int) -> int | None:
        """The line of a key of the plan file, such as ``plan.line("question", "exposure")``."""
        return line_of(key, self._lines)

    def error(self, code: str, message: str, remedy: str, key: Key = ()) -> PlanError:
        """A PlanError placed at a key of this plan."""
        return PlanError(Finding(code, message, remedy, file=str(self.path), line=self.line(*key)))

    @cached_property
    def _lines(self) -> dict[Key, int]:
        return line_numbers(read_text(self.path, PlanError, "plan"))

    def _needed(self, table: T | None, name: str, example: str) -> T:
        if table is None:
            raise self.error("plan-missing-table", f"The plan has no [{name}] yet.", f"Add [{name}] with {example}.")
        return table


def read_plan(path: str | Path) -> Plan:
    """Read a plan file and the graph it names.

    Raises
    ------
    PlanError
        If the file cannot be read, is not TOML, has unknown or missing keys or wrong values, or names variables that
        the graph lacks, or asks what cannot be asked; everything found is among its findings, with lines.
    GraphError
        If the graph cannot be read.
    """
    place = Path(path)
    text = read_text(place, PlanError, "plan")
    file = _parse(place, text)
    graph = read_graph(place.parent / file.graph)
    lines = line_numbers(text)
    if found := [
        Finding(fault.code, fault.message, fault.remedy, file=str(place), line=line_of(fault.key, lines))
        for fault in faults(file, graph)
    ]:
        raise PlanError(found)
    return Plan(place, file, graph)


def _parse(path: Path, text: str) -> PlanFile:
    try:
        values = tomllib.loads(text)
    except ValueError as error:  # of a number of thousands of digits too
        raise PlanError(_not_toml(str(error), text, str(path))) from error
    except RecursionError:
        raise PlanError(_not_toml("Brackets are nested too deeply", text, str(path))) from None
    try:
        return PlanFile.model_validate(values)
    except ValidationError as error:
        lines = line_numbers(text)
        raise PlanError(_finding(details, str(path), lines) for details in error.errors(include_url=False)) from error


def _not_toml(message: str, text: str, file: str) -> Finding:
    """The finding for what the TOML reader says, its place taken out of the sentence."""
    lines = text.splitlines()
    said, place = re.sub(r"\s*\(at .*\)$", "", message), re.search(r"at line (\d+), column (\d+)", message)
    line, column = (int(place[1]), int(place[2])) if place else (len(lines), None)
    excerpt = lines[line - 1] if 0 < line <= len(lines) else None
    remedy = "Mend the TOML here; a text stands in quotes, a list in square brackets."
    return Finding("plan-not-toml", f"{said}.", remedy, file=file, line=line, column=column, excerpt=excerpt)


def _finding(details: ErrorDetails, file: str, lines: dict[Key, int]) -> Finding:
    key: Key = details["loc"]
    shown = ".".join(str(part) for part in key if isinstance(part, str))
    line = line_of(key, lines)
    if details["type"] == "extra_forbidden":
        known = _known_keys(key[:-1])
        remedy = did_you_mean(str(key[-1]), known, f"Known here: {', '.join(known)}.")
        return Finding("plan-unknown-key", f"Unknown key “{shown}”.", remedy, file=file, line=line)
    if details["type"] == "missing":
        return Finding("plan-missing-key", f"The key “{shown}” is missing.", "Add it.", file=file, line=line)
    given = details["input"]
    if details["type"] == "string_pattern_mismatch":
        remedy = f"Write {FORMS}."
        return Finding("plan-bad-value", f"“{shown}” cannot be {given!r}.", remedy, file=file, line=line)
    known = [str(choice) for choice in details.get("ctx", {}).get("expected", "").replace("'", "").split(" or ")]
    choices = [choice.strip() for group in known for choice in group.split(",") if choice.strip()]
    remedy = did_you_mean(str(given), choices, f"{details['msg']}.") if choices else f"{details['msg']}."
    return Finding("plan-bad-value", f"“{shown}” cannot be {given!r}.", remedy, file=file, line=line)


def _known_keys(table: Key) -> list[str]:
    """The keys of the table at this place; a key that the user chose, as of a derived column, leads to its table."""
    model: type[BaseModel] = PlanFile
    chosen = False
    for part in table:
        if isinstance(part, int):
            continue
        if chosen:
            chosen = False
            continue
        annotation = next(f.annotation for n, f in model.model_fields.items() if part in (n, f.alias))
        inner = _model_of(annotation)
        assert inner is not None  # an unknown key can only stand in a table
        model, chosen = inner, get_origin(annotation) is dict
    return [info.alias or name for name, info in model.model_fields.items()]


def _model_of(annotation: Any) -> type[BaseModel] | None:
    """The table inside an annotation such as ``Study | None`` or ``list[ChosenSet]``."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((found for part in get_args(annotation) if (found := _model_of(part)) is not None), None)
