"""What a fit gives back: one crude estimate, and one adjusted estimate for each set.

A crude and an adjusted estimate may only be compared when they come from the same people. Every adjusted
estimate therefore carries the crude one of its own rows. What could not be estimated is None, never a number
that looks like one, and the findings beside it say why.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass, field
from html import escape
from typing import TYPE_CHECKING, Any, Literal

from adjustplan.errors import Finding
from adjustplan.identify.showing import Tabular
from adjustplan.study import Measure

if TYPE_CHECKING:
    import pandas as pd

Origin = Literal["planned", "alternative", "minimal"]
_NUMBERS = ("estimate", "lower", "upper", "standard_error")


@dataclass(frozen=True, slots=True)
class Estimate:
    """A measure of effect with its 95 % confidence interval.

    Attributes
    ----------
    estimate, lower, upper : float
        On the scale of the measure: the unit of the outcome for a mean difference, a pure number for a ratio.
    standard_error : float
        For a mean difference in the unit of the outcome; for a ratio, of the natural logarithm of the ratio,
        as is usual, because the interval is symmetric there.
    """

    estimate: float
    lower: float
    upper: float
    standard_error: float


@dataclass(frozen=True, slots=True)
class AdjustedEstimate:
    """The effect estimated with one set of covariates in the model.

    Attributes
    ----------
    members : tuple of str
        The set, sorted.
    origins : tuple of {"planned", "alternative", "minimal"}
        Why it is reported: it is the planned set, an alternative, a minimal sufficient set of the graph.
    sufficient : bool
        Whether the graph calls it sufficient.
    rationale : str
        The plan's reason for it.
    estimate, lower, upper, standard_error : float or None
        As in :class:`Estimate`; None where the model cannot be estimated.
    rows : int
        Rows complete for outcome, exposure and the set.
    crude : Estimate or None
        The crude estimate on these same rows.
    findings : tuple of Finding
        Why there is no estimate, or what to know about it.
    """

    members: tuple[str, ...]
    origins: tuple[Origin, ...]
    sufficient: bool
    rationale: str = ""
    estimate: float | None = None
    lower: float | None = None
    upper: float | None = None
    standard_error: float | None = None
    rows: int = 0
    crude: Estimate | None = None
    findings: tuple[Finding, ...] = ()


@dataclass(frozen=True)
class Fit(Tabular):
    """The planned analysis, run.

    Attributes
    ----------
    measure : {"mean difference", "odds ratio", "risk ratio"}
    effect : {"total", "direct"}
    exposure, outcome : str
    contrast : tuple of (str, str)
        The two exposure levels in words: the one whose effect it is, and the one it is compared with.
    variance : {"model", "robust"}
        Which standard error.
    rows : int
        Rows analysed for the planned set: complete for outcome, exposure and its members.
    rows_total : int
        Rows of the file.
    missing : mapping of str to int
        For each variable used, the rows that lack it; a row may lack several.
    patterns : int
        Covariate patterns the rows were reduced to.
    crude : Estimate or None
        On the rows of the planned set.
    adjusted : tuple of AdjustedEstimate
        The planned set first, then the alternatives, then the minimal sufficient sets by size and name.
    findings : tuple of Finding
        What concerns all of them.
    """

    measure: Measure
    effect: Literal["total", "direct"]
    exposure: str
    outcome: str
    contrast: tuple[str, str]
    variance: Literal["model", "robust"]
    rows: int
    rows_total: int
    missing: dict[str, int] = field(hash=False)
    patterns: int
    crude: Estimate | None
    adjusted: tuple[AdjustedEstimate, ...]
    findings: tuple[Finding, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """The fit as JSON-ready values; None stands where nothing could be estimated."""
        plain = asdict(self)
        plain["rows_dropped"] = self.rows_total - self.rows
        plain["contrast"] = {"exposed": self.contrast[0], "reference": self.contrast[1]}
        plain["findings"] = [finding.to_dict() for finding in self.findings]
        for row, result in zip(plain["adjusted"], self.adjusted, strict=True):
            row["set"] = list(row.pop("members"))
            row["origins"] = list(result.origins)
            row["findings"] = [finding.to_dict() for finding in result.findings]
        plain["adjusted"] = list(plain["adjusted"])
        return plain

    @property
    def clean(self) -> bool:
        """Whether no finding is graver than a note."""
        return all(finding.severity == "note" for finding in self._said)

    @property
    def _said(self) -> tuple[Finding, ...]:
        """All findings, each once."""
        said = [*self.findings, *(finding for result in self.adjusted for finding in result.findings)]
        return tuple(dict.fromkeys(said))

    def caption(self) -> str:
        """What is estimated, in one line."""
        exposed, reference = self.contrast
        return f"{self.measure.capitalize()} of {self.outcome} for {self.exposure}: {exposed} against {reference}"

    def records(self) -> Iterator[dict[str, Any]]:
        """One line for the crude estimate and one for each set; what could not be estimated is None."""
        yield {"set": "crude", "origins": "", "sufficient": None, "rows": self.rows, **_numbers(self.crude)}
        for result in self.adjusted:
            yield {
                "set": ", ".join(result.members) or "nothing",
                "origins": ", ".join(result.origins),
                "sufficient": result.sufficient,
                "rows": result.rows,
                **_numbers(result),
            }

    def to_frame(self) -> pd.DataFrame:
        """The records as a frame; what could not be estimated is not a number."""
        return super().to_frame().astype(dict.fromkeys(_NUMBERS, "float64"))

    def __str__(self) -> str:
        rows = f"{self.rows} of {self.rows_total} rows"
        head = f"{self.caption()}\n{rows}, 95 % confidence intervals, {self.variance} variance"
        lines = [("crude", _interval(self.crude), self.rows, "")]
        lines += [
            (
                ", ".join(result.members) or "nothing",
                _interval(result),
                result.rows,
                ", ".join(result.origins),
            )
            for result in self.adjusted
        ]
        wide = max(len(line[0]) for line in lines)
        middle = max(len(line[1]) for line in lines)
        body = [f"  {name:<{wide}}  {shown:<{middle}}  {rows:>9} rows  {why}" for name, shown, rows, why in lines]
        said = [f"  {finding.severity}: {finding}" for finding in self._said]
        return "\n".join(line.rstrip() for line in [head, *body, *said])

    def _repr_html_(self) -> str:
        items = "".join(f"<li>{escape(f'{finding.severity}: {finding}')}</li>" for finding in self._said)
        return super()._repr_html_() + (f"<ul>{items}</ul>" if items else "")


def _numbers(result: Estimate | AdjustedEstimate | None) -> dict[str, float | None]:
    return {name: getattr(result, name, None) for name in _NUMBERS}


def _interval(result: Estimate | AdjustedEstimate | None) -> str:
    if result is None or result.estimate is None:
        return "not estimated"
    return f"{result.estimate:.3g} ({result.lower:.3g} to {result.upper:.3g})"
