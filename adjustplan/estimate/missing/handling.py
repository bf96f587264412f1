"""What the plan does about rows that lack a value, and what that costs.

*Complete cases* leaves such rows out. *Inverse probability* leaves them out too, but lets rows like them stand for
them: a complete row counts for all that were as likely to be complete. *Imputation* fills them in, several times
over. Rows that lack the outcome help to impute the covariates, and are then left out of the analysis themselves,
because an imputed outcome adds noise and no news (von Hippel 2007, Sociol Methodol 37:83).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass, replace
from typing import Any

import numpy as np
import pandas as pd

from adjustplan.data import Floats, Moments, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.missing.chained import Trace
from adjustplan.estimate.missing.coding import Entry
from adjustplan.estimate.missing.completeness import complete_weights, completeness_design, fully_observed
from adjustplan.estimate.missing.convergence import check_traces
from adjustplan.estimate.missing.imputation import impute, prepare
from adjustplan.estimate.problem import Projection, Setting
from adjustplan.estimate.results import Estimate, interval_text
from adjustplan.plan.analysis_schema import Imputation, Missing

_OUTCOME, _SEEN, _TIME, _WEIGHT, _HAZARD = "\0outcome", "\0seen", "\0time", "\0weight", "\0hazard"
_KEY = "\0key "


@dataclass(frozen=True)
class Incomplete:
    """What missing values cost, and how they were handled.

    Attributes
    ----------
    handling : {"complete cases", "inverse probability", "imputation"}
    rows_total, complete, used : int
        Rows of the file, those with all that the planned model needs, and those that took part.
    complete_case : Estimate or None
        The planned estimate from complete rows alone, where something else was planned.
    numbers : mapping of str to float
        What the handling has to say of itself: largest weight, effective rows; missing information, imputations.
    findings : tuple of Finding
    """

    handling: Missing
    rows_total: int
    complete: int
    used: int
    complete_case: Estimate | None
    numbers: Mapping[str, float]
    findings: tuple[Finding, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""
        return asdict(self) | {
            "numbers": dict(self.numbers),
            "findings": [finding.to_dict() for finding in self.findings],
        }

    def lines(self) -> list[str]:
        """As text."""
        lines = [f"Missing values: {self.handling}"]
        share = 100 * self.used / self.rows_total
        lines.append(f"  {self.used} of {self.rows_total} rows took part ({share:.3g} %); {self.complete} are complete")
        if self.complete_case:
            lines.append(f"  complete cases alone: {interval_text(self.complete_case)}")
        lines += [f"  {name}: {value:.3g}" for name, value in self.numbers.items()]
        return lines


def weigh_complete(
    patterns: Patterns, setting: Setting, members: Sequence[str]
) -> tuple[Patterns, Projection | None, dict[str, float], tuple[Finding, ...]]:
    """The complete atoms, weighted for those like them that are not complete.

    Parameters
    ----------
    patterns : Patterns
        Atoms of the whole file.
    setting : Setting
    members : sequence of str

    Returns
    -------
    complete : Patterns
        Atoms with a value for everything, their weights multiplied.
    projection : Projection or None
        What estimating the weights takes off a variance.
    numbers : dict
        The largest weight and the effective number of rows.
    findings : tuple of Finding

    Raises
    ------
    NotEstimableError
        If nobody with some values is complete, or the model of being complete cannot be fitted.
    """
    needed = [setting.exposure, *members]
    complete = patterns.is_complete(needed)
    values = patterns.values[needed].assign(**{_OUTCOME: np.where(patterns.observed > 0, patterns.mean, np.nan)})
    known = fully_observed(values, patterns.rows, [*needed, _OUTCOME])
    entries: dict[str, Entry] = {name: _entry(setting, name, patterns) for name in known}
    design = completeness_design(values[list(known)], patterns.rows, entries)
    found = complete_weights(design, patterns.rows, complete)
    kept = patterns.complete(needed, pooled=False)
    weight = found.weights[complete]
    kept = replace(kept, moments=kept.moments.times(weight))
    people = kept.moments.people
    total = float(people @ weight)
    numbers = {"largest weight": float(weight.max()), "effective rows": total**2 / float(people @ weight**2)}
    said = tuple(_without_marks(finding) for finding in found.findings)
    if not len(found.kept):
        return kept, None, numbers, said
    if "cluster" in kept.keys:
        message = "With clusters the weights for being complete are taken as known."
        remedy = "Nothing needs to be done; the interval is rather too wide than too narrow."
        said = (*said, Finding("complete-clusters", message, remedy, "note"))
    projection = Projection(found.scores[complete], np.asarray(np.linalg.inv(found.information)))
    return kept, projection, numbers, said


def completed(
    patterns: Patterns, setting: Setting, variables: Sequence[str], settings: Imputation, *, timed: bool
) -> tuple[Iterator[Patterns], tuple[Finding, ...], list[Trace], Any]:
    """Completed copies of the data, one after the other.

    Parameters
    ----------
    patterns : Patterns
        Atoms of the whole file.
    setting : Setting
    variables : sequence of str
        Exposure and covariates of all sets.
    settings : Imputation
    timed : bool
        Whether the outcome is counted over time at risk, which then helps to predict.

    Returns
    -------
    copies : iterator of Patterns
        Patterns of the exposure and covariates, without missing values, of rows that have the outcome.
    findings : tuple of Finding
        What can be said beforehand.
    traces : list of Trace
        Filled while the copies are made, for :func:`chain_findings`.
    data
        For :func:`chain_findings` too.

    Raises
    ------
    NotEstimableError
        If something cannot be imputed.
    """
    keyed = patterns.only(patterns.keys.notna().all(axis=1).to_numpy())
    seen = keyed.observed > 0
    with np.errstate(invalid="ignore", divide="ignore"):
        weight = np.where(seen, keyed.moments.weight / keyed.observed, 1.0)
    table = keyed.values[list(variables)].assign(
        **{
            _OUTCOME: np.where(seen, keyed.mean, np.nan),
            _SEEN: seen.astype(np.float64),
            _TIME: np.where(seen, keyed.moments.time, 1.0),
            _WEIGHT: weight,
        }
    )
    for name in keyed.keys:
        table[f"{_KEY}{name}"] = keyed.keys[name].to_numpy()
    entries: dict[str, Entry] = {name: _entry(setting, name, keyed) for name in variables}
    entries[_OUTCOME] = "category" if setting.kind in ("risk", "hazard") else "linear"
    helping = [_TIME] if timed else []
    if "time" in keyed.keys:
        table[_HAZARD] = _cumulative_hazard(keyed)
        helping.append(_HAZARD)
    entries |= dict.fromkeys(helping, "linear")
    together = [[setting.exposure, setting.modifier, _OUTCOME]] if setting.modifier in variables else []
    data = prepare(
        table,
        keyed.rows,
        entries,
        never_imputed=helping,
        together=[[n for n in g if n] for g in together],
        normal=settings.normal,
    )
    traces: list[Trace] = []

    def copies() -> Iterator[Patterns]:
        for copy in impute(data, settings.imputations, settings.iterations, settings.seed):
            traces.append(copy.trace)
            yield _as_patterns(copy.values, copy.counts, keyed, variables)

    return copies(), tuple(map(_without_marks, data.findings)), traces, data


def chain_findings(data: Any, traces: Sequence[Trace]) -> tuple[Finding, ...]:
    """What is to be said once all copies are made."""
    return tuple(_without_marks(finding) for finding in check_traces(data, traces))


def _as_patterns(table: pd.DataFrame, counts: np.ndarray, source: Patterns, variables: Sequence[str]) -> Patterns:
    here = table[_SEEN].to_numpy() == 1.0
    table, people = table[here].reset_index(drop=True), counts[here].astype(np.int64)
    columns = {name: table[name].to_numpy(dtype=np.float64) for name in (_OUTCOME, _TIME, _WEIGHT)}
    moments = Moments.of_equals(people, columns[_OUTCOME], columns[_TIME], columns[_WEIGHT])
    keys = pd.DataFrame({name: table[f"{_KEY}{name}"].to_numpy() for name in source.keys}, index=table.index)
    kinds = {name: source.kinds[name] for name in variables}
    return Patterns(table[list(variables)], kinds, people, moments, source.outcome, keys)


def _entry(setting: Setting, name: str, patterns: Patterns) -> Entry:
    if name == _OUTCOME:
        return "category" if setting.kind in ("risk", "hazard") else "linear"
    form = setting.coding.form if name == setting.exposure else setting.forms[name]
    return "category" if form in ("category", "stratum") or patterns.kinds[name] == "text" else "linear"


def _cumulative_hazard(patterns: Patterns) -> Floats:
    """The Nelson–Aalen estimate at the end of each atom's follow-up (White and Royston 2009, Stat Med 28:1982)."""
    time = patterns.keys["time"].to_numpy(dtype=np.float64)
    event = np.nan_to_num(patterns.mean) * (patterns.observed > 0)
    order = np.argsort(time, kind="stable")
    people = patterns.rows[order].astype(np.float64)
    at_risk = people[::-1].cumsum()[::-1]
    times, first = np.unique(time[order], return_index=True)
    events = np.add.reduceat(people * event[order], first)
    return np.asarray(np.cumsum(events / at_risk[first])[np.searchsorted(times, time)])


def _without_marks(finding: Finding) -> Finding:
    """The finding with our own names of columns put into words."""
    words = {_OUTCOME: "the outcome", _TIME: "time at risk", _HAZARD: "the cumulative hazard"}
    message = finding.message
    for mark, word in words.items():
        message = message.replace(f"“{mark}”", word)
    return replace(finding, message=message[:1].upper() + message[1:])
