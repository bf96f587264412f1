"""The numerical kernel: regressions on covariate patterns, and the influence each person has on an estimate.

Nothing in here knows files, plans or names of variables; it sees arrays with one entry for each pattern.
"""

from adjustplan.estimate.kernel.families import FAMILIES, Family
from adjustplan.estimate.kernel.influence import Influence, covariance, pattern_sums
from adjustplan.estimate.kernel.newton import Regression, Sums, iterate, regress, sums_at

__all__ = [
    "FAMILIES",
    "Family",
    "Influence",
    "Regression",
    "Sums",
    "covariance",
    "iterate",
    "pattern_sums",
    "regress",
    "sums_at",
]
