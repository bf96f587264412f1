"""What can be wrong with the columns, said before any model is fitted.

Columns first (are they there, can they be used at all), then values: an outcome coded 1 and 2, an outcome
that never varies, a number column that is text because somebody typed "NA". Nothing is guessed in silence:
what looks like a missing value but is written as a word is reported, with the word, and the remedy is to
leave the cell empty.

No message shows a row. Levels are shown, at most five, and only where a column has few.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from adjustplan.data.patterns import Patterns
from adjustplan.data.reduction import distinct_values, numbers
from adjustplan.data.source import Source
from adjustplan.errors import Finding, Severity, did_you_mean
from adjustplan.plan import Plan
from adjustplan.study import KINDS

if TYPE_CHECKING:
    from adjustplan.plan.places import Key

MISSING_WORDS = frozenset(
    ["na", "n/a", "#n/a", "nan", "null", "nil", "none", "missing", "unknown", ".", "-", "--", "?"]
)
_SHOWN = 5
_FEW = 20


def show(values: Iterable[object]) -> str:
    """Up to five values for a message: ``“a”, “b”, …``; whole numbers without a decimal point."""
    shown = [f"{value:.12g}" if isinstance(value, float) else str(value) for value in values]
    return ", ".join(f"“{value}”" for value in shown[:_SHOWN]) + (", …" if len(shown) > _SHOWN else "")


def check_columns(plan: Plan, source: Source, variables: Iterable[str]) -> Iterator[Finding]:
    """Columns that are missing, ambiguous or of a kind that no model can use; every one is an error."""
    for variable in variables:
        column = plan.column(variable)
        if column not in source.kinds:
            where = "" if column == variable else f" for “{variable}”"
            message = f"The data have no column “{column}”{where}."
            otherwise = f"Name the column of “{variable}” in [analysis.columns]."
            remedy = did_you_mean(column, source.kinds, otherwise)
            yield _at_plan(plan, "data-missing-column", message, remedy, ("analysis", "columns", variable))
        elif column in source.repeated:
            message = f"The header has “{column}” more than once (capitals do not tell columns apart)."
            yield _at_data(source, "data-column-twice", message, "Rename one of the columns.")
        elif source.kinds[column] == "other":
            message = f"“{column}” holds neither numbers, booleans nor text."
            remedy = "Derive a number from it first (from a date, say, the days since a fixed day)."
            yield _at_data(source, "data-unsupported-type", message, remedy)


def check_values(plan: Plan, source: Source, patterns: Patterns) -> Iterator[Finding]:
    """What in the outcome or the exposure makes every model impossible; every one is an error."""
    if patterns.total == 0:
        yield _at_data(source, "data-no-rows", "The data have a header but no rows.", "Export the data again.")
        return
    yield from _check_outcome(plan, source, patterns)
    exposure = plan.question.exposure
    yield from (f for f in check_covariate(plan, source, patterns, exposure) if f.severity == "error")
    levels = len(patterns.levels(exposure))
    if levels < 2:
        column = plan.column(exposure)
        state = "is missing in every row" if levels == 0 else "has the same value in every row"
        message = f"The exposure “{column}” {state}."
        yield _at_data(source, "data-one-level", message, "Without two levels there is nothing to compare.")


def check_covariate(plan: Plan, source: Source, patterns: Patterns, variable: str) -> Iterator[Finding]:
    """What in one covariate makes the models that use it impossible (errors) or questionable (warnings)."""
    column, form = plan.column(variable), plan.analysis.forms.get(variable)
    levels = patterns.levels(variable)
    if patterns.kinds[variable] != "text":
        if np.isinf(levels.index.to_numpy(dtype=np.float64)).any():
            message = f"“{column}” has infinite values."
            yield _at_data(source, "data-infinite", message, "Correct them or leave the cells empty.")
        return
    words = levels[pd.to_numeric(levels.index.to_series(), errors="coerce").isna().to_numpy()]
    blanks = words[[str(word).strip().casefold() in MISSING_WORDS for word in words.index]]
    if form not in (None, "category", "stratum"):
        told = f": {show(words.index)}" if len(words) <= _FEW else ""
        message = f"“{column}” enters as {form} but holds text in {int(words.sum())} rows{told}."
        remedy = "Leave cells without a number empty, or state the form “category”."
        yield _at_data(source, "data-text-numbers", message, remedy)
    elif form is None and 0 < len(blanks) == len(words) < len(levels):
        message = f"“{column}” would be numbers but for {show(blanks.index)} in {int(blanks.sum())} rows."
        remedy = f'If they mean missing, leave them empty; else state {variable} = "category" in [analysis.forms].'
        yield _at_data(source, "data-text-numbers", message, remedy)
    elif len(blanks):
        message = f"{show(blanks.index)} counts as a level of “{column}” in {int(blanks.sum())} rows."
        remedy = "Leave these cells empty if they mean missing."
        yield _at_data(source, "data-missing-word", message, remedy, "warning")


def check_roles(plan: Plan, source: Source) -> Iterator[Finding]:
    """Columns that the analysis needs besides variables: there, of the right kind, and in range."""
    analysis = plan.analysis
    for role in ("person_time", "time", "entry", "weights", "cluster", "matched_set"):
        column = getattr(analysis, role)
        if column is None:
            continue
        key: Key = ("analysis", role)
        kind, numeric = source.kinds.get(column), role in ("person_time", "time", "entry", "weights")
        if kind is None:
            remedy = did_you_mean(column, source.kinds, f"Mend {role} in [analysis].")
            yield _at_plan(plan, "data-missing-column", f"The data have no column “{column}”.", remedy, key)
        elif column in source.repeated:
            message = f"The header has “{column}” more than once (capitals do not tell columns apart)."
            yield _at_data(source, "data-column-twice", message, "Rename one of the columns.")
        elif kind == "other" or (numeric and kind != "number"):
            message = (
                f"“{column}”, the {role} of the analysis, holds no {'numbers' if numeric else 'names or numbers'}."
            )
            yield _at_data(source, "data-unsupported-type", message, "Correct the column, or derive a number from it.")
        elif numeric:
            yield from _check_range(plan, source, role, column)


def _check_range(plan: Plan, source: Source, role: str, column: str) -> Iterator[Finding]:
    """Weights and times are finite and above 0, and follow-up ends after it begins."""
    values = numbers(source, column)
    low = values < 0 if role == "entry" else values <= 0
    wrong = {"range": (low | values.isinf()).sum()}
    end = plan.analysis.time
    if role == "entry" and end is not None and end in source.kinds:
        wrong["order"] = (values >= numbers(source, end)).sum()
    counted = source.table.aggregate(**wrong).execute().iloc[0].fillna(0).astype(int)
    if counted["range"]:
        limit = "below 0" if role == "entry" else "0 or below"
        message = f"“{column}”, the {role} of the analysis, is {limit} or infinite in {counted['range']} rows."
        yield _at_data(source, "data-out-of-range", message, "Correct them, or leave the cells empty.")
    if counted.get("order", 0):
        message = f"Follow-up ends before it begins, or at once, in {counted['order']} rows (“{column}”)."
        yield _at_data(source, "data-out-of-range", message, "Correct the times, or leave the cells empty.")


def _check_outcome(plan: Plan, source: Source, patterns: Patterns) -> Iterator[Finding]:
    outcome, column = patterns.outcome, plan.column(plan.question.outcome)
    kind = KINDS[plan.analysis.measure]
    binary = kind in ("risk", "hazard")
    wanted = "0 and 1" if binary else "numbers"
    if outcome.kind == "text":
        values = distinct_values(source, column, 10 * _FEW)
        words = [value for value in values or () if value.strip() and np.isnan(_number(value))]
        told = f": {show(words)}" if 0 < len(words) <= _FEW else ""
        if values is None or any(value.strip() for value in values):
            message = f"The outcome “{column}” must be {wanted} but holds text{told}."
            remedy = "Write 1 where the outcome occurred and 0 where not" if binary else "Write numbers"
            yield _at_data(source, "data-outcome-text", message, f"{remedy}, and leave missing values empty.")
            return
    if outcome.infinite:
        message = f"The outcome “{column}” is infinite in {outcome.infinite} rows."
        yield _at_data(source, "data-infinite", message, "Correct them or leave the cells empty.")
    elif outcome.observed == 0:
        message = f"The outcome “{column}” is missing in every row."
        yield _at_data(source, "data-all-missing", message, "Check the column and the export.")
    elif outcome.lowest < 0 and (kind == "rate" or plan.analysis.measure == "mean ratio"):
        low = f"{outcome.lowest:.4g}"
        message = f"The outcome “{column}” is as low as {low}, but the {plan.analysis.measure} needs 0 or more."
        yield _at_data(source, "data-out-of-range", message, "Correct the outcome, or estimate another measure.")
    elif outcome.lowest == outcome.highest and kind != "rate":
        message = f"The outcome “{column}” has the same value in every row."
        yield _at_data(source, "data-one-level", message, "Without two levels there is nothing to explain.")
    elif binary and outcome.not_binary:
        codes = distinct_values(source, column, _FEW)
        told = f" but holds {show(codes)}" if codes else f" but has other values in {outcome.not_binary} rows"
        message = f"For the {plan.analysis.measure} the outcome “{column}” must be 0 and 1{told}."
        remedy = (
            "Recode it in the data: 1 where the outcome occurred, 0 where not; the code book says which."
            if codes and len(codes) == 2
            else 'Recode it in the data, or estimate a "mean difference".'
        )
        yield _at_data(source, "data-outcome-codes", message, remedy)


def _number(text: str) -> float:
    try:
        return float(text)
    except ValueError:
        return float("nan")


def _at_data(source: Source, code: str, message: str, remedy: str, severity: Severity = "error") -> Finding:
    return Finding(code, message, remedy, severity, file=source.place)


def _at_plan(plan: Plan, code: str, message: str, remedy: str, key: Key) -> Finding:
    return Finding(code, message, remedy, file=str(plan.path), line=plan.line(*key))
