"""Numbers and measures as documents write them."""

from __future__ import annotations

from typing import Protocol


class Interval(Protocol):
    """An estimate with its confidence limits; None where there is none."""

    @property
    def estimate(self) -> float | None: ...
    @property
    def lower(self) -> float | None: ...
    @property
    def upper(self) -> float | None: ...


def figure(value: float) -> str:
    """A number with three significant digits, never in powers of ten while it is of ordinary size."""
    if value == 0 or 1e-4 <= abs(value) < 1e6:
        return f"{value:#.3g}".rstrip(".") if abs(value) < 1000 else f"{value:.0f}"
    return f"{value:.2e}"


def interval(result: Interval | None) -> str:
    """An estimate and its 95 % confidence interval: ``1.62 (1.30 to 2.02)``."""
    return (result and limits(result.estimate, result.lower, result.upper)) or "not estimated"


def limits(estimate: float | None, lower: float | None, upper: float | None) -> str | None:
    """A number and its limits, in the same form; None where one is missing."""
    if estimate is None or lower is None or upper is None:
        return None
    return f"{figure(estimate)} ({figure(lower)} to {figure(upper)})"
