"""Study designs, what follows from them, and whether a study of some size can answer its question."""

from adjustplan.study.designs import (
    DESIGNS,
    MEASURES,
    ODDS_RATIO_MEANS,
    OUTCOME_TYPES,
    Design,
    DesignName,
    Measure,
    OutcomeType,
    Sampling,
)

__all__ = [
    "DESIGNS",
    "MEASURES",
    "ODDS_RATIO_MEANS",
    "OUTCOME_TYPES",
    "Design",
    "DesignName",
    "Measure",
    "OutcomeType",
    "Sampling",
]
