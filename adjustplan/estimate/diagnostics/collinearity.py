"""Collinearity: what does adjustment cost in precision?

The more of the exposure the covariates foretell, the less is left of it to learn from. With R² the share foretold,
the variance of the effect is 1 / (1 - R²) times what it would be were they unrelated: the *variance inflation factor*.
An exposure of several columns has the generalised factor of Fox and Monette (1992, J Am Stat Assoc 87:178), which
compares the areas of the confidence ellipses; the effect that is asked for, a contrast of these columns, has a factor
of its own. Inflation is no error: an honest interval is wide where the data know little.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.errors import Finding, Severity
from adjustplan.estimate.not_estimable import NotEstimableError

INFLATED = 5.0
"""Factor from which it is noted."""
STRONGLY_INFLATED = 10.0
"""Factor from which it is a warning (common practice, both; O'Brien 2007, Qual Quant 41:673, says why no such number
is a law)."""
_RANK_TOLERANCE = 1e-10


@dataclass(frozen=True, slots=True)
class Inflation:
    """How many times larger a variance is than without correlation.

    Attributes
    ----------
    contrast : float
        For the effect that is asked for.
    generalised : float
        Fox and Monette's factor for all exposure columns together.
    columns : int
        Exposure columns.
    """

    contrast: float
    generalised: float
    columns: int

    @property
    def per_column(self) -> float:
        """The generalised factor to the power 1 / columns, comparable to that of a single column."""
        return float(self.generalised ** (1 / self.columns))


def variance_inflation(columns: Floats, weights: Floats, of_exposure: NDArray[np.bool_], contrast: Floats) -> Inflation:
    """Inflation of the variance of the exposure contrast by the covariates.

    Parameters
    ----------
    columns : array of float, shape (patterns, parameters)
        Model matrix with the intercept first.
    weights : array of float, shape (patterns,)
        People per pattern, or the working weights of the fit.
    of_exposure : array of bool, shape (parameters,)
        Which columns are the exposure's.
    contrast : array of float, shape (parameters,)
        Exposed minus reference; zero outside the columns of the exposure.

    Raises
    ------
    NotEstimableError
        If the covariates determine the exposure.
    ValueError
        If the contrast asks for other columns than the exposure's, or for none.
    """
    if not contrast[of_exposure].any() or contrast[~of_exposure].any():
        raise ValueError("the contrast is one of the exposure's columns")
    root = np.sqrt(weights)[:, None]
    exposure = columns[:, of_exposure] * root
    alone = exposure - _projection(columns[:, :1] * root, exposure)
    lengths = np.linalg.norm(alone, axis=0)
    if not (lengths > 0).all():
        raise _determined()
    alone = alone / lengths
    left = alone - _projection(columns[:, ~of_exposure] * root, alone)
    triangles = [np.asarray(np.linalg.qr(part, mode="r")) for part in (alone, left)]
    if min(map(_smallest, triangles)) < _RANK_TOLERANCE:
        raise _determined()
    scaled = contrast[of_exposure] / lengths
    variances = [float(np.sum(np.linalg.solve(triangle.T, scaled) ** 2)) for triangle in triangles]
    areas = [float(np.sum(np.log(np.abs(np.diag(triangle))))) for triangle in triangles]
    return Inflation(variances[1] / variances[0], float(np.exp(2 * (areas[0] - areas[1]))), int(of_exposure.sum()))


def _projection(onto: Floats, what: Floats) -> Floats:
    """What of ``what`` the columns of ``onto`` foretell, whatever the rank of these."""
    lengths = np.linalg.norm(onto, axis=0)
    left, sizes, _ = np.linalg.svd(onto / np.where(lengths > 0, lengths, 1.0), full_matrices=False)
    space = left[:, sizes > _RANK_TOLERANCE * sizes[0]]
    return np.asarray(space @ (space.T @ what))


def _smallest(triangle: Floats) -> float:
    if triangle.shape[0] < triangle.shape[1]:
        return 0.0
    return float(np.linalg.svd(triangle, compute_uv=False)[-1])


def _determined() -> NotEstimableError:
    message = "The covariates determine the exposure in these rows (collinearity)."
    return NotEstimableError("estimate-collinear", message, "Take one of them out, or get other data.")


def inflation_findings(exposure: str, result: Inflation) -> tuple[Finding, ...]:
    """How much wider the interval is for the covariates, where that is much."""
    if not result.contrast >= INFLATED:
        return ()
    message = (
        f"The covariates foretell “{exposure}” so well that the variance of its effect is {result.contrast:.3g} times"
        f" what it would be without that (its interval {result.contrast**0.5:.2g} times as wide)."
    )
    remedy = "Ask of each covariate whether the graph needs it: causes of the exposure alone cost most."
    severity: Severity = "warning" if result.contrast >= STRONGLY_INFLATED else "note"
    return (Finding("estimate-inflated", message, remedy, severity),)
