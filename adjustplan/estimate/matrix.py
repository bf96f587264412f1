"""The model matrix: exposure and covariates as columns of numbers.

The first column is the intercept. A *category* gives one 0/1 column for each level but one (the most
frequent, or for the exposure the reference of the contrast). A *linear* variable gives one column, shifted
and scaled to run around zero, which changes no effect but keeps the arithmetic exact. A *spline(k)* gives k
columns that together draw any smooth curve that is straight beyond the ends: a natural cubic spline with
knots at the lowest and the highest value and at k - 1 quantiles of the rows in between (Harrell 2015,
Regression Modeling Strategies, section 2.4.6).

Three versions of the matrix are kept: as people are, as if everybody were exposed, and as if everybody were at the
reference. The first is fitted; the other two predict. Where the effect is one number on the scale of the linear
predictor, that number is the *contrast*: the coefficients times the difference of a line of the second and the third.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.not_estimable import NotEstimableError

_MOST_NUMBERS = 250_000_000  # two gigabytes of model matrix


@dataclass(frozen=True, eq=False)
class ModelMatrix:
    """The columns of a model, one line per covariate pattern.

    Attributes
    ----------
    columns : array of float, shape (patterns, parameters)
        As people are.
    variables : tuple of str
        The variable behind each column; empty for the intercept. A product of exposure and modifier is the exposure's.
    exposed, reference : array of float, shape (patterns, parameters)
        As if everybody had the exposed, or the reference, level.
    covariates : array of bool, shape (parameters,)
        Which columns the exposure has no part in.
    findings : tuple of Finding
        What was left out or assumed.
    """

    columns: Floats
    variables: tuple[str, ...]
    exposed: Floats
    reference: Floats
    covariates: NDArray[np.bool_]
    findings: tuple[Finding, ...] = ()

    @property
    def contrast(self) -> Floats:
        """Exposed minus reference, shape (parameters,), where it is the same for everybody."""
        return np.asarray(self.exposed[0] - self.reference[0])

    def keep(self, places: NDArray[np.intp]) -> ModelMatrix:
        """The same with some of the columns."""
        return ModelMatrix(
            self.columns[:, places],
            tuple(self.variables[place] for place in places),
            self.exposed[:, places],
            self.reference[:, places],
            self.covariates[places],
            self.findings,
        )


def model_matrix(
    patterns: Patterns,
    exposure: str,
    coding: ExposureCoding,
    forms: Mapping[str, str],
    members: Sequence[str],
    modifier: str | None = None,
) -> ModelMatrix:
    """Build the model matrix of the exposure and the members of a set.

    Parameters
    ----------
    patterns : Patterns
        Of rows that are complete for all of them.
    exposure : str
    coding : ExposureCoding
    forms : mapping of str to str
        "category", "linear" or "spline(k)" of each member.
    members : sequence of str
    modifier : str, optional
        A member whose products with the exposure are added.

    Raises
    ------
    NotEstimableError
        If a level of the contrast has no complete row, a spline has too few values, or the matrix would not fit into
        memory.
    """
    findings: list[Finding] = []
    names = [exposure, *members]
    sizes = sum(_width(patterns, name, forms.get(name, coding.form)) for name in names)
    if sizes * len(patterns) > _MOST_NUMBERS:
        most = max(names, key=lambda name: _width(patterns, name, forms.get(name, coding.form)))
        message = f"The model would need {sizes} columns, most of them for the levels of “{most}”."
        raise NotEstimableError("estimate-too-many-levels", message, "Group its levels, or leave it out.")
    block, ends = _exposure_block(patterns, exposure, coding, findings)
    own: dict[str, Floats] = {}
    for name in members:
        if len(patterns.levels(name)) == 1:
            message = f"“{name}” has one value in all complete rows, so it was left out of this model."
            remedy = "Nothing is lost by it, but ask why it does not vary."
            findings.append(Finding("estimate-constant-covariate", message, remedy, "warning"))
            continue
        own[name] = _block(patterns, name, forms[name], findings)
    modifying = own.get(modifier) if modifier else None
    if modifier and modifying is None and forms[modifier] == "stratum":  # its own effect is in the baseline hazards
        modifying = _block(patterns, modifier, "category", findings)
    count = len(patterns)

    def composed(exposed: Floats) -> Floats:
        parts = [np.ones((count, 1)), exposed]
        if modifying is not None:
            parts += [exposed[:, [place]] * modifying for place in range(exposed.shape[1])]
        return np.hstack([*parts, *own.values()])

    owners = ["", *[exposure] * (block.shape[1] * (1 + (0 if modifying is None else modifying.shape[1])))]
    owners += [name for name, part in own.items() for _ in range(part.shape[1])]
    return ModelMatrix(
        composed(block),
        tuple(owners),
        composed(np.broadcast_to(ends[0], block.shape)),
        composed(np.broadcast_to(ends[1], block.shape)),
        np.array([owner != exposure for owner in owners]),
        tuple(findings),
    )


def _width(patterns: Patterns, name: str, form: str) -> int:
    return len(patterns.levels(name)) if form == "category" else 10


def _block(patterns: Patterns, name: str, form: str, findings: list[Finding]) -> Floats:
    """The columns of one covariate."""
    values = patterns.values[name].to_numpy()
    if form == "category":
        levels = patterns.levels(name)
        return _indicators(values, [level for level in levels.index if level != levels.idxmax()])
    if form == "linear":
        return _standardised(values)[0][:, None]
    return _spline(values, patterns.rows, name, form, np.empty(0), findings)[0]


def _exposure_block(
    patterns: Patterns, exposure: str, coding: ExposureCoding, findings: list[Finding]
) -> tuple[Floats, Floats]:
    """The columns of the exposure, and their values at the exposed and at the reference level.

    Where everybody is moved by one unit from where they are, these values differ from line to line.
    """
    values = patterns.values[exposure].to_numpy()
    levels = list(patterns.levels(exposure).index)
    if coding.form == "category":
        for level, word in zip((coding.exposed, coding.reference), coding.words, strict=True):
            if level not in levels:
                message = f"None of the complete rows has “{word}” as “{exposure}”."
                raise NotEstimableError("estimate-empty-level", message, "Look at which covariate is missing there.")
        others = [level for level in levels if level != coding.reference]
        ends = np.array([[float(level == end) for level in others] for end in (coding.exposed, coding.reference)])
        return _indicators(values, others), ends
    if len(levels) == 1:
        message = f"“{exposure}” has one value in all complete rows."
        raise NotEstimableError("estimate-empty-level", message, "Look at which covariate is missing elsewhere.")
    wanted = np.array([float(coding.exposed), float(coding.reference)])
    if coding.form == "linear":
        column, middle, scale = _standardised(values)
        if coding.shift:
            return column[:, None], np.stack([column + (wanted[0] - wanted[1]) / scale, column])[:, :, None]
        return column[:, None], ((wanted - middle) / scale)[:, None]
    return _spline(values, patterns.rows, exposure, coding.form, wanted, findings)


def _indicators(values: NDArray[np.generic], levels: list[float | str]) -> Floats:
    return np.column_stack([values == level for level in levels]).astype(np.float64)


def _standardised(values: NDArray[np.generic]) -> tuple[Floats, float, float]:
    """The values shifted to the middle of their range, in units of half the range; that middle and that unit."""
    numbers = values.astype(np.float64)
    low, high = float(numbers.min()), float(numbers.max())
    scale = (high - low) / 2
    return (numbers - (low + scale)) / scale, low + scale, scale


def _spline(
    values: NDArray[np.generic], rows: NDArray[np.int64], name: str, form: str, also: Floats, findings: list[Finding]
) -> tuple[Floats, Floats]:
    """A natural cubic spline at the values of the patterns, and at the values ``also``."""
    from formulaic.transforms.cubic_spline import natural_cubic_spline

    numbers = values.astype(np.float64)
    degrees = int(form.removeprefix("spline(").removesuffix(")"))
    distinct, place = np.unique(numbers, return_inverse=True)
    counts = np.bincount(place, weights=rows).astype(np.float64)
    if len(distinct) < degrees + 1:
        message = f"“{name}” has {len(distinct)} values, too few for {form}."
        raise NotEstimableError("estimate-spline-values", message, f"Give {name} another form in [analysis.forms].")
    shares = np.arange(1, degrees) / degrees
    knots = np.unique(_row_quantiles(distinct, counts, shares))
    if len(knots) < degrees - 1 or knots[0] <= distinct[0] or knots[-1] >= distinct[-1]:
        knots = np.quantile(distinct, shares)
        message = f"So many rows share one value of “{name}” that the knots were set by its distinct values."
        remedy = "Draw the curve to see whether it is what you want."
        findings.append(Finding("estimate-spline-knots", message, remedy, "note"))
    basis = natural_cubic_spline(
        np.concatenate([distinct, also]),
        knots=knots,
        lower_bound=distinct[0],
        upper_bound=distinct[-1],
        constraints="center",
    )
    columns = np.column_stack([np.asarray(column, dtype=np.float64) for column in basis.values()])
    return columns[: len(distinct)][place], columns[len(distinct) :]


def _row_quantiles(distinct: Floats, counts: Floats, shares: Floats) -> Floats:
    """Quantiles of the rows, as ``numpy.quantile`` gives them with linear interpolation (type 7)."""
    ends = np.cumsum(counts)
    position = shares * (ends[-1] - 1)
    low, high = np.floor(position), np.ceil(position)
    lower = distinct[np.searchsorted(ends, low, side="right")]
    upper = distinct[np.searchsorted(ends, high, side="right")]
    return np.asarray(lower + (upper - lower) * (position - low), dtype=np.float64)
