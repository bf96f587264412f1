"""Probabilistic bias analysis: the estimate under a bias whose size is uncertain.

Each draw takes one value of every quantity that the bias depends on from its stated distribution, works out the bias
that follows, and takes it off the estimate. The median over all draws says where the estimate would be without the
bias; the 2.5th and 97.5th percentiles say how uncertain that is because the bias is. The interval that holds random
error as well adds, in every draw, a normal error with the standard error of the estimate, on the logarithmic scale for
ratios (Lash, Fox and Fink 2009, Applying Quantitative Bias Analysis to Epidemiologic Data, chapters 4 to 8).

Confounding and a selection factor act on the adjusted estimate. Misclassification and selection probabilities act on
the crude two-by-two table; the ratio (or difference) of the crude estimate before and after is then taken off the
adjusted one, which supposes that adjustment would have changed both alike. Draws that lead to a table with a negative
cell could not have made these data: they are left out, and counted.
"""

from __future__ import annotations

import zlib
from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.stress.binary import bias_factor
from adjustplan.estimate.stress.distributions import quantile, together
from adjustplan.estimate.stress.observed import Observed
from adjustplan.estimate.stress.scales import Moved
from adjustplan.estimate.stress.tables import (
    TABLE_MEASURES,
    TwoByTwo,
    before_exposure_errors,
    before_outcome_errors,
    before_selection,
)
from adjustplan.plan.stress_schema import (
    BinaryConfounder,
    Distribution,
    MisclassifiedExposure,
    MisclassifiedOutcome,
    Probability,
    Selection,
)

Bias = BinaryConfounder | MisclassifiedExposure | MisclassifiedOutcome | Selection
KINDS: dict[type[Bias], str] = {
    BinaryConfounder: "unmeasured confounder",
    MisclassifiedExposure: "misclassified exposure",
    MisclassifiedOutcome: "misclassified outcome",
    Selection: "selection",
}


@dataclass(frozen=True, slots=True)
class Simulated:
    """What is left of the estimate without a bias.

    Attributes
    ----------
    name, kind : str
    draws, impossible : int
        How many draws, and how many of them could not have made the data; these are left out.
    seed : int
    systematic, total : Moved or None
        Median, 2.5th and 97.5th percentile from the bias alone, and with random error as well; None where no draw is
        possible.
    """

    name: str
    kind: str
    draws: int
    impossible: int
    seed: int
    systematic: Moved | None
    total: Moved | None

    @property
    def share_impossible(self) -> float:
        """The share of draws that could not have made the data."""
        return self.impossible / self.draws


def simulate(observed: Observed, bias: Bias, draws: int, seed: int) -> Simulated:
    """The estimate without a bias, over draws from its distributions.

    Parameters
    ----------
    observed : Observed
        The estimate; misclassification and selection probabilities need its table.
    bias : BinaryConfounder, MisclassifiedExposure, MisclassifiedOutcome or Selection
    draws, seed : int
        The random numbers depend on the seed, the kind and the name of the bias, and on nothing else.

    Raises
    ------
    NotEstimableError
        If the bias cannot be worked out for this measure.
    """
    kind = KINDS[type(bias)]
    generator = np.random.default_rng([seed, zlib.crc32(f"{kind}: {bias.name}".encode())])
    normal = generator.standard_normal((5, draws))
    value = observed.estimate
    if observed.is_ratio:
        left = value / _factor(observed, bias, normal[:4])
        good = np.isfinite(left) & (left > 0)
        with np.errstate(over="ignore"):
            whole = left[good] * np.exp(-observed.standard_error * normal[4, good])
    else:
        left = value - _shift(observed, bias, normal[:4])
        good = np.isfinite(left)
        whole = left[good] - observed.standard_error * normal[4, good]
    impossible = draws - int(good.sum())
    if impossible == draws:
        return Simulated(bias.name, kind, draws, impossible, seed, None, None)
    return Simulated(bias.name, kind, draws, impossible, seed, _percentiles(left[good]), _percentiles(whole))


def _percentiles(values: Floats) -> Moved:
    with np.errstate(invalid="ignore"):
        low, middle, high = np.percentile(values, [2.5, 50, 97.5])
    if not np.isfinite([low, middle, high]).all():
        message = "The standard error of the estimate is too large for the arithmetic."
        raise NotEstimableError("stress-unfit", message, "Look for rare levels in the data.")
    return Moved(float(middle), float(low), float(high))


def _factor(observed: Observed, bias: Bias, normal: Floats) -> Floats:
    """By what the bias multiplies a ratio; nan where the draw is impossible."""
    if isinstance(bias, BinaryConfounder):
        if bias.outcome_ratio is None:
            raise _unfit(observed, "a confounder's outcome_difference", "Give outcome_ratio.")
        return bias_factor(*_drawn((bias.among_exposed, bias.among_reference, bias.outcome_ratio), normal))
    if isinstance(bias, Selection) and bias.factor is not None:
        return _drawn((bias.factor,), normal)[0]
    before, after = _tables(observed, bias, normal)
    truly = np.where(before.possible(observed.measure), before.measured(observed.measure), np.nan)
    return np.asarray(after / truly)


def _shift(observed: Observed, bias: Bias, normal: Floats) -> Floats:
    """What the bias adds to a difference; nan where the draw is impossible."""
    if isinstance(bias, BinaryConfounder):
        exposed, reference = _drawn((bias.among_exposed, bias.among_reference), normal)
        if bias.outcome_difference is not None:
            return _drawn((bias.outcome_difference,), normal[2:])[0] * (exposed - reference)
        if observed.risks is None or bias.outcome_ratio is None:
            raise _unfit(observed, "a confounder's outcome_ratio without the two risks", "Give outcome_difference.")
        # among the exposed: without exposure their risk would have been that of the reference group, times the factor
        return observed.risks[1] * (bias_factor(exposed, reference, _drawn((bias.outcome_ratio,), normal[2:])[0]) - 1)
    if isinstance(bias, Selection) and bias.factor is not None:
        raise _unfit(observed, "a selection factor", "Give the four probabilities.")
    before, after = _tables(observed, bias, normal)
    return np.where(before.possible(observed.measure), after - np.asarray(before.measured(observed.measure)), np.nan)


def _tables(observed: Observed, bias: Bias, normal: Floats) -> tuple[TwoByTwo, float]:
    """The tables before the bias, and the crude measure of the table that is observed."""
    measure, table = observed.measure, observed.table
    if measure not in TABLE_MEASURES or table is None:
        raise _unfit(observed, f"{KINDS[type(bias)]} without a two-by-two table", "Take it out of [stress].")
    if not table.possible(measure):
        message = f"The crude two-by-two table has no {measure} to correct, because a cell of it is empty."
        raise NotEstimableError("stress-unfit", message, "Merge rare levels, or take it out of [stress].")
    if isinstance(bias, Selection):
        told = [probability for probability in bias.probabilities if probability is not None]
        first, second, third, fourth = _drawn(told, normal)
        before = before_selection(table, (first, second, third, fourth))
    elif isinstance(bias, MisclassifiedExposure):
        se = _pair(bias.sensitivity_with_outcome, bias.sensitivity, normal[:2], bias.correlation)
        sp = _pair(bias.specificity_with_outcome, bias.specificity, normal[2:], bias.correlation)
        before = before_exposure_errors(table, se, sp)
    elif isinstance(bias, MisclassifiedOutcome):
        se = _pair(bias.sensitivity_in_exposed, bias.sensitivity, normal[:2], bias.correlation)
        sp = _pair(bias.specificity_in_exposed, bias.specificity, normal[2:], bias.correlation)
        before = before_outcome_errors(table, se, sp)
    else:
        raise TypeError(f"{type(bias).__name__} does not act on a table")
    return before, float(table.measured(measure))


def _drawn(distributions: tuple[Distribution, ...] | list[Probability], normal: Floats) -> list[Floats]:
    return [quantile(each, together(row, row, 1)[0]) for each, row in zip(distributions, normal, strict=False)]


def _pair(first: Probability | None, second: Probability, normal: Floats, correlation: float) -> tuple[Floats, Floats]:
    """The values in the two groups; one value for both where the first has none of its own."""
    of_second, of_first = together(normal[0], normal[1], correlation)
    others = quantile(second, of_second)
    return (others if first is None else quantile(first, of_first)), others


def _unfit(observed: Observed, what: str, remedy: str) -> NotEstimableError:
    return NotEstimableError("stress-unfit", f"A {observed.measure} cannot be corrected for {what}.", remedy)
