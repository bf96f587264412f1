"""Newton's method with step-halving, which also tells separation from failure.

Under separation the slope and the curvature of the likelihood die away together, so Newton's step does not shrink
but stays at about 1 for ever, along a direction in which the likelihood rises without end. Whether it does along
that direction is then looked at in the data, so the verdict does not rest on how far the iterations came.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.existence import parts
from adjustplan.estimate.rows.result import no_convergence, separation

_MOST_STEPS = 60
_FIRST_STEPS = 5
_SETTLED = 1e-8  # the step after it is as small as the square of this
DIRECTION_TOLERANCE = 1e-6


@dataclass(frozen=True, eq=False)
class Likelihood:
    """A log-likelihood at some coefficients, with its derivatives.

    Attributes
    ----------
    value : float
    gradient : array of float, shape (parameters,)
    information : array of float, shape (parameters, parameters)
        Minus the second derivatives.
    scores : array of float, shape (rows or sets, parameters), or None
        What each adds to the gradient (in a Cox model: its score residual).
    """

    value: float
    gradient: Floats
    information: Floats
    scores: Floats | None = None


def climb(
    likelihood: Callable[[Floats], Likelihood],
    parameters: int,
    separates: Callable[[Floats], bool],
    variables: tuple[str, ...],
    separated: str,
) -> Floats:
    """Coefficients with the greatest likelihood.

    Parameters
    ----------
    likelihood : function of the coefficients
        Concave.
    parameters : int
    separates : function of a direction
        Whether the likelihood rises for ever along it.
    variables : tuple of str
        The variable behind each parameter, for messages; may be empty.
    separated : str
        What the variables predict under separation, for messages.

    Raises
    ------
    NotEstimableError
        "estimate-separation" or "estimate-no-convergence".
    """
    coefficients = np.zeros(parameters)
    with np.errstate(all="ignore"):
        here = likelihood(coefficients)
        for number in range(_MOST_STEPS):
            try:
                step: Floats = np.asarray(np.linalg.solve(here.information, here.gradient), dtype=np.float64)
            except np.linalg.LinAlgError:
                break
            if number >= _FIRST_STEPS and separates(step):
                raise separation(variables, parts(step[:, None]), separated)
            settled = np.abs(step).max() <= _SETTLED * (1 + np.abs(coefficients).max())
            there = likelihood(coefficients + step)
            slack = 1e-11 * (1 + abs(here.value))
            for _ in range(40):
                if there.value >= here.value - slack:
                    break
                step = step / 2
                there = likelihood(coefficients + step)
            if not there.value >= here.value - slack:
                break
            coefficients, here = coefficients + step, there
            if settled and np.isfinite(here.information).all():
                return coefficients
        if separates(coefficients):
            raise separation(variables, parts(coefficients[:, None]), separated)
    raise no_convergence()
