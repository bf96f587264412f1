"""Running the planned analysis: from the plan and its data to crude and adjusted estimates.

Each set gets the rows that are complete for it, one crude and one adjusted estimate on exactly these rows, or the
reason why there is none. A model that fails does not take the others with it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

from adjustplan.errors import Finding
from adjustplan.estimate.comparing.agreement import Agreement, agreement
from adjustplan.estimate.comparing.collapsibility import Collapsibility, collapsibility
from adjustplan.estimate.comparing.marginal_hazard import MarginalHazard, marginal_hazard
from adjustplan.estimate.comparing.modification import modify
from adjustplan.estimate.comparing.stratum_effects import EffectModification
from adjustplan.estimate.diagnostics.diagnosing import Diagnostics, diagnose
from adjustplan.estimate.diagnostics.proportionality import proportional_tests
from adjustplan.estimate.estimating import Progress, SetResult, estimate_sets
from adjustplan.estimate.fit_result import Fit
from adjustplan.estimate.loading import Loaded, load
from adjustplan.estimate.missing.handling import Incomplete
from adjustplan.estimate.people import into_the_analysis
from adjustplan.estimate.resampled_intervals import with_resampled_intervals
from adjustplan.estimate.results import AdjustedEstimate, WayEstimate
from adjustplan.estimate.threads import one_thread
from adjustplan.estimate.ways import CONDITIONAL
from adjustplan.plan import Plan
from adjustplan.plan.analysis_faults import WITHOUT_OUTCOME_MODEL


def fit(plan: Plan, *, limit: int = 20, progress: Progress | None = None) -> Fit:
    """Estimate the planned measure of effect, crude and adjusted for every set worth reporting.

    Parameters
    ----------
    plan : Plan
        With an adjustment and an analysis that names the data.
    limit : int
        Most minimal sufficient sets of the graph that are reported beside the plan's own sets.
    progress : callable, optional
        Told what is being repeated ("resamples" or "imputations"), how often in all, and how often it was done.

    Returns
    -------
    Fit

    Raises
    ------
    PlanError
        If the plan lacks what is needed, or its measure cannot be estimated in a study of its design.
    DataError
        If the data cannot serve any model; every reason is among its findings.
    """
    return fit_of(analyse(plan, limit, progress))


def fit_of(done: Analysed) -> Fit:
    """The fit, from the estimates of a plan."""
    loaded, results = done.loaded, done.results
    adjusted, planned = tuple(result.reported() for result in results), results[0]
    with one_thread():
        compared = _agreement(loaded, results)
        modified, parted = _modification(loaded, done.complete), _collapsibility(loaded, done.complete)
        diagnosed = _diagnostics(loaded, done.complete)
    setting, plan, question = loaded.setting, loaded.plan, loaded.plan.question
    return Fit(
        measure=setting.measure,
        effect=question.effect,
        exposure=question.exposure,
        outcome=question.outcome,
        contrast=setting.coding.words,
        way=setting.way,
        model=setting.model,
        variance=setting.variance,
        intervals="bootstrap" if plan.analysis.bootstrap else "formula",
        missing_values=plan.analysis.missing,
        rows=adjusted[0].rows,
        rows_total=loaded.patterns.total,
        missing=loaded.missing,
        patterns=len(loaded.patterns),
        crude=adjusted[0].crude,
        adjusted=adjusted,
        findings=(*loaded.findings, *_dropped(loaded, adjusted[0]), *_only_complete(loaded)),
        ways=_ways(planned),
        agreement=compared,
        modification=modified,
        collapsibility=parted,
        diagnostics=diagnosed,
        incomplete=done.incomplete,
        fingerprint=loaded.fingerprint,
        people=into_the_analysis(loaded.flow, loaded.patterns, setting.exposure, planned.chosen, used=planned.rows),
    )


@dataclass(frozen=True, eq=False)
class Analysed:
    """The estimates of a plan, with what they were made from.

    ``complete`` is the planned set on complete rows alone, for the analyses that go further.
    """

    loaded: Loaded
    results: Sequence[SetResult]
    complete: SetResult
    incomplete: Incomplete | None


def analyse(plan: Plan, limit: int, progress: Progress | None = None, *, fingerprinted: bool = False) -> Analysed:
    """Run the planned models; see :func:`fit` for parameters and errors."""
    loaded = load(plan, limit, fingerprinted=fingerprinted)
    bootstrap = plan.analysis.bootstrap
    with one_thread():
        results, complete, incomplete = estimate_sets(loaded, progress)
        if bootstrap is not None:
            told = None if progress is None else partial(progress, "resamples", bootstrap.replicates)
            results = with_resampled_intervals(loaded, results, bootstrap, told)
            complete = results[0]
    return Analysed(loaded, results, complete, incomplete)


def _ways(planned: SetResult) -> tuple[WayEstimate, ...]:
    """The planned set adjusted in the planned way and the others."""
    found = []
    for place, (way, modelled) in enumerate(planned.by_way.items()):
        means = modelled.solution.means if modelled.solution and modelled.estimate else None
        said = modelled.findings if place else ()
        model = None if way in WITHOUT_OUTCOME_MODEL else modelled.model
        found.append(WayEstimate(way, model, CONDITIONAL[way], means, modelled.estimate, planned.rows, said))
    return tuple(found)


def _agreement(loaded: Loaded, results: Sequence[SetResult]) -> Agreement | None:
    sets = [result.chosen.members for result in results if result.chosen.sufficient and result.by_way]
    if len(sets) < 2:
        return None
    return agreement(loaded.patterns, loaded.setting, sets)


def _modification(loaded: Loaded, planned: SetResult) -> EffectModification | None:
    if planned.complete is None:
        return None
    return modify(planned.complete, loaded.setting, planned.chosen.members)


def _collapsibility(loaded: Loaded, planned: SetResult) -> Collapsibility | MarginalHazard | None:
    setting, members = loaded.setting, planned.chosen.members
    if setting.model == "cox" and members and planned.crude and planned.adjusted:
        return marginal_hazard(planned.crude, planned.adjusted)
    if planned.complete is None or not members or setting.way != "regression" or setting.model != "logistic":
        return None
    return collapsibility(planned.complete, setting, members)


def _diagnostics(loaded: Loaded, planned: SetResult) -> Diagnostics | None:
    """Of the planned set, on its complete rows."""
    setting, members, adjusted = loaded.setting, planned.chosen.members, planned.adjusted
    if planned.complete is None or adjusted is None:
        return None
    solutions = [modelled.solution for modelled in planned.by_way.values()]
    weights = next((one.balance for one in solutions if one is not None and one.balance is not None), None)
    tests, said = proportional_tests(adjusted.row_fit, setting.exposure) if adjusted.row_fit else (None, ())
    return diagnose(
        planned.complete, setting, members, adjusted, weights=weights, proportional_hazards=tests, findings=said
    )


def _only_complete(loaded: Loaded) -> list[Finding]:
    """What is computed on complete rows, although the estimates are not."""
    handling = loaded.plan.analysis.missing
    if handling == "complete cases":
        return []
    message = (
        f"Only the estimates are by {handling}; the agreement of the sets, effect modification, non-collapsibility and"
        " the diagnostics are those of the complete rows."
    )
    return [Finding("estimate-complete-rows", message, "Read them as such.", "note")]


def _dropped(loaded: Loaded, planned: AdjustedEstimate) -> list[Finding]:
    """How many rows the planned model does without."""
    total = loaded.patterns.total
    if total == planned.rows or loaded.sets[0].refused:
        return []
    question = loaded.plan.question
    needed = [question.exposure, question.outcome, *planned.members]
    roles = [name for name in loaded.missing if name not in loaded.plan.graph]
    lacks = ", ".join(f"{name} {loaded.missing[name]}" for name in [*needed, *roles] if loaded.missing.get(name))
    message = f"{total - planned.rows} of {total} rows lack a value the planned model needs ({lacks})."
    remedy = "Say in the document why they may be left out."
    return [Finding("data-rows-dropped", message, remedy, "note", loaded.place)]
