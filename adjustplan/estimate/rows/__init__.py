"""The models that need the rows themselves: Cox, conditional logistic and negative binomial regression.

Most models of adjustplan run on covariate patterns with counts, because everything they ask of the data is a
mean and a sum of squares per pattern. Here it matters who was at risk when somebody fell ill, who was matched to
whom, or how a count varies from person to person, so these models get rows: numpy arrays, one line per person
(or per group of people alike in everything, with their number).
"""

from adjustplan.estimate.rows.conditional_logistic import columns_within_sets, conditional_logistic
from adjustplan.estimate.rows.cox import columns_within_risk_sets, cox
from adjustplan.estimate.rows.hazards import ProportionalHazards, proportional_hazards
from adjustplan.estimate.rows.negative_binomial import negative_binomial
from adjustplan.estimate.rows.result import RowRegression, RowVariance
from adjustplan.estimate.rows.survival import BaselineHazard, baseline_hazard, survival_at

__all__ = [
    "BaselineHazard",
    "ProportionalHazards",
    "RowRegression",
    "RowVariance",
    "baseline_hazard",
    "columns_within_risk_sets",
    "columns_within_sets",
    "conditional_logistic",
    "cox",
    "negative_binomial",
    "proportional_hazards",
    "survival_at",
]
