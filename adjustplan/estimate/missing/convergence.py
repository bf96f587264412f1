"""Looking at the chains: whether they have settled, and what was odd about their last round.

The chains of different imputations are independent of each other and start at random draws from the observed
values. Once they have settled, their mean no longer moves. So the difference of each chain between its last round
and the one halfway is, over the chains, a sample with mean 0: a t-test tells whether they still drift in one
direction.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.missing.chained import Incomplete, Trace

_SURE = 0.001
_WORTH_SAYING = 0.02  # standard deviations of the variable
_FEWEST = 5
_MANY = 0.02


@dataclass(frozen=True, eq=False)
class Chain:
    """How the imputed values of one variable went from round to round.

    Attributes
    ----------
    variable : str
    missing : float
        Share of people who lack it.
    observed, deviation : float
        Mean and standard deviation of the observed values (of a text: of being at its most frequent level).
    means : array of float, shape (imputations, iterations)
        Mean of the imputed values.
    """

    variable: str
    missing: float
    observed: float
    deviation: float
    means: Floats

    @property
    def imputed(self) -> float:
        """Mean of the imputed values at the end, over the imputations."""
        return float(self.means[:, -1].mean())


def chains(data: Incomplete, traces: Sequence[Trace]) -> tuple[Chain, ...]:
    """The chains of each incomplete variable, in the order in which they are visited."""
    found = []
    for step, place in enumerate(data.order):
        coding = data.codings[place]
        mean = float(np.average(coding.scores, weights=coding.people))
        deviation = float(np.sqrt(np.average((coding.scores - mean) ** 2, weights=coding.people)))
        means = np.stack([trace.means[:, step] for trace in traces])
        found.append(Chain(coding.name, data.missing[coding.name], mean, deviation, means))
    return tuple(found)


def check_traces(data: Incomplete, traces: Sequence[Trace]) -> Iterator[Finding]:
    """What is to be said of imputations once they are made: drift, perfect prediction, donors far away."""
    yield from check_drift(chains(data, traces))
    for name in data.missing:
        augmented = sum(name in trace.augmented for trace in traces)
        if augmented:
            message = (
                f"Other variables predict “{name}” without exception in part of the data ({augmented} of"
                f" {len(traces)} imputations), so a few people who contradict it were added to its imputation model."
            )
            yield Finding("impute-perfect-prediction", message, "Group rare levels if you can.", "note")
        far = [trace.far[name] for trace in traces if name in trace.far]
        if far and np.mean(far) > _MANY:
            message = (
                f"{100 * np.mean(far):.0f} % of the people who lack “{name}” are unlike anybody who has it, so the"
                " values they were given lie too near the middle."
            )
            remedy = "Compare with inverse probability, or draw it from a normal distribution instead of matching."
            yield Finding("impute-far-donors", message, remedy, "warning")


def check_drift(found: Sequence[Chain]) -> Iterator[Finding]:
    """A warning for each variable whose chains still drift."""
    from scipy.special import stdtr

    for chain in found:
        number, rounds = chain.means.shape
        if rounds < 2 or number < _FEWEST:
            continue
        moves = chain.means[:, -1] - chain.means[:, (rounds - 1) // 2]
        drift, error = float(moves.mean()), float(moves.std(ddof=1)) / np.sqrt(number)
        if abs(drift) <= _WORTH_SAYING * chain.deviation or error == 0:
            continue
        chance = 2 * float(stdtr(number - 1, -abs(drift) / error))
        if chance < _SURE / len(found):
            message = (
                f"The imputed values of “{chain.variable}” still drift after {rounds} rounds:"
                f" by {abs(drift) / chain.deviation:.2f} standard deviations in the second half."
            )
            remedy = "State more iterations in [analysis.imputation]."
            yield Finding("impute-not-settled", message, remedy, "warning")
