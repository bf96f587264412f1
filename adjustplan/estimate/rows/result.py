"""What every model on rows gives back, and the sandwich variance that they share.

The *influence* of a person is by how much the coefficients would move, to first order, if that person were taken
out (with the sign turned round). The squares of the influences of independent people, added up, are the robust
variance (Huber 1967; White 1980; for Cox regression Lin and Wei 1989, J Am Stat Assoc 84:1074). If people come in
clusters, the influences are added up within each cluster first. And the products of the influences that the same
people have on two models are the covariance between these models.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.identify.showing import list_text

RowVariance = Literal["model", "robust", "cluster"]
Labels = NDArray[Any]


@dataclass(frozen=True, eq=False)
class RowRegression:
    """A regression on rows.

    Attributes
    ----------
    coefficients : array of float, shape (parameters,)
        On the scale of the linear predictor: log hazard, odds or rate ratios.
    covariance : array of float, shape (parameters, parameters)
        Of the kind that was asked for.
    converged : bool
        Always True: a model that does not converge raises.
    rows : int
        People, counted with their counts.
    events : int or None
        People with the event, or cases; None for a model of counts.
    log_likelihood : float
        At the coefficients; a partial or conditional one where the model has that.
    influence : array of float, shape (rows given, parameters)
        Influence of one person of each row (with the row's weight, without its count).
        In a conditional logistic model a matched set has an influence, not a person: it stands at the set's
        first row, and the other rows have zero.
    dispersion : float or None
        Of a negative binomial model: variance = mean + dispersion × mean².
    left_out : int
        Matched sets that say nothing, because they have no case or no control.
    findings : tuple of Finding
        What to know about the fit.
    """

    coefficients: Floats
    covariance: Floats
    converged: bool
    rows: int
    events: int | None
    log_likelihood: float
    influence: Floats
    dispersion: float | None = None
    left_out: int = 0
    findings: tuple[Finding, ...] = ()


def sandwich(influence: Floats, counts: Floats | None = None, cluster: Labels | None = None) -> Floats:
    """The robust covariance: squares of the influences, added up over people or clusters.

    Parameters
    ----------
    influence : array of float, shape (rows, parameters)
    counts : array of float, shape (rows,), optional
        People per row.
    cluster : array, shape (rows,), optional
        Cluster of each row; all people of a row are in it. Without it, people are independent.

    Notes
    -----
    No small-sample factor (HC0).
    """
    weight = np.ones(len(influence)) if counts is None else counts
    if cluster is None:
        return np.asarray(influence.T @ (influence * weight[:, None]))
    _, place = np.unique(cluster, return_inverse=True)
    sums = np.zeros((int(place.max()) + 1, influence.shape[1]))
    np.add.at(sums, place, influence * weight[:, None])
    return np.asarray(sums.T @ sums)


def chosen_covariance(
    variance: RowVariance, model: Floats, influence: Floats, counts: Floats | None, cluster: Labels | None
) -> Floats:
    """The model-based, robust or cluster-robust covariance."""
    if variance == "model":
        return model
    if variance == "cluster" and cluster is None:
        raise ValueError("a cluster-robust variance needs the cluster of each row")
    return sandwich(influence, counts, cluster if variance == "cluster" else None)


def standardised(columns: Floats, weight: Floats) -> tuple[Floats, Floats]:
    """Columns shifted to mean 0 and scaled to standard deviation 1; and these standard deviations."""
    centred = columns - np.average(columns, axis=0, weights=weight)
    scale = np.sqrt(np.average(centred**2, axis=0, weights=weight))
    scale = np.where(scale > 0, scale, 1.0)
    return centred / scale, scale


def separation(variables: Sequence[str], involved: NDArray[np.bool_], what: str) -> NotEstimableError:
    """The refusal of a model whose likelihood rises for ever."""
    names = _named(variables, involved)
    verb = "predicts" if len(names) == 1 else "predict"
    message = f"{_listed(names)} {verb} without exception {what} (separation); no finite estimate."
    remedy = "Merge levels with few rows, state a simpler form, or adjust for less."
    return NotEstimableError("estimate-separation", message, remedy)


def no_convergence() -> NotEstimableError:
    """The refusal of a model whose iterations do not settle."""
    return NotEstimableError(
        "estimate-no-convergence", "The model did not converge.", "Look for rare levels and extreme values."
    )


def collinear(variables: Sequence[str], involved: NDArray[np.bool_], where: str) -> NotEstimableError:
    """The refusal of a model with a combination of columns that does not vary where it would have to."""
    names = _named(variables, involved)
    message = f"{_listed(names)} or a combination of them does not vary {where} (collinearity)."
    return NotEstimableError("estimate-collinear", message, f"Take {_listed(names)} out of the model.")


def _named(variables: Sequence[str], involved: NDArray[np.bool_]) -> list[str]:
    if not variables:
        return []
    return list(dict.fromkeys(variables[place] for place in np.flatnonzero(involved).tolist() if variables[place]))


def _listed(names: Sequence[str]) -> str:
    return list_text([f"“{name}”" for name in names]) if names else "Some variables"
