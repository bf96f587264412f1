"""Intervals from resampled people, put in the place of those from formulas.

Every estimate of every set is made again from each resample of the same people, so that what is compared comes from the
same resamples. The estimates themselves stay what they are; limits and standard errors become those of the resamples.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Patterns
from adjustplan.estimate.bootstrap import Job, RowJob, percentile_interval, resample
from adjustplan.estimate.estimating import SetResult
from adjustplan.estimate.loading import Loaded
from adjustplan.estimate.modelling import Modelled
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.results import Estimate
from adjustplan.estimate.row_models import fit_rows
from adjustplan.plan.analysis_schema import Bootstrap


@dataclass(frozen=True, eq=False)
class Refit:
    """A model on rows, fitted again to the people of a resample."""

    atoms: Patterns
    complete: NDArray[np.bool_]
    setting: Setting
    members: tuple[str, ...]

    def __call__(self, counts: NDArray[np.int64]) -> float:
        """The estimate, on its scale, with these numbers of people in all atoms."""
        own = counts[self.complete]
        drawn = self.atoms.only(own > 0)
        people = own[own > 0]
        moments = replace(drawn.moments, people=people, weight=people.astype(np.float64))
        return fit_rows(replace(drawn, rows=people, moments=moments), self.setting, self.members).value


def with_resampled_intervals(
    loaded: Loaded, results: Sequence[SetResult], settings: Bootstrap, progress: Callable[[int], None] | None = None
) -> list[SetResult]:
    """The results with intervals from resamples.

    Parameters
    ----------
    loaded : Loaded
        Its patterns are atoms.
    results : sequence of SetResult
        From complete rows.
    settings : Bootstrap
    progress : callable, optional
        Told how many resamples are done.
    """
    jobs: list[Job | RowJob] = []
    places: dict[int, int] = {}
    for result in results:
        for modelled, members in _models(result):
            if id(modelled) in places or modelled.estimate is None:
                continue
            places[id(modelled)] = len(jobs)
            jobs.append(_job(loaded, result, modelled, members))
    if not jobs:
        return list(results)
    drawn = resample(loaded.patterns, jobs, settings.replicates, settings.seed, progress)

    def renewed(modelled: Modelled) -> Modelled:
        place = places.get(id(modelled))
        return modelled if place is None else _renewed(modelled, drawn.values[:, place], loaded.setting)

    return [
        replace(
            result,
            crude=renewed(result.crude) if result.crude else None,
            by_way={way: renewed(modelled) for way, modelled in result.by_way.items()},
        )
        for result in results
    ]


def _models(result: SetResult) -> list[tuple[Modelled, tuple[str, ...]]]:
    crude: list[tuple[Modelled, tuple[str, ...]]] = [(result.crude, ())] if result.crude else []
    return [*crude, *((modelled, result.chosen.members) for modelled in result.by_way.values())]


def _job(loaded: Loaded, result: SetResult, modelled: Modelled, members: tuple[str, ...]) -> Job | RowJob:
    exposure = loaded.setting.exposure
    needed = [exposure, *result.chosen.members]
    if modelled.problem is None:
        kept = loaded.patterns.is_complete(needed)
        atoms = loaded.patterns.complete(needed, pooled=False)
        return RowJob(Refit(atoms, kept, loaded.setting, members))
    place = loaded.patterns.place(needed)
    if not members:
        pooled = loaded.patterns.complete(needed).place([exposure])
        place = np.where(place < 0, -1, pooled[place])
    return Job(modelled.problem, place)


def _renewed(modelled: Modelled, values: NDArray[np.float64], setting: Setting) -> Modelled:
    assert modelled.estimate is not None
    try:
        found = percentile_interval(values)
    except NotEstimableError as error:
        return replace(modelled, estimate=None, findings=(*modelled.findings, error.finding))
    limits = (found.lower, found.upper)
    if setting.scale != "difference":
        limits = (math.exp(found.lower), math.exp(found.upper))
    estimate = Estimate(modelled.estimate.estimate, limits[0], limits[1], found.standard_error)
    return replace(modelled, estimate=estimate, findings=(*modelled.findings, *found.findings))
