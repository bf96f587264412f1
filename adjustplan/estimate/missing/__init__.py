"""Missing data: completing people (multiple imputation), or weighting the complete ones up.

``imputation`` checks the cells and yields completed copies of them; ``chained`` runs one chain, with the regressions
of ``draws`` and the sharing-out of ``matching``; ``convergence`` looks at the chains and ``pooling`` makes one result
of the copies' results. ``completeness`` is the other way: weights for the people of whom everything is known.
"""

from adjustplan.estimate.missing.chained import Completed, Incomplete, Trace
from adjustplan.estimate.missing.completeness import (
    CompleteWeights,
    complete_weights,
    completeness_design,
    fully_observed,
)
from adjustplan.estimate.missing.convergence import Chain, chains, check_drift, check_traces
from adjustplan.estimate.missing.imputation import impute, impute_one, prepare
from adjustplan.estimate.missing.pooling import Pooled, PooledTest, pool_estimates, pool_test, too_few

__all__ = [
    "Chain",
    "CompleteWeights",
    "Completed",
    "Incomplete",
    "Pooled",
    "PooledTest",
    "Trace",
    "chains",
    "check_drift",
    "check_traces",
    "complete_weights",
    "completeness_design",
    "fully_observed",
    "impute",
    "impute_one",
    "pool_estimates",
    "pool_test",
    "prepare",
    "too_few",
]
