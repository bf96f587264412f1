"""Effect modification level by level: each level of the modifier is a study of its own."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd

from adjustplan.data import Floats, Patterns
from adjustplan.estimate.comparing.interaction import modification
from adjustplan.estimate.comparing.stratum_effects import EffectModification, StratumEffect, places_of
from adjustplan.estimate.kernel import pattern_sums
from adjustplan.estimate.modelling import Modelled, estimate_effect
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting


def by_strata(patterns: Patterns, setting: Setting, members: Sequence[str], modifier: str) -> EffectModification:
    """The effect at each level, estimated among the people at that level alone."""
    if setting.forms[modifier] != "category":
        message = f"“{modifier}” is a number, and {setting.way} looks at its levels one by one."
        raise NotEstimableError(
            "estimate-modification", message, 'State it as "cut(…)" in [analysis.forms].', "warning"
        )
    levels, places = places_of(patterns, setting, modifier)
    others = [name for name in members if name != modifier]
    parts, keys = [], []
    for place in places:
        here = patterns.values[modifier].to_numpy() == patterns.values[modifier].iloc[place]
        part = patterns.only(here).complete([setting.exposure, *others])
        parts.append((part.people, estimate_effect(part, setting, others)))
        keys.append(part.keys)
    said = [finding for _, modelled in parts for finding in modelled.findings if modelled.estimate is None]
    ratio = setting.scale != "difference"
    estimates = [modelled.estimate for _, modelled in parts]
    if any(estimate is None for estimate in estimates):
        strata = [
            StratumEffect(level, rows, found.estimate) for level, (rows, found) in zip(levels, parts, strict=True)
        ]
        return EffectModification(modifier, tuple(strata), None, tuple(said))
    known = [estimate for estimate in estimates if estimate is not None]
    values = np.array([np.log(one.estimate) if ratio else one.estimate for one in known])
    covariance = np.diag([one.standard_error**2 for one in known])
    if setting.variance == "cluster":
        covariance = _across_clusters([modelled for _, modelled in parts], [each["cluster"] for each in keys])
    found = modification(values, covariance, np.eye(len(values)), ratio=ratio)
    strata = [
        StratumEffect(level, rows, effect, against)
        for level, (rows, _), effect, against in zip(levels, parts, found.effects, found.against_reference, strict=True)
    ]
    return EffectModification(modifier, tuple(strata), found.test)


def _across_clusters(parts: Sequence[Modelled], clusters: Sequence[pd.Series]) -> Floats:
    """The covariance of the levels' estimates where people of one cluster are in several levels."""
    sums = []
    for modelled, cluster in zip(parts, clusters, strict=True):
        assert modelled.problem is not None
        assert modelled.solution is not None
        assert modelled.solution.influence is not None
        each = pattern_sums([modelled.solution.influence], modelled.problem.moments)[:, 0]
        sums.append(pd.Series(each).groupby(cluster.to_numpy()).sum())
    table = pd.concat(sums, axis=1).fillna(0.0).to_numpy()
    return np.asarray(table.T @ table)
