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
    if result is None or result.estimate is None or result.lower is None or result.upper is None:
        return "not estimated"
    return f"{figure(result.estimate)} ({figure(result.lower)} to {figure(result.upper)})"
