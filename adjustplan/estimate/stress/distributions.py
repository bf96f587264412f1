"""Random values from what the plan assumes of a quantity.

Every value is the quantile of a uniform number between 0 and 1. So one stream of uniform numbers serves all
distributions, two quantities can be made to go together by making their uniform numbers go together, and a plain number
gives itself whatever is drawn.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from scipy import special, stats

from adjustplan.data import Floats
from adjustplan.plan.stress_schema import Distribution
from adjustplan.plan.table import Table


def quantile(distribution: Distribution, probability: Floats) -> Floats:
    """The quantiles of a distribution.

    Parameters
    ----------
    distribution : Distribution
    probability : ndarray
        Between 0 and 1.

    Returns
    -------
    ndarray
        Of the same shape. A normal distribution is cut off at the least and the most that the quantity can be.
    """
    given, u = distribution.parameters, np.asarray(probability, dtype=np.float64)
    match distribution.shape:
        case "fixed":
            return np.full_like(u, given["value"])
        case "uniform":
            return given["low"] + u * (given["high"] - given["low"])
        case "triangular":
            return _trapezium(u, given["low"], given["mode"], given["mode"], given["high"])
        case "trapezoidal":
            return _trapezium(u, given["low"], given["from"], given["to"], given["high"])
        case "normal":
            mean, sd = given["mean"], given["sd"]
            ends = [(end - mean) / sd for end in (distribution.least, distribution.most)]
            return np.asarray(stats.truncnorm.ppf(u, *ends, loc=mean, scale=sd), dtype=np.float64)
        case "beta":
            return np.asarray(stats.beta.ppf(u, given["alpha"], given["beta"]), dtype=np.float64)


def together(first: Floats, second: Floats, correlation: float) -> tuple[Floats, Floats]:
    """Two streams of uniform numbers from two independent standard normal ones, correlated as normal numbers."""
    mixed = correlation * first + np.sqrt(1 - correlation**2) * second
    return special.ndtr(first), special.ndtr(mixed)


def _trapezium(u: Floats, low: float, start: float, end: float, high: float) -> Floats:
    """Quantiles of a density that rises from low to start, is flat to end, and falls to high."""
    height = 2 / (high - low + end - start)
    rising, falling = height * (start - low) / 2, height * (high - end) / 2
    up = low + np.sqrt(2 * u * (start - low) / height)
    flat = start + (u - rising) / height
    down = high - np.sqrt(2 * (1 - u) * (high - end) / height)
    return np.asarray(np.where(u < rising, up, np.where(u > 1 - falling, down, flat)), dtype=np.float64)


def typical(distribution: Distribution) -> float:
    """Its median; a plain number is itself."""
    return float(quantile(distribution, np.array([0.5]))[0])


def share_cut_off(table: Table) -> Iterator[tuple[str, float]]:
    """The keys of a table that are normal distributions, with how much of each is cut off, where that shows."""
    for key in type(table).model_fields:
        given = getattr(table, key)
        if isinstance(given, Distribution) and given.shape == "normal":
            mean, sd = given.parameters["mean"], given.parameters["sd"]
            inside = special.ndtr((given.most - mean) / sd) - special.ndtr((given.least - mean) / sd)
            if 1 - inside >= 0.001:
                yield key, float(1 - inside)
