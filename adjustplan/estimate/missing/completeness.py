"""Weighting complete people up to stand for those who are not.

If people with values V are complete with probability P(V), each complete one stands for 1 / P(V) people. Where V
holds all that decides who is complete and is known of everybody, the weighted complete people are like the whole
population (Horvitz and Thompson 1952, JASA 47:663; Seaman and White 2013, Stat Methods Med Res 22:278). P comes
from a logistic regression of being complete on the variables that nobody lacks; the outcome and the exposure
belong among them when they are complete.

That P is estimated makes the weighted estimate *more* precise, not less: what the weights learn about V takes noise
out. The influence of each person on the estimate loses its projection on their scores in the model of P (Robins,
Rotnitzky and Zhao 1994, JASA 89:846); :meth:`CompleteWeights.learnt` gives that projection.

Where some values of V always go with complete records, P is 1 there and their weight is 1. Where they never do, nobody
can stand for these people, and there is no estimate.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from adjustplan.data import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.existence import independent_columns, separating_direction
from adjustplan.estimate.kernel import FAMILIES, regress
from adjustplan.estimate.missing.coding import Entry, code, predictors
from adjustplan.estimate.not_estimable import NotEstimableError

_RARE = 0.05
_FAR = 15.0
_STRICT = 1e-6


@dataclass(frozen=True, eq=False)
class CompleteWeights:
    """Weights of complete cells, and what corrects a variance for their having been estimated.

    Attributes
    ----------
    weights : array of float, shape (cells,)
        1 / probability; 0 for incomplete cells.
    probabilities : array of float, shape (cells,)
        Of being complete; exactly 1 where everybody alike is.
    scores : array of float, shape (cells, parameters)
        Of one person of each cell: (complete - probability) times the columns; 0 where the probability is 1.
    information : array of float, shape (parameters, parameters)
        Sum over people of probability (1 - probability) x x'.
    coefficients : array of float, shape (parameters,)
    kept : array of int, shape (parameters,)
        The columns of the design that the model has; the others follow from these.
    findings : tuple of Finding
    """

    weights: Floats
    probabilities: Floats
    scores: Floats
    information: Floats
    coefficients: Floats
    kept: NDArray[np.intp]
    findings: tuple[Finding, ...] = ()

    def learnt(self, sums: Floats) -> Floats:
        """What estimating the weights takes from each person's influence.

        Parameters
        ----------
        sums : array of float, shape (cells,) or (cells, estimates)
            Influence with the weights taken as known, summed over the people of each cell (0 in incomplete cells).

        Returns
        -------
        array of float, of the same shape
            To be subtracted from the influence of every person of a cell, incomplete ones included.
        """
        if not len(self.kept):
            return np.zeros_like(sums)
        return np.asarray(self.scores @ np.linalg.solve(self.information, self.scores.T @ sums))


def fully_observed(values: pd.DataFrame, counts: ArrayLike, names: Sequence[str]) -> tuple[str, ...]:
    """Those of ``names`` that nobody lacks and that are not the same in everybody."""
    seen = values[np.asarray(counts) > 0]
    return tuple(name for name in names if seen[name].notna().all() and seen[name].nunique() > 1)


def completeness_design(values: pd.DataFrame, counts: ArrayLike, entries: Mapping[str, Entry]) -> Floats:
    """The columns of the model of being complete, shape (cells, parameters), intercept first.

    Parameters
    ----------
    values : pandas.DataFrame, shape (cells, variables)
    counts : array of int, shape (cells,)
    entries : mapping of str to {"category", "linear"}
        How each fully observed variable enters; may be empty.
    """
    people = np.asarray(counts, dtype=np.int64)
    coded = [code(values[name], people, entry) for name, entry in entries.items()]
    codes = np.column_stack([places for places, _ in coded]) if coded else np.zeros((len(people), 0), dtype=np.int64)
    return predictors([coding for _, coding in coded], codes)


def complete_weights(design: Floats, counts: ArrayLike, complete: NDArray[np.bool_]) -> CompleteWeights:
    """Weights 1 / P(complete | V) for the complete cells.

    Parameters
    ----------
    design : array of float, shape (cells, parameters)
        Columns of V, an intercept first; known for every cell. It may be collinear.
    counts : array of int, shape (cells,)
        People.
    complete : array of bool, shape (cells,)

    Raises
    ------
    NotEstimableError
        If nobody is complete, if nobody with some values of V is, or if the model cannot be fitted.
    """
    people = np.asarray(counts, dtype=np.float64)
    if not people[complete].sum() > 0:
        message = "Nobody has a value for everything the model needs, so nobody can be weighted up."
        raise NotEstimableError("complete-nobody", message, "Choose a set that the data can serve.")
    # people who agree in V are one line of the model, complete or not
    distinct, group = np.unique(design, axis=0, return_inverse=True)
    size = np.bincount(group, weights=people, minlength=len(distinct)).astype(np.float64)
    share = np.bincount(group, weights=people * complete, minlength=len(distinct)) / np.maximum(size, 1e-300)
    certain, kept, coefficients = _fit(distinct, size, share)
    columns = design[:, kept]
    probabilities = np.where(certain[group], 1.0, _logistic(columns @ coefficients))
    scores = (complete - probabilities)[:, None] * columns
    scores[certain[group]] = 0.0
    information = columns.T @ (columns * (people * probabilities * (1 - probabilities))[:, None])
    weights = np.where(complete, 1 / probabilities, 0.0)
    findings = _findings(people, complete, probabilities, design)
    return CompleteWeights(weights, probabilities, scores, information, coefficients, kept, tuple(findings))


def _fit(distinct: Floats, size: Floats, share: Floats) -> tuple[NDArray[np.bool_], NDArray[np.intp], Floats]:
    """Which lines are surely complete; the columns and coefficients of the model among the others."""
    certain = size == 0
    while True:
        free = ~certain
        if share[free].min(initial=1.0) == 1.0:
            return certain | free, np.zeros(0, dtype=np.intp), np.zeros(0)
        kept = independent_columns(distinct[free], size[free])
        columns = distinct[free][:, kept]
        fitted = regress(columns, size[free], share[free], FAMILIES["logistic"])
        if fitted.converged and float(np.abs(columns @ fitted.coefficients).max()) < _FAR:
            return certain, kept, fitted.coefficients
        direction = separating_direction(columns, share[free], FAMILIES["logistic"])
        if direction is None:
            if fitted.converged:
                return certain, kept, fitted.coefficients
            message = "The model of who is complete found no best estimate."
            raise NotEstimableError("complete-no-convergence", message, "Group rare levels of the covariates.")
        along = columns @ direction
        along = along / np.abs(along).max()
        if (along < -_STRICT).any():
            alone = int(size[free][along < -_STRICT].sum())
            message = (
                f"{alone} people have values of the fully observed variables with which nobody is complete, so no"
                " weight can make others stand for them."
            )
            remedy = 'Group rare levels, or use missing = "imputation", which borrows from other people.'
            raise NotEstimableError("complete-separation", message, remedy)
        certain[np.flatnonzero(free)[along > _STRICT]] = True


def _logistic(predictor: Floats) -> Floats:
    from scipy.special import expit

    return np.asarray(expit(predictor))


def _findings(people: Floats, complete: NDArray[np.bool_], probabilities: Floats, design: Floats) -> list[Finding]:
    number = people.sum()
    if people[complete].sum() == number:
        message = "Nobody lacks a value that the model needs, so all weights are 1."
        return [Finding("complete-everybody", message, 'Use missing = "complete cases".', "note")]
    if not (np.ptp(design, axis=0) > 0).any():
        message = "No variable is known of everybody, so all complete people weigh the same, as in complete cases."
        return [
            Finding("complete-constant", message, 'Use missing = "imputation" to learn from the others.', "warning")
        ]
    rare = probabilities < _RARE
    if not people[rare].sum() > 0:
        return []
    weights = people[complete] / probabilities[complete]
    effective = weights.sum() ** 2 / (weights / probabilities[complete]).sum()
    observed, smallest = int(people[complete].sum()), probabilities[people > 0].min()
    message = (
        f"{int(people[rare].sum())} of {int(number)} people had a chance of being complete below {_RARE:.0%}"
        f" (the smallest is {smallest:.2g}); the largest weight is"
        f" {(1 / probabilities[complete & (people > 0)]).max():.3g}, and the {observed} complete people"
        f" count like {effective:.0f}."
    ).replace("%", " %")
    remedy = "Group rare levels of the fully observed variables, or use imputation beside it."
    return [Finding("complete-rare", message, remedy, "warning")]
