"""Models that need rows: each is given the atoms of the data, and its contrast is read off.

Cox regression, conditional logistic regression and negative binomial regression do not reduce to the moments of
covariate patterns. They get *atoms*, one line for each kind of person with the number of people, and go through
``rows``. Firth's penalised logistic regression does run on patterns, but has an interval of its own making, and so is
called from here too.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from adjustplan.data import Floats, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.collinearity import without_collinearity
from adjustplan.estimate.matrix import ModelMatrix, model_matrix
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.penalised import penalised_logistic
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.results import NORMAL_QUANTILE, Estimate
from adjustplan.estimate.rows.conditional_logistic import columns_within_sets, conditional_logistic
from adjustplan.estimate.rows.cox import columns_within_risk_sets, cox
from adjustplan.estimate.rows.negative_binomial import negative_binomial
from adjustplan.estimate.rows.result import RowRegression
from adjustplan.plan.analysis_faults import ROW_MODELS


@dataclass(frozen=True, eq=False)
class RowFit:
    """A model on rows, with what it was fitted to.

    Attributes
    ----------
    value, standard_error : float
        The logarithm of the ratio.
    lower, upper : float
        Its 95 % limits, on the same scale.
    result : RowRegression or None
        None for the penalised model.
    matrix : ModelMatrix
        Columns of the model; without intercept where the model has none.
    event, counts : array, shape (rows,)
        Outcome of each row, and people in it.
    time, entry : array of float or None, shape (rows,)
    stratum, cluster : array of int or None, shape (rows,)
    findings : tuple of Finding
    """

    value: float
    standard_error: float
    lower: float
    upper: float
    result: RowRegression | None
    matrix: ModelMatrix
    event: Floats
    counts: NDArray[np.int64]
    time: Floats | None = None
    entry: Floats | None = None
    stratum: NDArray[np.intp] | None = None
    cluster: NDArray[np.intp] | None = None
    findings: tuple[Finding, ...] = ()

    def estimate(self) -> Estimate:
        """The ratio with its interval; NotEstimableError where it is too large for the arithmetic."""
        with np.errstate(over="ignore"):
            numbers = [float(np.exp(value)) for value in (self.value, self.lower, self.upper)]
        if not all(map(math.isfinite, [*numbers, self.standard_error])) or numbers[0] == 0:
            message = "The ratio or its interval is too large for the arithmetic."
            remedy = "Look for rare levels, or another unit of the exposure."
            raise NotEstimableError("estimate-overflow", message, remedy)
        return Estimate(numbers[0], numbers[1], numbers[2], self.standard_error)


def needs_rows(setting: Setting) -> bool:
    """Whether the planned model runs on atoms that are not pooled."""
    return setting.way == "regression" and setting.model in ROW_MODELS


def has_own_interval(setting: Setting) -> bool:
    """Whether the model is called from here."""
    return needs_rows(setting) or (setting.way == "regression" and setting.model == "penalised logistic")


def fit_rows(patterns: Patterns, setting: Setting, members: Sequence[str], modifier: str | None = None) -> RowFit:
    """Fit the planned model.

    Parameters
    ----------
    patterns : Patterns
        Atoms (patterns will do for the penalised model) that are complete for the exposure and ``members``.
    setting : Setting
    members : sequence of str
    modifier : str, optional
        A member whose products with the exposure are in the model.

    Raises
    ------
    NotEstimableError
        If there is no estimate.
    """
    strata = [name for name in members if setting.forms[name] == "stratum"]
    others = [name for name in members if name not in strata]
    matrix = model_matrix(patterns, setting.exposure, setting.coding, setting.forms, others, modifier)
    if setting.model == "penalised logistic":
        return _penalised(patterns, setting, matrix)
    if setting.model == "negative binomial":
        return _negative_binomial(patterns, setting, matrix)
    matrix = matrix.keep(np.arange(1, matrix.columns.shape[1]))
    if setting.model == "cox":
        return _cox(patterns, setting, matrix, strata)
    return _conditional(patterns, setting, matrix)


def _penalised(patterns: Patterns, setting: Setting, matrix: ModelMatrix) -> RowFit:
    matrix, said = without_collinearity(matrix, matrix.columns, patterns, setting)
    found = penalised_logistic(matrix.columns, patterns.moments.weight, patterns.mean, matrix.contrast)
    return RowFit(
        found.estimate,
        found.standard_error,
        found.lower,
        found.upper,
        None,
        matrix,
        patterns.mean,
        patterns.moments.people,
        findings=(*matrix.findings, *said),
    )


def _negative_binomial(patterns: Patterns, setting: Setting, matrix: ModelMatrix) -> RowFit:
    matrix, said = without_collinearity(matrix, matrix.columns, patterns, setting)
    outcome, people, cluster = patterns.mean, patterns.moments.people, _cluster(patterns)
    if not np.allclose(outcome, np.round(outcome), rtol=0, atol=1e-9):
        message = "A negative binomial model is for counts, but the outcome has values between whole numbers."
        raise NotEstimableError("estimate-no-count", message, 'Plan model = "poisson", which needs a mean only.')
    result = negative_binomial(
        matrix.columns,
        np.round(outcome),
        patterns.moments.time,
        people,
        variance=setting.variance,
        cluster=cluster,
        variables=matrix.variables,
    )
    return _read(result, matrix, patterns, said, cluster=cluster)


def _cox(patterns: Patterns, setting: Setting, matrix: ModelMatrix, strata: Sequence[str]) -> RowFit:
    time = patterns.keys["time"].to_numpy(dtype=np.float64)
    entry = patterns.keys["entry"].to_numpy(dtype=np.float64) if "entry" in patterns.keys else None
    stratum = _numbered(patterns.values.groupby(list(strata), sort=True).ngroup()) if strata else None
    event, people, cluster = patterns.mean, patterns.moments.people, _cluster(patterns)
    apart = columns_within_risk_sets(matrix.columns, time, event, entry=entry, stratum=stratum, counts=people)
    matrix, said = without_collinearity(matrix, apart, patterns, setting)
    result = cox(
        matrix.columns,
        time,
        event,
        entry=entry,
        stratum=stratum,
        ties=setting.ties,
        variance=setting.variance,
        cluster=cluster,
        counts=people,
        variables=matrix.variables,
    )
    return _read(result, matrix, patterns, said, time, entry, stratum, cluster)


def _conditional(patterns: Patterns, setting: Setting, matrix: ModelMatrix) -> RowFit:
    line = np.repeat(np.arange(len(patterns)), patterns.moments.people)
    event = patterns.mean[line]
    matched, cluster = patterns.keys["matched_set"].to_numpy()[line], _cluster(patterns)
    cluster = None if cluster is None else cluster[line]
    matrix = ModelMatrix(
        matrix.columns[line],
        matrix.variables,
        matrix.exposed[line],
        matrix.reference[line],
        matrix.covariates,
        matrix.findings,
    )
    apart = columns_within_sets(matrix.columns, event, matched)
    matrix, said = without_collinearity(matrix, apart, patterns, setting)
    result = conditional_logistic(
        matrix.columns, event, matched, variance=setting.variance, cluster=cluster, variables=matrix.variables
    )
    if result.left_out:
        message = f"{result.left_out} matched sets have no case or no control, and say nothing."
        said.append(Finding("estimate-sets-left-out", message, "Ask why the matching failed there.", "note"))
    found = _read(result, matrix, patterns, said, cluster=cluster)
    ones = np.ones(len(line), dtype=np.int64)
    return RowFit(
        found.value,
        found.standard_error,
        found.lower,
        found.upper,
        result,
        matrix,
        event,
        ones,
        cluster=cluster,
        findings=found.findings,
    )


def _read(
    result: RowRegression,
    matrix: ModelMatrix,
    patterns: Patterns,
    said: Sequence[Finding],
    time: Floats | None = None,
    entry: Floats | None = None,
    stratum: NDArray[np.intp] | None = None,
    cluster: NDArray[np.intp] | None = None,
) -> RowFit:
    value = float(matrix.contrast @ result.coefficients)
    error = math.sqrt(float(matrix.contrast @ result.covariance @ matrix.contrast))
    return RowFit(
        value,
        error,
        value - NORMAL_QUANTILE * error,
        value + NORMAL_QUANTILE * error,
        result,
        matrix,
        patterns.mean,
        patterns.moments.people,
        time,
        entry,
        stratum,
        cluster,
        (*matrix.findings, *said, *result.findings),
    )


def _cluster(patterns: Patterns) -> NDArray[np.intp] | None:
    if "cluster" not in patterns.keys:
        return None
    return _numbered(pd.factorize(patterns.keys["cluster"], sort=True)[0])


def _numbered(codes: ArrayLike) -> NDArray[np.intp]:
    return np.asarray(codes, dtype=np.intp)
