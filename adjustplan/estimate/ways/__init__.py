"""Ways to adjust: from the same problem to an estimate, by outcome regression or by one of its alternatives.

*Conditional* ways compare people who are alike in the covariates (regression, stratification); *marginal* ones compare
two states of the whole population (standardisation, weighting, doubly robust). For differences and ratios of risks and
means the two agree when the effect is the same for everybody; for odds and hazard ratios they differ even then.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

from adjustplan.estimate.problem import Rows, Solution
from adjustplan.estimate.ways import doubly_robust, regression, standardisation, strata, weighting
from adjustplan.plan.analysis_schema import Way

_SOLVERS: Mapping[Way, Callable[[Rows], Solution]] = MappingProxyType(
    {
        "regression": regression.solve,
        "standardisation": standardisation.solve,
        "weighting": weighting.solve,
        "doubly robust": doubly_robust.solve,
        "stratification": strata.solve,
    }
)
_INFLUENCES: Mapping[Way, Callable[[Rows, Solution], Solution]] = MappingProxyType(
    {
        "regression": regression.with_influence,
        "standardisation": standardisation.with_influence,
        "weighting": weighting.with_influence,
        "doubly robust": doubly_robust.with_influence,
        "stratification": strata.with_influence,
    }
)
CONDITIONAL: Mapping[Way, bool] = MappingProxyType(
    {
        "regression": True,
        "standardisation": False,
        "weighting": False,
        "doubly robust": False,
        "stratification": True,
    }
)
"""Whether a way compares people who are alike in the covariates, rather than two states of the population."""


def solve(rows: Rows) -> Solution:
    """The effect, without its error."""
    return _SOLVERS[rows.setting.way](rows)


def with_influence(rows: Rows, found: Solution) -> Solution:
    """The same with what its standard error needs."""
    return _INFLUENCES[rows.setting.way](rows, found)
