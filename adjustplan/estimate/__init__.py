"""Estimates: the crude and the adjusted effect of the exposure, on exactly the same rows.

Importing this floor is cheap; the numerical libraries are loaded when :func:`fit` is first asked for.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from adjustplan.estimate.fit_result import Fit
from adjustplan.estimate.results import AdjustedEstimate, Estimate, WayEstimate

if TYPE_CHECKING:
    from adjustplan.estimate.fitting import fit
    from adjustplan.estimate.stress.running import stress_plan

__all__ = ["AdjustedEstimate", "Estimate", "Fit", "WayEstimate", "fit", "stress_plan"]


def __getattr__(name: str) -> Any:
    if name == "fit":
        from adjustplan.estimate.fitting import fit

        return fit
    if name == "stress_plan":
        from adjustplan.estimate.stress.running import stress_plan

        return stress_plan
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
