"""The estimates of each set, under each way of handling rows that lack a value.

A set has several *tasks* on the same rows: the crude estimate, the planned way to adjust, and for the planned set the
other ways that the plan names. With complete cases or weights for being complete every task is done once; with imputed
data it is done on every copy, and the results are pooled by Rubin's rules.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace

import numpy as np

from adjustplan.data import Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.loading import Loaded
from adjustplan.estimate.missing.handling import Incomplete, chain_findings, completed, weigh_complete
from adjustplan.estimate.missing.pooling import Pooled, pool_estimates, too_few
from adjustplan.estimate.modelling import Modelled, estimate_effect
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting, Solution
from adjustplan.estimate.results import AdjustedEstimate, Estimate
from adjustplan.estimate.row_models import needs_rows
from adjustplan.estimate.sets import ReportedSet
from adjustplan.estimate.standard_errors import by_t
from adjustplan.plan.analysis_faults import model_for
from adjustplan.plan.analysis_schema import Way

Progress = Callable[[str, int, int], None]
"""Told what is repeated, how often in all, and how often it was done so far."""


@dataclass(frozen=True, eq=False)
class SetResult:
    """What came of one set.

    Attributes
    ----------
    chosen : ReportedSet
    findings : tuple of Finding
        On the set and its variables, not on single estimates.
    rows : int
        Rows that took part.
    complete : Patterns or None
        The rows with a value for everything; None where the set is refused or there are none.
    crude : Modelled or None
    by_way : mapping of str to Modelled
        Adjusted, the planned way first; empty where there was nothing to adjust on.
    """

    chosen: ReportedSet
    findings: tuple[Finding, ...] = ()
    rows: int = 0
    complete: Patterns | None = None
    crude: Modelled | None = None
    by_way: Mapping[Way, Modelled] = field(default_factory=dict)

    @property
    def usable(self) -> bool:
        """Whether there are rows, and nothing in the set or its variables stands against adjusting for it."""
        return self.complete is not None and all(finding.severity != "error" for finding in self.findings)

    @property
    def adjusted(self) -> Modelled | None:
        """By the planned way."""
        return next(iter(self.by_way.values()), None)

    def reported(self) -> AdjustedEstimate:
        """As a line of the fit's main table."""
        chosen, told = self.chosen, list(self.findings)
        crude = self.crude.estimate if self.crude else None
        if self.crude and crude is None and chosen.members:
            told += [replace(one, message=f"Crude: {one.message}", severity="warning") for one in self.crude.findings]
        estimate = self.adjusted.estimate if self.adjusted else None
        told += self.adjusted.findings if self.adjusted else ()
        return AdjustedEstimate(
            chosen.members,
            chosen.origins,
            chosen.sufficient,
            chosen.rationale,
            **(asdict(estimate) if estimate else {}),
            rows=self.rows,
            crude=crude,
            findings=tuple(dict.fromkeys(told)),
        )


def estimate_sets(
    loaded: Loaded, progress: Progress | None = None
) -> tuple[list[SetResult], SetResult, Incomplete | None]:
    """The estimates of every set, the planned one's from complete rows alone, and what missing values cost that one."""
    handling = loaded.plan.analysis.missing
    results = [_prepared(loaded, chosen) for chosen in loaded.sets]
    alone = _on_complete_rows(loaded, results[0])
    total, complete = loaded.patterns.total, alone.rows
    if handling == "complete cases":
        results = [alone, *(_on_complete_rows(loaded, result) for result in results[1:])]
        if complete == total or alone.complete is None:
            return results, alone, None
        return results, alone, Incomplete(handling, total, complete, complete, None, {})
    complete_case = alone.adjusted.estimate if alone.adjusted else None
    numbers: dict[str, float] = {}
    said: tuple[Finding, ...] = ()
    if handling == "inverse probability":
        for place, result in enumerate(results):
            results[place], own, told = _weighted(loaded, result)
            numbers, said = (own, told) if place == 0 else (numbers, said)
    else:
        results, numbers, said = _imputed(loaded, results, progress)
    return results, alone, Incomplete(handling, total, complete, results[0].rows, complete_case, numbers, said)


def tasks(loaded: Loaded, chosen: ReportedSet) -> dict[Way, Setting]:
    """The ways in which a set is adjusted for: all of them for the planned set, the planned way for the others."""
    analysis = loaded.plan.analysis
    ways = [analysis.way, *(analysis.other_ways if "planned" in chosen.origins else ())]
    return {way: loaded.setting.by(way, model_for(analysis, way)) for way in dict.fromkeys(ways)}


def _prepared(loaded: Loaded, chosen: ReportedSet) -> SetResult:
    """A set with the rows that are complete for it, before anything is estimated."""
    told = list(chosen.findings)
    if chosen.refused:
        return SetResult(chosen, tuple(told))
    setting, exposure = loaded.setting, loaded.setting.exposure
    told += [finding for name in (exposure, *chosen.members) for finding in loaded.by_variable[name]]
    complete = loaded.patterns.complete([exposure, *chosen.members], pooled=not needs_rows(setting))
    if not complete.people:
        lacks = max(chosen.members, key=loaded.patterns.missing, default=exposure)
        message = f"No row has a value for everything this set needs; “{lacks}” is missing most often."
        told.append(Finding("data-no-complete-rows", message, "Choose a set that the data can serve."))
        return SetResult(chosen, tuple(told))
    blank = SetResult(chosen, tuple(told), complete.people, complete)
    return blank if blank.usable else replace(blank, crude=_crude(complete, setting))


def _on_complete_rows(loaded: Loaded, blank: SetResult) -> SetResult:
    return _done(loaded, blank, blank.complete) if blank.usable and blank.complete is not None else blank


def _done(loaded: Loaded, blank: SetResult, patterns: Patterns) -> SetResult:
    """The result with every task done on these patterns."""
    members, exposure = blank.chosen.members, loaded.setting.exposure
    crude = _crude(patterns, loaded.setting)
    found: dict[Way, Modelled] = {}
    for way, setting in tasks(loaded, blank.chosen).items():
        if not members and way == loaded.setting.way:
            found[way] = crude
            continue
        fitting = (
            patterns
            if needs_rows(setting) or not needs_rows(loaded.setting)
            else patterns.complete([exposure, *members])
        )
        found[way] = estimate_effect(fitting, setting, members)
    return replace(blank, crude=crude, by_way=found)


def _crude(patterns: Patterns, setting: Setting) -> Modelled:
    return estimate_effect(patterns.complete([setting.exposure], pooled=not needs_rows(setting)), setting, [])


def _weighted(loaded: Loaded, result: SetResult) -> tuple[SetResult, dict[str, float], tuple[Finding, ...]]:
    """The same with the complete rows weighted for those like them."""
    setting, members = loaded.setting, result.chosen.members
    if not result.usable:
        return result, {}, ()
    try:
        patterns, projection, numbers, said = weigh_complete(loaded.patterns, setting, members)
    except NotEstimableError as error:
        nothing = Modelled(None, (error.finding,))
        ways: dict[Way, Modelled] = dict.fromkeys(tasks(loaded, result.chosen), nothing)
        return replace(result, crude=nothing, by_way=ways), {}, ()
    crude = estimate_effect(patterns, setting, [], projection)
    found = {
        way: estimate_effect(patterns, own, members, projection) for way, own in tasks(loaded, result.chosen).items()
    }
    return replace(result, crude=crude, by_way=found), numbers, said


def _imputed(
    loaded: Loaded, results: Sequence[SetResult], progress: Progress | None
) -> tuple[list[SetResult], dict[str, float], tuple[Finding, ...]]:
    """The estimates pooled over imputed copies of the data."""
    settings = loaded.plan.analysis.imputation
    assert settings is not None  # the plan is refused otherwise
    setting = loaded.setting
    variables = [
        setting.exposure,
        *sorted({name for r in results if r.usable for name in r.chosen.members}),
    ]
    try:
        copies, said, traces, data = completed(
            loaded.patterns, setting, variables, settings, timed=setting.kind == "rate"
        )
        every: list[list[SetResult]] = []
        rows = 0
        for copy in copies:
            rows = copy.people
            every.append([_of_copy(loaded, result, copy) for result in results])
            if progress is not None:
                progress("imputations", settings.imputations, len(every))
    except NotEstimableError as error:
        nothing = Modelled(None, (error.finding,))
        failed = [
            replace(result, crude=nothing, by_way=dict.fromkeys(tasks(loaded, result.chosen), nothing))
            if result.usable
            else result
            for result in results
        ]
        return failed, {}, ()
    pooled: list[SetResult] = []
    numbers: dict[str, float] = {}
    for place, result in enumerate(results):
        if not result.usable:
            pooled.append(result)
            continue
        own = [copy[place] for copy in every]
        crude, _ = _pool([one.crude for one in own], setting)
        by_way: dict[Way, Modelled] = {}
        for way in tasks(loaded, result.chosen):
            by_way[way], rule = _pool([one.by_way[way] for one in own], setting)
            if place == 0 and way == setting.way and rule is not None:
                numbers = {
                    "imputations": float(rule.imputations),
                    "share of information missing": rule.missing_information,
                    "Monte Carlo error": rule.monte_carlo_error,
                }
                said = (*said, *([few] if (few := too_few(rule)) else []))
        pooled.append(replace(result, rows=rows, crude=crude, by_way=by_way))
    return pooled, numbers, (*said, *chain_findings(data, traces))


def _of_copy(loaded: Loaded, result: SetResult, copy: Patterns) -> SetResult:
    if not result.usable:
        return result
    needed = [loaded.setting.exposure, *result.chosen.members]
    return _done(loaded, result, copy.complete(needed, pooled=not needs_rows(loaded.setting)))


def _pool(found: Sequence[Modelled | None], setting: Setting) -> tuple[Modelled, Pooled | None]:
    """One estimate from those of all copies; none where a copy has none."""
    done = [one for one in found if one is not None]
    said = tuple(dict.fromkeys(finding for one in done for finding in one.findings))
    estimates = [one.estimate for one in done]
    ratio = setting.scale != "difference"
    values = [_on_scale(one, ratio) for one in estimates]
    variances = [math.nan if one is None else one.standard_error**2 for one in estimates]
    try:
        rule = pool_estimates(values, variances, min((_freedom(one) for one in done), default=math.inf))
    except NotEstimableError as error:
        return Modelled(None, (*said, error.finding)), None
    shown = [rule.estimate, rule.lower, rule.upper]
    shown = [math.exp(value) for value in shown] if ratio else shown
    means = [one.solution.means for one in done if one.solution and one.solution.means]
    solution = None
    if len(means) == len(done):
        both = np.mean(np.array(means), axis=0)
        solution = Solution(rule.estimate, (float(both[0]), float(both[1])))
    return Modelled(Estimate(shown[0], shown[1], shown[2], rule.standard_error), said, solution=solution), rule


def _freedom(modelled: Modelled) -> float:
    """Degrees of freedom of the interval that the estimate would have if nothing were missing."""
    problem = modelled.problem
    if problem is None or not by_t(problem):
        return math.inf
    return float(problem.moments.people.sum() - problem.matrix.columns.shape[1])


def _on_scale(estimate: Estimate | None, ratio: bool) -> float:
    if estimate is None:
        return math.nan
    return math.log(estimate.estimate) if ratio else estimate.estimate
