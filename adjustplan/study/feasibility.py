"""Whether a study of some size can answer its question, worked out before there are any data.

Three numbers that planners guess anyway decide much: how many people, how common the outcome is without the exposure,
how common the exposure is. They say how many outcomes to expect, how likely it is to see none at all, how many
parameters a regression of those outcomes can bear, and how strong an effect must be to be noticed.

Noticing means: a two-sided test at 5 % finds a difference between two proportions with a chance (power) of 80 %, by the
normal approximation without continuity correction (Fleiss, Levin and Paik 2003, Statistical Methods for Rates and
Proportions, 3rd ed., chapter 4). In a case-control study the proportions are the exposed among cases and among controls
(Schlesselman 1982, Case-Control Studies, chapter 6). It is the crude comparison: adjusting can cost some of that power.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import asdict, dataclass
from math import exp, isfinite, log1p, sqrt
from statistics import NormalDist
from typing import Any, Protocol

SIGNIFICANCE = 0.05
POWER = 0.8
RARE_OUTCOME = 0.01
"""Below this risk a study of cases is usually more efficient (common practice)."""
RARE_EXPOSURE = 0.05
"""Below this share of the exposed a study that recruits by exposure usually is (common practice)."""
CONTROLS = 4
"""Controls for each case beyond which little is gained: c of them keep c / (c + 1) of the precision (Ury 1975,
Biometrics 31:643)."""
MOST_PEOPLE = 10**10
"""More than there are; a larger size is a slip, and nothing is worked out from it."""

_RATIOS = {
    "cohort": "risk ratio",
    "trial": "risk ratio",
    "cross-sectional": "prevalence ratio",
    "case-control": "odds ratio",
}


class StudyNumbers(Protocol):
    """The numbers that the plan states of its study; see ``adjustplan.plan.schema.Study``."""

    @property
    def design(self) -> str: ...
    @property
    def size(self) -> int | None: ...
    @property
    def assumed_risk(self) -> float | None: ...
    @property
    def exposed_share(self) -> float | None: ...
    @property
    def controls_per_case(self) -> float | None: ...


@dataclass(frozen=True)
class Feasibility:
    """What a study of this size can be expected to show.

    Attributes
    ----------
    design : str
    size : int
        People; in a case-control study cases.
    expected : float
        Outcomes expected where the exposure has no effect; in a case-control study its cases.
    chance_of_none : float
        The chance of seeing no outcome at all: (1 - risk) to the power of the size.
    parameters : int
        Parameters of the planned regression that describe the exposure and the covariates.
    parameters_known : bool
        Whether that is their number; otherwise there are at least so many (categories have unknown levels).
    per_parameter : float
        Expected outcomes for each parameter, or people without the outcome where those are fewer.
    ratio : str or None
        The measure that ``detectable`` speaks of; None where the plan states too little to work it out.
    detectable : float or None
        The smallest ratio above 1 that is noticed with 80 % power; None where no ratio is.
    detectable_below : float or None
        The largest ratio below 1 that is.
    rough : bool
        Whether the normal approximation behind these ratios is poor: where the proportions do not differ, fewer than
        five people are expected on one side in one group (common practice).
    undetectable : str
        Why ``detectable`` is None, in a sentence; empty where it is not.
    alternative : str
        Another design that would be more efficient, and why, in a sentence or two; empty where none would.
    """

    design: str
    size: int
    expected: float
    chance_of_none: float
    parameters: int
    parameters_known: bool
    per_parameter: float
    ratio: str | None
    detectable: float | None
    detectable_below: float | None
    rough: bool
    undetectable: str
    alternative: str

    def expectation(self) -> str:
        """How many outcomes are to be expected, in a sentence."""
        if self.design == "case-control":
            return f"The number of cases is {count(self.size)}."
        expected = f"The number of outcomes to expect among {count(self.size)} people is {count(self.expected)}"
        return f"{expected}; the chance of seeing none is {percent(self.chance_of_none)}."

    def burden(self) -> str:
        """How many outcomes there are for each parameter, in a sentence."""
        least, most = ("", "") if self.parameters_known else ("at least ", "at most ")
        shown = f"{most}{count(self.per_parameter)}"
        return f"For each parameter of the regression ({least}{self.parameters}) that is {shown}."

    def detection(self) -> str:
        """Which ratios would be noticed, in a sentence; empty where the plan states too little."""
        if self.ratio is None or self.detectable is None:
            return self.undetectable
        below = "" if self.detectable_below is None else f" or below {self.detectable_below:.3g}"
        article = "An" if self.ratio == "odds ratio" else "A"
        ratios = f"{article} {self.ratio} above {count(self.detectable)}{below}"
        rough = " (roughly, as so few are expected)" if self.rough else ""
        return f"{ratios} would be noticed with {percent(POWER)} power{rough}, before adjustment."

    def __str__(self) -> str:
        said = [self.expectation(), self.burden(), self.detection(), self.alternative]
        return "\n".join(sentence for sentence in said if sentence)

    def to_dict(self) -> dict[str, Any]:
        """The numbers as JSON has them."""
        return asdict(self)


def feasibility(study: StudyNumbers, parameters: int = 1, *, parameters_known: bool = True) -> Feasibility | None:
    """What can be said before data; None where the plan states too little, or the design compares no people.

    Parameters
    ----------
    study : StudyNumbers
        The plan's study: its size and, but for a case-control study, the assumed risk are needed.
    parameters : int
        Of the regression; see :func:`count_parameters`.
    parameters_known : bool
        Whether there are exactly so many.
    """
    size, risk = study.size, study.assumed_risk
    if size is None or size > MOST_PEOPLE or study.design not in _RATIOS:
        return None
    if study.design == "case-control":
        expected, none, without = float(size), 0.0, size * (_stated(study.controls_per_case) or 1.0)
        groups = _sampled_groups(study, size)
        base = study.exposed_share
    elif risk is None:
        return None
    else:
        expected, none, without = size * risk, exp(size * log1p(-risk)), size * (1 - risk)
        share = study.exposed_share
        groups = (size * share, size * (1 - share)) if share is not None else None
        base = risk
    ratio, above, below, rough, reason = None, None, None, False, ""
    if groups is not None and base is not None:
        ratio = _RATIOS[study.design]
        above, below = (smallest_detectable(*groups, base, ratio, above=side) for side in (True, False))
        rough = min(groups) * min(base, 1 - base) < 5
        reason = "" if above else _never_noticed(study.design, groups, base)
    per_parameter = min(expected, without) / max(parameters, 1)
    alternative = _more_efficient(study, size, expected)
    return Feasibility(
        study.design,
        size,
        expected,
        none,
        parameters,
        parameters_known,
        per_parameter,
        ratio,
        above,
        below,
        rough,
        reason,
        alternative,
    )


def count_parameters(members: Collection[str], forms: Mapping[str, str]) -> tuple[int, bool]:
    """How many parameters the exposure and a set take up in a regression, and whether that is certain.

    A linear variable takes one, ``spline(k)`` takes k, a category one for each level but the first. How many levels it
    has is not known before the data, and neither is the form of a variable for which the plan states none: each counts
    as one, and the number is the least there can be. So does the exposure, as a contrast of two levels.
    """
    total, known = 1, True
    for name in members:
        form = forms.get(name, "category")
        if form.startswith("spline"):
            total += int(form.removeprefix("spline(").removesuffix(")"))
        else:
            total += 1
            known = known and form == "linear"
    return total, known


def smallest_detectable(
    first: float, second: float, base: float, ratio: str, *, above: bool = True, power: float = POWER
) -> float | None:
    """The ratio nearest to 1 that is noticed, or None where not even the most extreme one is.

    Parameters
    ----------
    first : float
        People in the group whose proportion differs: the exposed, or in a case-control study the cases.
    second : float
        People in the group it is compared with.
    base : float
        The proportion in the second group.
    ratio : str
        "odds ratio", or the name of a ratio of proportions.
    above : bool
        Whether a ratio above 1 is sought or one below.
    power : float

    Notes
    -----
    Sought is where ``gap`` is 0. It is convex in the proportion, for a standard error is concave in it, and is negative
    where the groups do not differ: so there is one solution, or none if it stays negative.
    """
    critical, assured = NormalDist().inv_cdf(1 - SIGNIFICANCE / 2), NormalDist().inv_cdf(power)
    near, far = base, 1.0 if above else 0.0

    def gap(proportion: float) -> float:
        equal, different = _standard_errors(first, second, proportion, base)
        return abs(proportion - base) - critical * equal - assured * different

    if min(first, second) < 1 or gap(far) <= 0:
        return None
    while True:
        middle = (near + far) / 2
        if middle in (near, far):
            break
        near, far = (near, middle) if gap(middle) > 0 else (middle, far)
    if ratio != "odds ratio":
        return far / base
    return far * (1 - base) / (base * (1 - far)) if far < 1 else None


def count(number: float) -> str:
    """A number of people or outcomes, or a ratio: ``0.45``, ``12.3``, ``10,000``."""
    return f"{number:,.0f}" if number >= 1000 or number == round(number) else f"{number:.3g}"


def percent(share: float) -> str:
    """A share in per cent, with two significant digits; one that is not zero never becomes so."""
    if 0 < share < 0.0001:
        return "less than 0.01 %"
    if 0.9999 < share < 1:
        return "more than 99.99 %"
    return f"{100 * share:.2g} %" if share < 0.995 else f"{100 * share:.4g} %"


def _sampled_groups(study: StudyNumbers, cases: int) -> tuple[float, float] | None:
    controls = _stated(study.controls_per_case)
    if controls is None or study.exposed_share is None:
        return None
    return float(cases), cases * controls


def _stated(number: float | None) -> float | None:
    """A number that can be reckoned with; TOML can say ``inf``."""
    return number if number is not None and isfinite(number) else None


def _standard_errors(first: float, second: float, proportion: float, base: float) -> tuple[float, float]:
    """Of the difference between two proportions: as if they were equal, and as they are."""
    pooled = (first * proportion + second * base) / (first + second)
    equal = sqrt(pooled * (1 - pooled) * (1 / first + 1 / second))
    return equal, sqrt(proportion * (1 - proportion) / first + base * (1 - base) / second)


def _never_noticed(design: str, groups: tuple[float, float], base: float) -> str:
    if min(groups) < 1:
        return "Fewer than one person is expected in one of the two groups, so no difference would be noticed."
    equal, different = _standard_errors(*groups, 1.0, base)
    reached = NormalDist().cdf((1 - base - NormalDist().inv_cdf(1 - SIGNIFICANCE / 2) * equal) / different)
    extreme = "every case were exposed" if design == "case-control" else "every exposed person had the outcome"
    return f"Even if {extreme}, a test would notice it with only {percent(reached)} power."


def _more_efficient(study: StudyNumbers, size: int, expected: float) -> str:
    risk, share = study.assumed_risk, study.exposed_share
    if study.design in ("cohort", "cross-sectional") and risk is not None and risk < RARE_OUTCOME:
        said = f"At a risk of {percent(risk)} the outcome is rare: a case-control study starts from those who have it."
        if expected < 10:
            return said
        cases = round(expected)
        return (
            f"{said} These {count(cases)} cases with {CONTROLS} controls each are {count(cases * (CONTROLS + 1))}"
            f" people in place of {count(size)}, and keep about {percent(CONTROLS / (CONTROLS + 1))} of the precision."
        )
    if study.design == "case-control" and share is not None and share < RARE_EXPOSURE:
        return (
            f"With {percent(share)} exposed among controls the exposure is rare: a cohort recruited by exposure has as"
            " many exposed people as are to be found."
        )
    return ""
