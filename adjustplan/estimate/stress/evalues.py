"""The E-value: how strong unmeasured confounding must be, at least, to explain an estimate away.

Suppose a confounder is related to the exposure by a risk ratio of E and to the outcome by a risk ratio of E, beyond
the covariates adjusted for. The most that it can bias a risk ratio is then E²/(2E − 1). Setting that equal to the bias
that is needed and solving gives the E-value, RR + √(RR (RR − 1)): a confounder that is weaker on both sides cannot do
it, one as strong on both sides could. For a ratio below 1 its inverse is taken. The same for the limit nearest to no
effect says what would be needed for the interval to reach it; where the interval reaches it already, that is 1.
Instead of to no effect, the estimate may be asked to be moved to any value: the needed bias is then the ratio of the
two. (VanderWeele and Ding 2017, Ann Intern Med 167:268.) The other measures are put as risk ratios by
:mod:`~adjustplan.estimate.stress.scales`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from adjustplan.estimate.stress.scales import Position


@dataclass(frozen=True, slots=True)
class EValue:
    """The E-values of an estimate and of its limit.

    Attributes
    ----------
    estimate, limit : float or None
        At least 1, as risk ratios; None where no confounding could move the estimate so far.
    side : {"lower", "upper"}
        The limit that ``limit`` is about.
    factor, limit_factor : float or None
        The bias that is needed, as a risk ratio of at least 1.
    target : float
        The value to which the estimate is moved.
    conversion : str
        How the measure was put as a risk ratio.
    """

    estimate: float | None
    limit: float | None
    side: str
    factor: float | None
    limit_factor: float | None
    target: float
    conversion: str


def evalue(ratio: float) -> float:
    """The E-value of a risk ratio against no effect; a ratio below 1 is inverted."""
    if not 0 < ratio < math.inf:
        raise ValueError(f"a risk ratio is positive and finite, not {ratio}")
    bias = max(ratio, 1 / ratio)
    return bias + math.sqrt(bias * (bias - 1))


def evalues(position: Position, target: float) -> EValue:
    """The E-values of an estimate and of its limit.

    Parameters
    ----------
    position : Position
        Where the estimate stands.
    target : float
        The value to which it is moved, on the scale of the measure: 1 for ratios and 0 for differences to explain the
        estimate away.
    """
    needed = position.needed(target)
    return EValue(
        needed.estimate and evalue(needed.estimate),
        needed.limit and evalue(needed.limit),
        needed.side,
        needed.estimate,
        needed.limit,
        target,
        position.words,
    )
