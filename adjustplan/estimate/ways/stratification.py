"""Stratification: compare like with like, then average the comparisons.

Everybody in a stratum has the same covariates, so within it exposed and reference can be compared directly. The
Mantel–Haenszel estimator averages these comparisons with weights that are steady however small the strata are: a
stratum of one exposed and one reference person adds what little it knows and upsets nothing (Mantel and Haenszel
1959, J Natl Cancer Inst 22:719). In stratum i, with A cases among N people (or in N units of person-time), group
1 exposed, group 0 reference, and N = N1 + N0:

* ratio of risks or rates: Σ A1 N0 / N over Σ A0 N1 / N; the variance of its logarithm is that of Greenland and
  Robins (1985, Biometrics 41:55);
* odds ratio: Σ A1 B0 / N over Σ A0 B1 / N, B being the people without the outcome; the variance of its logarithm
  is that of Robins, Breslow and Greenland (1986, Biometrics 42:311);
* difference of risks or rates: the stratum differences averaged with weights N1 N0 / N; the variance is that of
  Sato (1989, Biometrics 45:1323) for risks, because Greenland and Robins' is zero in matched pairs, and that of
  Greenland and Robins (1985) for rates.

Each of these variances holds both for a few large strata and for many small ones, and with a single stratum each
is that of the plain two-by-two table. All of them assume one effect for all strata; a test of that comes along,
unless the strata are too sparse for one. Rothman, Greenland and Lash (2008, Modern Epidemiology, 3rd edition,
chapter 15) give the formulas in one place.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.results import chi_square_text, with_interval
from adjustplan.study import Measure

_ROUNDING = 1e-12
_KINDS: dict[Measure, Measure] = {
    "risk difference": "risk difference",
    "prevalence difference": "risk difference",
    "risk ratio": "risk ratio",
    "prevalence ratio": "risk ratio",
    "odds ratio": "odds ratio",
    "rate difference": "rate difference",
    "rate ratio": "rate ratio",
}

LEAST_EXPECTED = 1.0
"""Half the strata must expect this many in their smallest cell for a test of homogeneity (after Cochran 1954,
Biometrics 10:417, who lets no expected count be below 1)."""
SIGNIFICANT = 0.05
"""Below this p the effect is said to differ between strata (common practice)."""


@dataclass(frozen=True, eq=False)
class Strata:
    """Two groups in each stratum.

    Attributes
    ----------
    exposed_cases, reference_cases : array of float, shape (strata,)
        People with the outcome, or events.
    exposed_total, reference_total : array of float, shape (strata,)
        All people; for rates, their person-time.

    Raises
    ------
    ValueError
        If the arrays differ in shape, or hold what is negative, infinite or missing, or cases without a total.
    """

    exposed_cases: Floats
    exposed_total: Floats
    reference_cases: Floats
    reference_total: Floats

    def __post_init__(self) -> None:
        parts = (self.exposed_cases, self.exposed_total, self.reference_cases, self.reference_total)
        if len({part.shape for part in parts}) != 1 or parts[0].ndim != 1 or not parts[0].size:
            raise ValueError("strata need four arrays with one number per stratum")
        if not all(bool(np.all(np.isfinite(part) & (part >= 0))) for part in parts):
            raise ValueError("cases and totals are finite and not negative")
        if np.any((parts[0] > 0) & (parts[1] == 0)) or np.any((parts[2] > 0) & (parts[3] == 0)):
            raise ValueError("a group with cases has people or person-time")

    @property
    def total(self) -> Floats:
        """People or person-time of each stratum."""
        return self.exposed_total + self.reference_total

    def pooled(self) -> Strata:
        """Everybody in one stratum, for the crude estimate of the same people."""
        return Strata(
            *(
                np.array([part.sum()])
                for part in (self.exposed_cases, self.exposed_total, self.reference_cases, self.reference_total)
            )
        )

    def only(self, kept: NDArray[np.bool_]) -> Strata:
        """The strata that ``kept`` marks (array of bool, shape (strata,))."""
        return Strata(
            self.exposed_cases[kept], self.exposed_total[kept], self.reference_cases[kept], self.reference_total[kept]
        )


class Homogeneity(NamedTuple):
    """A test whether the effect is the same in all strata: chi-square, its degrees of freedom, and p."""

    statistic: float
    degrees: int
    p: float


@dataclass(frozen=True, slots=True)
class Stratified:
    """A Mantel–Haenszel estimate with its 95 % confidence interval.

    Attributes
    ----------
    measure : str
    estimate, lower, upper : float
        On the scale of the measure; a rate difference per unit of person-time.
    standard_error : float
        Of the natural logarithm for a ratio.
    strata : int
        All strata.
    informative : int
        Those that can move the estimate: they hold both groups and, for a ratio, somebody with the outcome (for
        the odds ratio somebody without it too).
    total, left_out : float
        People or person-time in all strata, and in those that do not inform.
    homogeneity : Homogeneity or None
        Over informative strata; None with fewer than two, or where they are too sparse for a test.
    """

    measure: Measure
    estimate: float
    standard_error: float
    lower: float
    upper: float
    strata: int
    informative: int
    total: float
    left_out: float
    homogeneity: Homogeneity | None


def mantel_haenszel(strata: Strata, measure: Measure) -> Stratified:
    """One effect over all strata; for the crude effect, of ``strata.pooled()``.

    Parameters
    ----------
    strata : Strata
        Totals are person-time for the rate ratio and rate difference, people for the other measures.
    measure : {"risk difference", "risk ratio", "odds ratio", "rate difference", "rate ratio"}
        A prevalence difference or ratio is computed as that of risks.

    Raises
    ------
    NotEstimableError
        If no stratum informs, or the estimate or its variance is zero or infinite.
    ValueError
        If the measure has no Mantel–Haenszel estimator, or more people have the outcome than there are people.
    """
    kind = _KINDS.get(measure)
    if kind is None:
        raise ValueError(f"there is no Mantel–Haenszel estimator of the {measure}")
    of_rates = kind.startswith("rate")
    cases = strata.exposed_cases + strata.reference_cases
    if not of_rates and np.any(
        (strata.exposed_cases > strata.exposed_total) | (strata.reference_cases > strata.reference_total)
    ):
        raise ValueError("a stratum has more people with the outcome than people")
    informs = (strata.exposed_total > 0) & (strata.reference_total > 0)
    if kind.endswith("ratio"):
        informs &= cases > 0
    if kind == "odds ratio":
        informs &= cases < strata.total
    if not informs.any():
        further = {"odds ratio": " among whom the outcome varies", "risk ratio": " and somebody with the outcome"}
        what = further.get(kind, " and an event" if kind == "rate ratio" else "")
        message = f"No stratum says anything about the {measure}: none has both exposed and reference people{what}."
        remedy = "Merge strata or adjust for less, or use a regression."
        raise NotEstimableError("estimate-no-informative-stratum", message, remedy)
    kept = strata.only(informs)
    ratio = kind.endswith("ratio")
    value, error = _ratio(kept, kind, measure) if ratio else _difference(kept, kind, measure)
    found = with_interval(value, error, ratio=ratio)
    return Stratified(
        measure,
        found.estimate,
        error,
        found.lower,
        found.upper,
        len(informs),
        int(informs.sum()),
        float(strata.total.sum()),
        float(strata.total[~informs].sum()),
        _homogeneity(kept, kind, found.estimate),
    )


def _ratio(strata: Strata, kind: Measure, measure: Measure) -> tuple[float, float]:
    """Logarithm of the ratio, and its standard error."""
    a1, n1, a0, n0 = strata.exposed_cases, strata.exposed_total, strata.reference_cases, strata.reference_total
    n, m = strata.total, a1 + a0
    above, below = (a1 * (n0 - a0), a0 * (n1 - a1)) if kind == "odds ratio" else (a1 * n0, a0 * n1)
    over, under = float(np.sum(above / n)), float(np.sum(below / n))
    if over == 0 or under == 0:
        what = "0" if over == 0 else "infinite"
        message = f"The {measure} over the strata is {what}, because of cells in which nobody is."
        raise NotEstimableError("estimate-stratum-zeros", message, "Merge strata, or adjust for less.")
    if kind == "odds ratio":
        from statsmodels.stats.contingency_tables import StratifiedTable

        table = StratifiedTable(np.array([[a1, n1 - a1], [a0, n0 - a0]]))
        return float(table.logodds_pooled), float(table.logodds_pooled_se)
    spread = m * n1 * n0 / n**2 - (a1 * a0 / n if kind == "risk ratio" else 0.0)
    return math.log(over / under), _root(float(spread.sum()), float(np.sum(m * n1 * n0 / n**2)), measure) / math.sqrt(
        over * under
    )


def _difference(strata: Strata, kind: Measure, measure: Measure) -> tuple[float, float]:
    """The difference, and its standard error."""
    a1, n1, a0, n0 = strata.exposed_cases, strata.exposed_total, strata.reference_cases, strata.reference_total
    n = strata.total
    weight = n1 * n0 / n
    whole = float(weight.sum())
    value = float(np.sum((a1 * n0 - a0 * n1) / n)) / whole
    if kind == "rate difference":
        variance = float(np.sum(weight**2 * (a1 / n1**2 + a0 / n0**2)))
        return value, _root(variance, variance, measure) / whole
    p = float(np.sum((n1**2 * a0 - n0**2 * a1 + n1 * n0 * (n0 - n1) / 2) / n**2))
    q = float(np.sum((a1 * (n0 - a0) + a0 * (n1 - a1)) / (2 * n)))
    return value, _root(value * p + q, abs(value * p) + q, measure) / whole


def _root(variance: float, size: float, measure: Measure) -> float:
    """The root of a variance, or the reason why there is none; ``size`` is that of its parts."""
    if not variance > _ROUNDING * size:
        message = f"The outcome does not vary within the groups, so the {measure} over the strata has no interval."
        raise NotEstimableError("estimate-stratum-zeros", message, "Merge strata, or adjust for less.")
    return math.sqrt(variance)


def _homogeneity(strata: Strata, kind: Measure, estimate: float) -> Homogeneity | None:
    """Whether the strata agree on the effect.

    Odds ratio: Breslow and Day (1980, Statistical Methods in Cancer Research I), corrected by Tarone (1985,
    Biometrika 72:91). Rate ratio: the exposed cases of a stratum given all its cases are binomial (Breslow and Day
    1987, volume II). The others: squared distances of the stratum estimates from the common one, over their
    variances (Cochran 1954); strata that a zero leaves without either take no part.
    """
    from scipy.special import chdtrc

    a1, n1, a0, n0 = strata.exposed_cases, strata.exposed_total, strata.reference_cases, strata.reference_total
    n, m = strata.total, a1 + a0
    least = np.minimum(n1, n0) * m / n
    if not kind.startswith("rate"):
        least = np.minimum(least, np.minimum(n1, n0) * (n - m) / n)
    if len(n) < 2 or np.median(least) < LEAST_EXPECTED:
        return None
    correction = 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        if kind == "odds ratio":
            expected = _exposed_cases_given(estimate, n1, n0, m)
            variance = 1 / (1 / expected + 1 / (m - expected) + 1 / (n1 - expected) + 1 / (n0 - m + expected))
            distance = a1 - expected
            correction = float(distance.sum() ** 2 / variance.sum())
        elif kind == "rate ratio":
            share = estimate * n1 / (estimate * n1 + n0)
            distance, variance = a1 - m * share, m * share * (1 - share)
        elif kind == "risk ratio":
            distance = np.log(a1 / n1) - np.log(a0 / n0) - math.log(estimate)
            variance = 1 / a1 - 1 / n1 + 1 / a0 - 1 / n0
        else:
            distance = a1 / n1 - a0 / n0 - estimate
            one, none = (0.0, 0.0) if kind == "rate difference" else (a1 / n1, a0 / n0)
            variance = a1 / n1**2 * (1 - one) + a0 / n0**2 * (1 - none)
    used = np.isfinite(distance) & np.isfinite(variance) & (variance > 0)
    degrees = int(used.sum()) - 1
    if degrees < 1:
        return None
    statistic = float(np.sum(distance[used] ** 2 / variance[used])) - correction
    return Homogeneity(statistic, degrees, float(chdtrc(degrees, statistic)))


def _exposed_cases_given(ratio: float, n1: Floats, n0: Floats, m: Floats) -> Floats:
    """Exposed cases of a table with these margins and this odds ratio: a root of a quadratic equation.

    Of its two forms that one is taken in which nothing cancels, so a ratio of exactly 1 is no exception.
    """
    middle = n0 - m + ratio * (n1 + m)
    root = np.sqrt(middle**2 + 4 * (1 - ratio) * ratio * n1 * m)
    return np.asarray(
        np.where(middle > 0, 2 * ratio * n1 * m / (middle + root), (root - middle) / (2 * (1 - ratio))),
        dtype=np.float64,
    )


def stratification_findings(result: Stratified) -> tuple[Finding, ...]:
    """What to know about a stratified estimate: strata that say nothing, and whether the others agree."""
    said: list[Finding] = []
    if result.informative < result.strata:
        silent = result.strata - result.informative
        what = "person-time" if result.measure.startswith("rate") else "people"
        share = 100 * result.left_out / result.total
        message = f"{silent} of {result.strata} strata, with {share:.3g} % of the {what}, say nothing about the effect."
        remedy = "Merge strata, or adjust for less, if that is much."
        said.append(Finding("estimate-strata-left-out", message, remedy, "note"))
    test = result.homogeneity
    if test is None and result.informative > 1:
        message = "The strata are too sparse for a test whether the effect is the same in all of them."
        said.append(Finding("estimate-homogeneity-untested", message, "Compare coarser strata.", "note"))
    if test is not None and test.p < SIGNIFICANT:
        message = (
            f"The {result.measure} differs between strata ({chi_square_text(test.statistic, test.degrees)},"
            f" p = {test.p:.2g}),"
            " so one number for all hides something."
        )
        remedy = "Report it by stratum, or name the variable that modifies it in the plan."
        said.append(Finding("estimate-heterogeneity", message, remedy, "warning"))
    return tuple(said)
