"""Whether an estimate exists at all: collinearity and separation, found exactly.

*Collinearity*: two covariates say the same, or the exposure is a sum of covariates. If the exposure is part
of it, the data cannot tell its effect from theirs. If only covariates are, they adjust as well as one of them
alone would, and the effect of the exposure is what it is whichever of them is kept.

*Separation*: some combination of exposure and covariates predicts the outcome without exception in part of
the data (nobody at a small site fell ill). The likelihood then rises for ever as a coefficient runs to
infinity; a program that iterates stops somewhere and prints a number without meaning. For a logistic model
there is an estimate exactly when no direction b exists with x'b ≥ 0 for everyone with the outcome, x'b ≤ 0
for everyone without, and one of these strict (Albert and Anderson 1984); for a log-linear model the people
with the outcome must have x'b = 0 (Santos Silva and Tenreyro 2010). A linear programme decides it (Konis
2007).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.kernel import Family, Regression

_RANK_TOLERANCE = 1e-10
_PART_TOLERANCE = 1e-6
_FAR = 15.0  # a fitted probability this far out on its scale: three in ten million


def null_directions(columns: Floats, rows: Floats | None = None) -> Floats:
    """Directions b with X b = 0, as columns of length 1; shape (parameters, how many there are).

    Every column of X is first scaled to length 1, so that no unit of measurement decides what is small.
    """
    weighted = columns if rows is None else columns * np.sqrt(rows)[:, None]
    lengths = np.linalg.norm(weighted, axis=0)
    lengths[lengths == 0] = 1.0
    triangle = np.asarray(np.linalg.qr(weighted / lengths, mode="r"))
    width = columns.shape[1]
    square = np.zeros((width, width))
    square[: triangle.shape[0]] = triangle
    _, sizes, directions = np.linalg.svd(square)
    null = directions[sizes <= _RANK_TOLERANCE * sizes[0]].T / lengths[:, None]
    return np.asarray(null / np.maximum(np.linalg.norm(null, axis=0), 1e-300))


def independent_columns(columns: Floats, rows: Floats) -> NDArray[np.intp]:
    """The places of a largest set of linearly independent columns, in order (pivoted QR)."""
    from scipy.linalg import qr

    weighted = columns * np.sqrt(rows)[:, None]
    lengths = np.linalg.norm(weighted, axis=0)
    triangle, pivots = qr(weighted / np.where(lengths > 0, lengths, 1.0), mode="r", pivoting=True)
    size = np.abs(np.diag(triangle))
    return np.sort(pivots[: int(np.sum(size > _RANK_TOLERANCE * size[0]))])


def parts(directions: Floats) -> NDArray[np.bool_]:
    """Which columns take part in some of these directions."""
    return np.asarray((np.abs(directions) > _PART_TOLERANCE * np.abs(directions).max()).any(axis=1))


def looks_separated(regression: Regression) -> bool:
    """Whether a fit shows signs of separation.

    Under separation a coefficient grows by about one in every step, so the iterations either do not settle or
    end only where fitted means reach the edge of the arithmetic; a fit that settled away from there is none.
    """
    if regression.family.name == "linear":
        return False
    if not regression.converged:
        return True
    edge = np.exp(-_FAR)
    at_edge = regression.lowest < edge or (regression.family.name == "logistic" and regression.highest > 1 - edge)
    return bool(at_edge) or bool(np.abs(regression.coefficients).max() > 2 * _FAR)


def separating_direction(columns: Floats, mean: Floats, family: Family) -> Floats | None:
    """A direction that separates, or None when the maximum likelihood estimate exists.

    Parameters
    ----------
    columns : array of float, shape (patterns, parameters)
        Model matrix of full column rank.
    mean : array of float, shape (patterns,)
        Share with the outcome; exactly 0 or 1 where all or none have it.
    family : Family
        Logistic, or one with a logarithmic link.

    Notes
    -----
    Patterns with both outcomes (for a logarithmic link: with any case) force x'b = 0. They leave a
    null space, which is usually empty, and then nothing needs to be solved. Otherwise the programme maximises
    Σ ±x'b over that space with every term between 0 and 1: the optimum is at least 1 when a separating
    direction exists and 0 when none does.
    """
    from scipy.optimize import linprog

    pure = (mean == 0) | (mean == 1) if family.name == "logistic" else mean == 0
    free = columns[~pure]
    space = null_directions(free) if len(free) else np.eye(columns.shape[1])
    if space.shape[1] == 0:
        return None
    gains = (columns[pure] * np.where(mean[pure] == 1, 1.0, -1.0)[:, None]) @ space
    size = np.abs(gains).max()
    if not size > 0:
        return None
    gains = gains / size
    gains[np.abs(gains) < 1e-12] = 0.0
    result = linprog(
        -gains.sum(axis=0),
        A_ub=np.vstack([gains, -gains]),
        b_ub=np.concatenate([np.ones(len(gains)), np.zeros(len(gains))]),
        bounds=(None, None),
        method="highs",
    )
    if result.x is None or result.fun is None or result.fun > -0.5:
        return None
    return np.asarray(space @ result.x)
