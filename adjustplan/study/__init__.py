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
from adjustplan.study.measures import KINDS, SCALES, MeasureKind, Scale

__all__ = [
    "DESIGNS",
    "KINDS",
    "MEASURES",
    "ODDS_RATIO_MEANS",
    "OUTCOME_TYPES",
    "SCALES",
    "Design",
    "DesignName",
    "Measure",
    "MeasureKind",
    "OutcomeType",
    "Sampling",
    "Scale",
]
