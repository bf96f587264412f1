"""Multiple imputation: several completed copies of the data, one after the other.

Each copy holds a likely value for everything that is missing, drawn from regressions of each incomplete variable
on all others, the outcome included: a covariate imputed without the outcome would be unrelated to it in the
imputed part, and its confounding would be underestimated (Moons et al. 2006, J Clin Epidemiol 59:1092). The
planned analysis is run on every copy and the results are pooled by Rubin's rules (``pooling``).

It is right when whether a value is missing depends only on what was observed ("missing at random"), and when the
imputation models contain what the analysis contains. So a modifier of the effect needs its product with the
exposure among the predictors.

Imputation number i depends on the data, the seed and i alone: not on how many others there are, nor on the order
of the rows or columns, nor on the process that runs it.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterator, Mapping, Sequence
from itertools import combinations

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike

from adjustplan.errors import Finding
from adjustplan.estimate.missing.chained import Completed, Incomplete, run_chain
from adjustplan.estimate.missing.coding import MISSING, Coding, Entry, Whole, code, pool
from adjustplan.estimate.not_estimable import NotEstimableError

_MOST_PARAMETERS = 2000


def prepare(
    values: pd.DataFrame,
    counts: ArrayLike,
    entries: Mapping[str, Entry],
    *,
    never_imputed: Sequence[str] = (),
    together: Sequence[Sequence[str]] = (),
    normal: Collection[str] = (),
) -> Incomplete:
    """Check cells with missing values and make them ready to be imputed.

    Parameters
    ----------
    values : pandas.DataFrame, shape (cells, variables)
        Exposure, covariates and outcome; numbers as floats, text as text, NaN or None where missing. Columns
        that are not in ``entries`` (a cluster, a matched set) are carried along as they are.
    counts : array of int, shape (cells,)
        People in each cell.
    entries : mapping of str to {"category", "linear"}
        How each variable enters the models of the others, and how it is imputed itself: "linear" numbers with
        more than two values by predictive mean matching, everything else by (multinomial) logistic regression.
    never_imputed : sequence of str
        Variables of ``entries`` that only predict, such as the time at risk; they must have no missing values.
    together : sequence of groups of names
        Variables whose products two by two are predictors too, such as exposure, modifier and outcome;
        names that are not in ``entries`` are passed over.
    normal : collection of str
        Numbers drawn from a normal distribution around their predicted means instead of matched. It reaches where
        donors are rare, but gives values that nobody has, and every person a value of their own: memory then grows
        with the people who lack the variable.

    Returns
    -------
    Incomplete
        With notes and warnings in ``findings``.

    Raises
    ------
    NotEstimableError
        If a variable is missing in everybody, one that is never imputed is missing in anybody, a text is
        "linear", or a model would have more parameters than people or than can be handled.
    """
    people = np.asarray(counts, dtype=np.int64)
    inside = people > 0
    names = [*sorted(entries), *sorted(set(values.columns) - set(entries))]
    columns: list[Whole] = []
    codings: list[Coding] = []
    for name in names:
        entry = entries.get(name, "category")
        if entry == "linear" and not pd.api.types.is_numeric_dtype(values[name].dtype):
            message = f"“{name}” holds words, so it cannot enter an imputation model as linear."
            raise NotEstimableError("impute-text-linear", message, f'State {name} = "category" in [analysis.forms].')
        places, coding = code(values.loc[inside, name], people[inside], entry)
        columns.append(places)
        codings.append(coding)
    codes, people = pool(np.column_stack(columns), people[inside])
    models = sum(name in entries for name in names)
    lacking = {name: int(people[codes[:, place] == MISSING].sum()) for place, name in enumerate(names[:models])}
    total = int(people.sum())
    _refuse(lacking, total, never_imputed)
    incomplete = sorted((name for name in lacking if lacking[name]), key=lambda name: (lacking[name], name))
    order = tuple(names.index(name) for name in incomplete)
    groups = [sorted(set(group) & set(names[:models])) for group in together]
    pairs = sorted({pair for group in groups for pair in combinations(group, 2)})
    products = tuple((names.index(first), names.index(second)) for first, second in pairs)
    findings: list[Finding] = []
    if not incomplete:
        message = "No value is missing, so there was nothing to impute and every copy of the data is the same."
        findings.append(Finding("impute-nothing-missing", message, 'Use missing = "complete cases".', "note"))
    data = Incomplete(
        tuple(map(str, values.columns)),
        tuple(codings),
        models,
        codes,
        people,
        order,
        products,
        frozenset(names.index(name) for name in normal if name in names),
        {name: lacking[name] / total for name in incomplete},
        (),
    )
    for place in order:
        findings += _check_model(data, place)
    return Incomplete(**{**vars(data), "findings": tuple(findings)})


def impute(
    data: Incomplete,
    imputations: int,
    iterations: int,
    seed: int,
    progress: Callable[[int], None] | None = None,
) -> Iterator[Completed]:
    """Complete the data several times, one copy at a time.

    Parameters
    ----------
    data : Incomplete
        From :func:`prepare`.
    imputations, iterations, seed : int
    progress : callable, optional
        Told after each copy how many are done.

    Yields
    ------
    Completed
        Equal cells are pooled, so that memory grows with the number of cells and not of people.

    Raises
    ------
    NotEstimableError
        If the regression of a variable cannot be fitted.
    """
    for number in range(imputations):
        yield impute_one(data, iterations, seed, number)
        if progress is not None:
            progress(number + 1)


def impute_one(data: Incomplete, iterations: int, seed: int, number: int) -> Completed:
    """The copy with this number (from 0), for those who share the copies out to several processes."""
    random = np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=(number,))))
    return run_chain(data, iterations, random)


def _refuse(lacking: Mapping[str, int], total: int, never_imputed: Sequence[str]) -> None:
    for name, number in lacking.items():
        if number == total:
            message = f"“{name}” is missing in everybody, so there is nothing to learn its values from."
            raise NotEstimableError("impute-all-missing", message, "Leave it out, or check its column.")
        if number and name in never_imputed:
            message = f"“{name}” is missing in {number} of {total} people and is not a variable that can be imputed."
            raise NotEstimableError("impute-not-imputable", message, "Complete it, or leave these people out.")


def _check_model(data: Incomplete, place: int) -> Iterator[Finding]:
    """What can be said of the imputation model of one variable before it is fitted."""
    coding = data.codings[place]
    name, levels = coding.name, len(coding.levels)
    seen = data.codes[:, place] != MISSING
    lacked = int(data.counts[~seen].sum())
    if levels == 1:
        message = f"“{name}” has one value wherever it is known, so the {lacked} missing ones were given that value."
        yield Finding("impute-one-level", message, "Leave it out, or ask why it does not vary.", "warning")
        return
    widths = [other.columns.shape[1] * (number != place) for number, other in enumerate(data.codings[: data.models])]
    width = 1 + sum(widths) + sum(widths[first] * widths[second] for first, second in data.products)
    parameters = width if coding.measured else width * (levels - 1)
    if parameters > _MOST_PARAMETERS:
        message = f"The imputation model of “{name}” would have {parameters} parameters."
        raise NotEstimableError("impute-too-many-levels", message, "Group the levels of categories with many.")
    people = int(data.counts[seen].sum())
    if people <= parameters:
        message = f"“{name}” is known of {people} people, too few for an imputation model with {parameters} parameters."
        raise NotEstimableError("impute-few-rows", message, "Group levels, or leave variables out.")
    for number, other in enumerate(data.codings[: data.models]):
        if number == place or other.entry == "linear":
            continue
        column = data.codes[:, number]
        known = np.bincount(column[seen & (column != MISSING)], minlength=len(other.levels))
        needed = np.bincount(
            column[~seen & (column != MISSING)],
            weights=data.counts[~seen & (column != MISSING)],
            minlength=len(other.levels),
        )
        for level in np.flatnonzero((known == 0) & (needed > 0)):
            shown = other.levels[int(level)]
            shown = shown if isinstance(shown, str) else f"{shown:g}"
            message = (
                f"“{name}” is missing in all {int(needed[level])} people with “{other.name}” ="
                f" {shown}, so what they were given was learnt from other people alone."
            )
            yield Finding("impute-no-donors", message, "Say why they should be like the others.", "warning")
