"""Two-column CSV: one arrow a row, its cause in the first column and its effect in the second.

The first row may be the header ``cause,effect``; it is always written.
"""

from __future__ import annotations

import csv
import io
import warnings

from adjustplan.errors import AdjustplanWarning, Finding, GraphError
from adjustplan.graph.elements import Arrow, Variable
from adjustplan.graph.faults import faults
from adjustplan.graph.model import CausalGraph

_HEADER = ["cause", "effect"]


def parse_pairs(text: str, file: str | None = None) -> CausalGraph:
    """The graph whose arrows the rows of a CSV text are."""
    findings: list[Finding] = []
    arrows: list[Arrow] = []
    lines: dict[int, int] = {}
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    try:
        for row in reader:
            cells = [cell.strip() for cell in row]
            if not any(cells) or (not arrows and [cell.lower() for cell in cells] == _HEADER):
                continue
            if len(cells) != 2 or not all(cells):
                message = f"Expected two filled columns, found {len(cells)}: {', '.join(cells)}."
                remedy = "Write cause,effect; a name with a comma goes in double quotes."
                findings.append(Finding("graph-syntax", message, remedy, file=file, line=reader.line_num))
                continue
            arrows.append(Arrow(*cells))
            lines[id(arrows[-1])] = reader.line_num
    except csv.Error as error:
        remedy = "Close every double quote."
        findings.append(Finding("graph-syntax", f"Not CSV: {error}.", remedy, file=file, line=reader.line_num))
    names = dict.fromkeys(end for arrow in arrows for end in (arrow.cause, arrow.effect))
    if not findings:
        for fault in faults([Variable(name) for name in names], arrows):
            line = lines.get(id(fault.subject))
            findings.append(Finding(fault.code, fault.message, fault.remedy, file=file, line=line))
    if findings:
        raise GraphError(findings)
    _warn_of_header(arrows, file)
    return CausalGraph(arrows)


def format_pairs(graph: CausalGraph) -> str:
    """The arrows as CSV with a header."""
    stream = io.StringIO(newline="")
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(_HEADER)
    writer.writerows((arrow.cause, arrow.effect) for arrow in graph.arrows)
    return stream.getvalue()


def _warn_of_header(arrows: list[Arrow], file: str | None) -> None:
    """The first row's two names are in no other row: perhaps a header that was taken for an arrow."""
    first, rest = arrows[0], arrows[1:]
    others = {end for arrow in rest for end in (arrow.cause, arrow.effect)}
    if rest and not {first.cause, first.effect} & others:
        message = f"The first row is read as the arrow {first}, though no other row names either."
        finding = Finding("graph-header", message, "If it is a header, write cause,effect.", "warning", file, 1)
        warnings.warn(str(finding), AdjustplanWarning, stacklevel=4)
