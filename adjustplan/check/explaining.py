"""Explaining a code: from what a finding is called to a paragraph on what it means, whoever gives the finding."""

from __future__ import annotations

import textwrap
from dataclasses import asdict, dataclass
from itertools import groupby

from adjustplan.check.reader_codes import READER_CODES
from adjustplan.check.registry import RULES
from adjustplan.errors import Finding, PlanError, did_you_mean

WIDTH = 100


@dataclass(frozen=True, slots=True)
class Explanation:
    """What a code means.

    Attributes
    ----------
    code : str
    kind : str
        The severity of a rule; "reading" for a code that readers and fits give, whose severity depends.
    summary : str
        What it finds, in a sentence.
    text : str
        The whole paragraph.
    """

    code: str
    kind: str
    summary: str
    text: str

    @property
    def family(self) -> str:
        """The subject, which is the first word of the code."""
        return self.code.split("-")[0]

    def to_dict(self) -> dict[str, str]:
        """The explanation as JSON has it."""
        return {"family": self.family, **asdict(self)}

    def __str__(self) -> str:
        kind = f" ({self.kind})" if self.kind != "reading" else ""
        return f"{self.code}{kind}\n\n{textwrap.fill(self.text, WIDTH)}"


@dataclass(frozen=True, slots=True)
class Explanations:
    """Every code there is, by family."""

    rules: tuple[Explanation, ...]
    others: tuple[Explanation, ...]

    def to_dict(self) -> dict[str, list[dict[str, str]]]:
        """The list as JSON has it."""
        return {"rules": [item.to_dict() for item in self.rules], "others": [item.to_dict() for item in self.others]}

    def __str__(self) -> str:
        lines = ["Rules of “adjustplan check”:"]
        for family, items in groupby(self.rules, key=lambda item: item.family):
            lines += ["", family, *(_line(item) for item in items)]
        lines += ["", "Codes of reading, asking, fitting and writing:"]
        for family, items in groupby(self.others, key=lambda item: item.family):
            names = ", ".join(item.code for item in items)
            lines += ["", family, _wrapped(names)]
        return "\n".join(lines)


def explain(code: str) -> Explanation:
    """What a code means; PlanError with the nearest code where there is none of that name."""
    if rule := RULES.get(code):
        return Explanation(code, rule.severity, rule.finds, rule.explanation())
    if code in READER_CODES:
        return Explanation(code, "reading", READER_CODES[code].split(". ")[0].rstrip(".") + ".", READER_CODES[code])
    remedy = did_you_mean(code, [*RULES, *READER_CODES], "“adjustplan explain” without a code lists them all.")
    raise PlanError(Finding("check-unknown-rule", f"There is no code “{code}”.", remedy))


def explain_all() -> Explanations:
    """Every code, those of rules first; each part by family in the order of the codes."""
    return Explanations(
        tuple(explain(code) for code in sorted(RULES)),
        tuple(explain(code) for code in sorted(READER_CODES.keys() - RULES.keys())),
    )


def _wrapped(names: str) -> str:
    return textwrap.fill(names, WIDTH, initial_indent="  ", subsequent_indent="  ", break_on_hyphens=False)


def _line(item: Explanation) -> str:
    head = f"  {item.code} ({item.kind}): "
    return textwrap.fill(item.summary, WIDTH, initial_indent=head, subsequent_indent="    ")
