"""What a fit gives back: the main table, and everything that helps to judge it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass, field
from html import escape
from typing import TYPE_CHECKING, Any, Literal

from adjustplan.errors import Finding
from adjustplan.estimate.results import AdjustedEstimate, Estimate, Section, WayEstimate, aligned, interval_text
from adjustplan.identify.showing import Tabular
from adjustplan.plan.analysis_faults import WITHOUT_OUTCOME_MODEL
from adjustplan.plan.analysis_schema import Missing, Model, Way
from adjustplan.study import Measure

if TYPE_CHECKING:
    import pandas as pd

    from adjustplan.estimate.comparing.agreement import Agreement
    from adjustplan.estimate.comparing.collapsibility import Collapsibility
    from adjustplan.estimate.comparing.marginal_hazard import MarginalHazard
    from adjustplan.estimate.comparing.stratum_effects import EffectModification
    from adjustplan.estimate.diagnostics.diagnosing import Diagnostics
    from adjustplan.estimate.missing.handling import Incomplete
    from adjustplan.estimate.people import People

_NUMBERS = ("estimate", "lower", "upper", "standard_error")


@dataclass(frozen=True)
class Fit(Tabular):
    """The planned analysis, run.

    Attributes
    ----------
    measure : str
    effect : {"total", "direct"}
    exposure, outcome : str
    contrast : tuple of (str, str)
        The two exposure levels in words: the one whose effect it is, and the one it is compared with.
    way, model : str
        How the estimates are adjusted, and by which outcome regression (the other way need not use one).
    variance : {"model", "robust", "cluster"}
        Which standard error.
    intervals : {"formula", "bootstrap"}
        Where the intervals come from.
    missing_values : {"complete cases", "inverse probability", "imputation"}
        What was done about rows that lack a value.
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
    ways : tuple of WayEstimate
        The planned set adjusted in the planned way and in the others that the plan names.
    agreement : Agreement or None
        Whether the sufficient sets agree.
    modification : EffectModification or None
        The effect by level of the planned modifier.
    collapsibility : Collapsibility or None
        What of the step from crude to adjusted is confounding, for an odds or hazard ratio by regression.
    diagnostics : Diagnostics or None
        Of the planned set's models.
    incomplete : Incomplete or None
        What missing values cost, and how their handling went.
    people : People or None
        The flow of people from the source to the planned analysis.
    fingerprint : str or None
        SHA-256 of the columns used, of all eligible rows; the document has it, as it takes a pass over the rows.
    """

    measure: Measure
    effect: Literal["total", "direct"]
    exposure: str
    outcome: str
    contrast: tuple[str, str]
    way: Way
    model: Model
    variance: Literal["model", "robust", "cluster"]
    intervals: Literal["formula", "bootstrap"]
    missing_values: Missing
    rows: int
    rows_total: int
    missing: dict[str, int] = field(hash=False)
    patterns: int
    crude: Estimate | None
    adjusted: tuple[AdjustedEstimate, ...]
    findings: tuple[Finding, ...] = ()
    ways: tuple[WayEstimate, ...] = ()
    agreement: Agreement | None = None
    modification: EffectModification | None = None
    collapsibility: Collapsibility | MarginalHazard | None = None
    diagnostics: Diagnostics | None = None
    incomplete: Incomplete | None = None
    people: People | None = None
    fingerprint: str | None = None

    def to_dict(self) -> dict[str, Any]:
        """The fit as JSON-ready values; None stands where nothing could be estimated."""
        plain: dict[str, Any] = {
            "measure": self.measure,
            "effect": self.effect,
            "exposure": self.exposure,
            "outcome": self.outcome,
            "contrast": {"exposed": self.contrast[0], "reference": self.contrast[1]},
            "way": self.way,
            "model": self.model,
            "variance": self.variance,
            "intervals": self.intervals,
            "missing_values": self.missing_values,
            "rows": self.rows,
            "rows_total": self.rows_total,
            "rows_dropped": self.rows_total - self.rows,
            "missing": self.missing,
            "patterns": self.patterns,
            "fingerprint": self.fingerprint,
            "crude": asdict(self.crude) if self.crude else None,
            "adjusted": [_set_dict(result) for result in self.adjusted],
            "ways": [way.to_dict() for way in self.ways],
        }
        for name in _SECTIONS:
            section: Section | None = getattr(self, name)
            plain[name] = section.to_dict() if section else None
        plain["findings"] = [finding.to_dict() for finding in self.findings]
        return plain

    @property
    def clean(self) -> bool:
        """Whether no finding is graver than a note."""
        return all(finding.severity == "note" for finding in self.said)

    @property
    def said(self) -> tuple[Finding, ...]:
        """All findings, each once."""
        said = [*self.findings, *(finding for result in self.adjusted for finding in result.findings)]
        said += [finding for way in self.ways for finding in way.findings]
        said += [finding for section in self.sections for finding in section.findings]
        return tuple(dict.fromkeys(said))

    @property
    def sections(self) -> tuple[Section, ...]:
        """What there is beside the main table."""
        return tuple(section for name in _SECTIONS if (section := getattr(self, name)) is not None)

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
        lines = [self.caption(), f"{self.rows} of {self.rows_total} rows, {self.method}"]
        table = [("crude", interval_text(self.crude), f"{self.rows} rows", "")]
        table += [
            (
                ", ".join(result.members) or "nothing",
                interval_text(result),
                f"{result.rows} rows",
                ", ".join(result.origins) + ("" if result.sufficient else "; not sufficient"),
            )
            for result in self.adjusted
        ]
        lines += aligned(table)
        if len(self.ways) > 1:
            lines += [
                "",
                f"Ways to adjust for {', '.join(self.adjusted[0].members) or 'nothing'}",
                *_way_lines(self.ways),
            ]
        for section in self.sections:
            lines += ["", *section.lines()]
        if self.said:
            lines += ["", "Findings", *(f"  {finding.severity}: {finding}" for finding in self.said)]
        return "\n".join(lines)

    @property
    def method(self) -> str:
        """How the estimates were made, in a few words."""
        source = "bootstrap" if self.intervals == "bootstrap" else f"{self.variance} variance"
        model = "" if self.way in WITHOUT_OUTCOME_MODEL else f" ({self.model})"
        return f"{self.way}{model}, {self.missing_values}, 95 % confidence intervals, {source}"

    def _repr_html_(self) -> str:
        items = "".join(f"<li>{escape(f'{finding.severity}: {finding}')}</li>" for finding in self.said)
        return super()._repr_html_() + (f"<ul>{items}</ul>" if items else "")


def _numbers(result: Estimate | AdjustedEstimate | None) -> dict[str, float | None]:
    return {name: getattr(result, name, None) for name in _NUMBERS}


_SECTIONS = ("agreement", "modification", "collapsibility", "people", "incomplete", "diagnostics")


def _set_dict(result: AdjustedEstimate) -> dict[str, Any]:
    plain = asdict(result)
    plain["set"] = list(plain.pop("members"))
    plain["origins"] = list(result.origins)
    plain["findings"] = [finding.to_dict() for finding in result.findings]
    return plain


def _way_lines(ways: tuple[WayEstimate, ...]) -> list[str]:
    return aligned(
        [
            (
                way.way,
                interval_text(way.estimate),
                "conditional" if way.conditional else "marginal",
                f"{way.means[0]:.4g} against {way.means[1]:.4g}" if way.means else "",
            )
            for way in ways
        ]
    )
