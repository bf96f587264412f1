"""What a measure of effect compares, and how.

A measure compares two means (of a quantity, of a 0/1 outcome as a risk or a prevalence, of events per time) or two
hazards, by their difference, their ratio, or the ratio of their odds.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Literal

from adjustplan.study.designs import Measure

Scale = Literal["difference", "ratio", "odds ratio"]
MeasureKind = Literal["mean", "risk", "rate", "hazard"]

SCALES: Mapping[Measure, Scale] = MappingProxyType(
    {
        "mean difference": "difference",
        "mean ratio": "ratio",
        "risk difference": "difference",
        "risk ratio": "ratio",
        "odds ratio": "odds ratio",
        "prevalence difference": "difference",
        "prevalence ratio": "ratio",
        "rate difference": "difference",
        "rate ratio": "ratio",
        "hazard ratio": "ratio",
    }
)
"""How two means become the measure."""

KINDS: Mapping[Measure, MeasureKind] = MappingProxyType(
    {
        "mean difference": "mean",
        "mean ratio": "mean",
        "risk difference": "risk",
        "risk ratio": "risk",
        "odds ratio": "risk",
        "prevalence difference": "risk",
        "prevalence ratio": "risk",
        "rate difference": "rate",
        "rate ratio": "rate",
        "hazard ratio": "hazard",
    }
)
"""What is compared: means, risks (or prevalences), rates, or hazards."""
