"""How the exposure is coded: which two levels are compared, and in which form it enters the model.

The plan's contrast names two levels. They are looked up in the data:

* *Both are levels of the column*: these two are compared. Other levels keep their own indicators in the
  model.
* *A boolean or 0/1 column*: 1 is exposed, and levels that are not in the column ("rotating nights") are only
  words for the documents. "0" and "1", "yes" and "no", "true" and "false" in quotes are taken as the values
  they spell.
* *Numbers with more than two values*: a line, unless a form says otherwise; the effect is that of moving from
  the reference to the exposed value, or of one unit more when the plan has no contrast. When both numbers are
  values in the data and there are at most ten values, as with a dose of 0, 1 or 2, they are categories, which
  assumes less.
* *Numbers with stated cuts*: the group of the exposed value is compared with the group of the reference value.
* *Text*: always categories, and the plan must say which two to compare.
"""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Patterns
from adjustplan.data.checks import show
from adjustplan.errors import DataError, Finding, did_you_mean
from adjustplan.plan import Plan

_MOST_CATEGORIES = 10
_SPELT = {"true": 1.0, "t": 1.0, "yes": 1.0, "y": 1.0, "false": 0.0, "f": 0.0, "no": 0.0, "n": 0.0}


@dataclass(frozen=True, slots=True)
class ExposureCoding:
    """The exposure as the models see it.

    Attributes
    ----------
    form : str
        "category", "linear" or "spline(k)".
    exposed, reference : float or str
        The two values compared, as they stand in the patterns.
    words : tuple of (str, str)
        The two in the plan's words.
    shift : bool
        Whether everybody is compared with themselves one unit lower, in place of two fixed levels.
    findings : tuple of Finding
        Notes on what was assumed.
    """

    form: str
    exposed: float | str
    reference: float | str
    words: tuple[str, str]
    shift: bool = False
    findings: tuple[Finding, ...] = ()

    def groups(self, values: NDArray[Any]) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
        """Who has the exposed and who the reference level; nobody, where the exposure is no category."""
        levels = self.form == "category"
        return np.asarray(values == self.exposed) & levels, np.asarray(values == self.reference) & levels


def code_exposure(plan: Plan, patterns: Patterns) -> ExposureCoding:
    """Decide the coding of the exposure, as the head of this module describes.

    Raises
    ------
    DataError
        If the plan does not say which levels to compare, or names levels that the data do not have.
    """
    exposure, contrast = plan.question.exposure, plan.question.contrast
    kind = patterns.kinds[exposure]
    levels: list[float | str] = list(patterns.levels(exposure).index)
    binary = kind != "text" and set(levels) <= {0.0, 1.0}
    form = plan.analysis.forms.get(exposure)
    if contrast is None:
        if form is not None and form.startswith("cut"):
            raise _refusal(plan, f"The exposure “{exposure}” is cut into {len(levels)} groups.", "")
        if binary:
            return ExposureCoding("category", 1.0, 0.0, ("1", "0") if kind == "number" else ("true", "false"))
        if kind == "text" or len(levels) == 2 or form == "category":
            raise _refusal(plan, f"The exposure “{exposure}” has the levels {_listed(levels)}.", "")
        note = _note(plan, f"The effect is that of one unit more of “{exposure}”, which enters as {form or 'linear'}.")
        if form not in (None, "linear"):
            raise _refusal(plan, f"“{exposure}” enters as {form}, so one unit more has no single effect.", "")
        return ExposureCoding("linear", 1.0, 0.0, (f"{exposure} + 1", exposure), True, (note,))
    words = (str(contrast.exposed), str(contrast.reference))
    exposed, reference = _value(contrast.exposed, kind == "text"), _value(contrast.reference, kind == "text")
    if form is not None and form.startswith("cut"):
        exposed, reference = (_group(value, cut_points(form)) for value in (exposed, reference))
        form = "category"
    here = [value in levels for value in (exposed, reference)]
    if words[0] == words[1] or (exposed == reference and exposed is not None):
        raise _refusal(plan, f"The contrast compares “{words[0]}” with itself.", "")
    if binary or kind == "text" or len(levels) == 2 or form == "category":
        if all(here) and exposed is not None and reference is not None:
            return ExposureCoding("category", exposed, reference, words)
        if binary and exposed is None and reference is None:
            return ExposureCoding("category", 1.0, 0.0, words)
        strange = words[0] if not here[0] else words[1]
        message = f"“{strange}” is not a level of “{exposure}”, which has {_listed(levels)}."
        raise _refusal(plan, message, did_you_mean(strange, map(str, levels)))
    if not (isinstance(exposed, float) and isinstance(reference, float)):
        message = f"“{exposure}” holds numbers; “{words[0]}” against “{words[1]}” is not two numbers."
        raise _refusal(plan, message, "")
    if form is None and all(here) and len(levels) <= _MOST_CATEGORIES:
        note = _note(plan, f"“{exposure}” enters as categories, one for each of its {len(levels)} values.")
        return ExposureCoding("category", exposed, reference, words, findings=(note,))
    notes = () if form else (_note(plan, f"“{exposure}” enters as linear."),)
    return ExposureCoding(form or "linear", exposed, reference, words, findings=notes)


def _value(level: str | bool | int | float, text: bool) -> float | str | None:
    """A level of the plan as it would stand in the patterns; None for words in place of a number."""
    if text:
        return str(level)
    if not isinstance(level, str):
        return float(level)
    spelt = _SPELT.get(level.strip().casefold())
    if spelt is not None:
        return spelt
    try:
        return float(level)
    except ValueError:
        return None


def cut_points(form: str) -> tuple[float, ...]:
    """The cuts of the form "cut(30, 45)", in rising order; none for other forms."""
    if not form.startswith("cut"):
        return ()
    return tuple(sorted({float(part) for part in form.removeprefix("cut(").removesuffix(")").split(",")}))


def _group(value: float | str | None, cuts: tuple[float, ...]) -> float | str | None:
    """The group that a value of the contrast falls into."""
    return float(bisect_right(cuts, value)) if isinstance(value, float) else None


def _listed(levels: list[float | str]) -> str:
    return f"{len(levels)} levels" if len(levels) > 20 else show(levels)


def _refusal(plan: Plan, message: str, remedy: str) -> DataError:
    key = ("question", "contrast") if plan.question.contrast else ("question", "exposure")
    remedy = remedy or "Say which to compare in [question]: contrast = { exposed = …, reference = … }."
    return DataError(Finding("data-contrast", message, remedy, file=str(plan.path), line=plan.line(*key)))


def _note(plan: Plan, message: str) -> Finding:
    exposure = plan.question.exposure
    remedy = f'State {exposure} = "linear", "category" or "spline(4)" in [analysis.forms] to settle it.'
    line = plan.line("question", "exposure")
    return Finding("estimate-exposure-form", message, remedy, "note", file=str(plan.path), line=line)
