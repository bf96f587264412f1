"""What stressing an estimate gives back, as text and as JSON that say the same."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass
from html import escape
from typing import Any

from adjustplan.errors import Finding
from adjustplan.estimate.stress.bias import Simulated
from adjustplan.estimate.stress.bounding import Bounded, Tipping
from adjustplan.estimate.stress.evalues import EValue
from adjustplan.estimate.stress.robustness import LinearMove, Robustness
from adjustplan.estimate.stress.scales import Moved
from adjustplan.estimate.stress.yardstick import LeftOut
from adjustplan.identify.showing import Tabular, list_text
from adjustplan.study import Measure

CAUTIONS = (
    "An E-value is no proof. It says how strong unmeasured confounding would have to be, not how strong it is, and it"
    " says nothing about selection or errors in what is recorded.",
    "Whether such biases are likely is for people who know the field to judge, with a statistician or physician.",
)


@dataclass(frozen=True, slots=True)
class NamedConfounder:
    """A confounder with strengths that the plan assumes; ``in_graph`` where the graph has it on an open path."""

    name: str
    in_graph: bool
    bounded: Bounded


@dataclass(frozen=True, slots=True)
class Confounding:
    """What unmeasured confounding of given strengths could do, as risk ratios.

    Attributes
    ----------
    evalue : EValue
    named : tuple of NamedConfounder
    strengths : tuple of float
        Those of the array, in rows (with the exposure) and columns (with the outcome).
    array : tuple of tuple of Bounded
    tipping : tuple of Tipping
    """

    evalue: EValue
    named: tuple[NamedConfounder, ...]
    strengths: tuple[float, ...]
    array: tuple[tuple[Bounded, ...], ...]
    tipping: tuple[Tipping, ...]


@dataclass(frozen=True, slots=True)
class PrevalenceTipping:
    """For a confounder with two levels, how common it must be among the exposed to move the estimate.

    Attributes
    ----------
    name : str
    among_reference, effect : float
        The medians assumed for its share in the reference group and for what it does to the outcome.
    among_exposed : float or None
        None where no share is enough.
    """

    name: str
    among_reference: float
    effect: float
    among_exposed: float | None


@dataclass(frozen=True, slots=True)
class Measured:
    """What an unmeasured confounder as strong as a covariate would leave.

    Attributes
    ----------
    name : str
        The covariate.
    way : {"explained variance", "left out"}
        How its strength is taken.
    moved : Moved
    linear : LinearMove or None
    change : LeftOut or None
    """

    name: str
    way: str
    moved: Moved
    linear: LinearMove | None
    change: LeftOut | None


@dataclass(frozen=True, slots=True)
class LinearConfounding:
    """What a confounder that explains assumed shares of variance would leave."""

    name: str
    move: LinearMove


@dataclass(frozen=True)
class Fragility(Tabular):
    """How fragile the planned estimate is.

    Attributes
    ----------
    measure, exposure, outcome : str
    members : tuple of str
        The planned set.
    estimate, lower, upper : float
        Adjusted for it.
    crude : float or None
    target, no_effect : float
        The value to which the estimate is asked to be moved, and the one that means no effect.
    confounding : Confounding or None
        None where the measure cannot be put as a risk ratio; a finding says why.
    unmeasured : tuple of str
        The unmeasured variables of the graph that leave a path open.
    prevalences : tuple of PrevalenceTipping
    robustness : Robustness or None
        Linear models only.
    yardsticks : tuple of Measured
    linear_confounders : tuple of LinearConfounding
    biases : tuple of Simulated
    findings : tuple of Finding
    """

    measure: Measure
    exposure: str
    outcome: str
    members: tuple[str, ...]
    estimate: float
    lower: float
    upper: float
    crude: float | None
    target: float
    no_effect: float
    confounding: Confounding | None
    unmeasured: tuple[str, ...]
    prevalences: tuple[PrevalenceTipping, ...]
    robustness: Robustness | None
    yardsticks: tuple[Measured, ...]
    linear_confounders: tuple[LinearConfounding, ...]
    biases: tuple[Simulated, ...]
    findings: tuple[Finding, ...] = ()

    @property
    def clean(self) -> bool:
        """Whether no finding is graver than a note."""
        return all(finding.severity == "note" for finding in self.findings)

    @property
    def adjusted_for(self) -> str:
        """The planned set, in words."""
        return list_text(self.members) if self.members else "nothing"

    def caption(self) -> str:
        """What is put to the test, in one line."""
        return (
            f"How fragile is the {self.measure} of {self.outcome} for {self.exposure}, adjusted for"
            f" {self.adjusted_for}?"
        )

    def explains(self, moved: Moved) -> bool:
        """Whether an estimate that was moved has got to the target, or beyond."""
        return (moved.estimate - self.target) * (self.estimate - self.target) <= 0

    def to_dict(self) -> dict[str, Any]:
        """The result as JSON-ready values; None stands where there is no number."""
        from adjustplan.estimate.stress.wording import said_of_unmeasured, summary

        plain = asdict(self)
        plain["members"] = list(self.members)
        plain["summary"] = summary(self)
        plain["unmeasured"] = [{"name": name, "said": said_of_unmeasured(self, name)} for name in self.unmeasured]
        for row, measured in zip(plain["yardsticks"], self.yardsticks, strict=True):
            row["explains"] = self.explains(measured.moved)
        for row, linear in zip(plain["linear_confounders"], self.linear_confounders, strict=True):
            row["explains"] = self.explains(linear.move.moved)
        for row, bias in zip(plain["biases"], self.biases, strict=True):
            row["share_impossible"] = bias.share_impossible
        plain["findings"] = [finding.to_dict() for finding in self.findings]
        plain["cautions"] = list(CAUTIONS)
        return {key: _lists(value) for key, value in plain.items()}

    def records(self) -> Iterator[dict[str, Any]]:
        """A line for each estimate that remains under a named assumption, the planned one first."""
        yield _record("as planned", "", Moved(self.estimate, self.lower, self.upper))
        if self.confounding:
            for named in self.confounding.named:
                yield _record("confounder, at most", named.name, named.bounded.moved)
        for measured in self.yardsticks:
            yield _record("confounder as strong as", measured.name, measured.moved)
        for linear in self.linear_confounders:
            yield _record("confounder by explained variance", linear.name, linear.move.moved)
        for bias in self.biases:
            yield _record(f"without {bias.kind}", bias.name, bias.systematic)
            yield _record(f"without {bias.kind}, with random error", bias.name, bias.total)

    def __str__(self) -> str:
        from adjustplan.estimate.stress.wording import as_text

        return as_text(self)

    def _repr_html_(self) -> str:
        from adjustplan.estimate.stress.wording import summary

        said = [*summary(self), *(f"{each.severity}: {each}" for each in self.findings), *CAUTIONS]
        return super()._repr_html_() + "<ul>" + "".join(f"<li>{escape(each)}</li>" for each in said) + "</ul>"


def _record(assumption: str, name: str, moved: Moved | None) -> dict[str, Any]:
    numbers = {key: getattr(moved, key, None) for key in ("estimate", "lower", "upper")}
    return {"assumption": assumption, "name": name, **numbers}


def _lists(value: Any) -> Any:
    """Tuples as lists, all the way down, as JSON reads them back."""
    if isinstance(value, dict):
        return {key: _lists(part) for key, part in value.items()}
    return [_lists(part) for part in value] if isinstance(value, list | tuple) else value
