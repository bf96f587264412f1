"""The log partial likelihood written out event by event, with every risk set listed, and maximised by scipy.

Nothing here is shared with the package: each risk set is a list made by looking at every row.
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import minimize


def log_likelihood(beta, columns, time, event, *, entry=None, stratum=None, ties="efron", weights=None, drift=None):
    """``drift`` = (place, theta, g): the coefficient of a column is beta + theta g(t)."""
    rows = range(len(time))
    entry = [-np.inf] * len(time) if entry is None else entry
    stratum = [0] * len(time) if stratum is None else stratum
    weights = np.ones(len(time)) if weights is None else weights
    total = 0.0
    for label in sorted(set(stratum)):
        for moment in sorted({time[i] for i in rows if event[i] and stratum[i] == label}):
            at = np.array(beta, dtype=float)
            if drift is not None:
                places, theta, g = drift
                at[places] = at[places] + np.asarray(theta) * g(moment)
            risk = [i for i in rows if stratum[i] == label and entry[i] < moment <= time[i]]
            dead = [i for i in risk if event[i] and time[i] == moment]
            everybody = sum(weights[i] * np.exp(columns[i] @ at) for i in risk)
            fallen = sum(weights[i] * np.exp(columns[i] @ at) for i in dead)
            total += sum(weights[i] * (columns[i] @ at) for i in dead)
            each = sum(weights[i] for i in dead) / len(dead)
            for number in range(len(dead)):
                share = number / len(dead) if ties == "efron" else 0.0
                total -= each * np.log(everybody - share * fallen)
    return total


def gradient(function, at, step=1e-5):
    at = np.asarray(at, dtype=float)
    unit = np.eye(len(at)) * step
    return np.array([(function(at + one) - function(at - one)) / (2 * step) for one in unit])


def hessian(function, at, step=1e-4):
    at = np.asarray(at, dtype=float)
    unit = np.eye(len(at)) * step

    def second(one, two):
        around = function(at + one + two) - function(at + one - two) - function(at - one + two)
        return (around + function(at - one - two)) / (4 * step**2)

    return np.array([[second(one, two) for two in unit] for one in unit])


def maximum(function, width):
    found = minimize(lambda at: -function(at), np.zeros(width), method="BFGS", options={"gtol": 1e-9}).x
    for _ in range(3):  # polish, for BFGS with numerical slopes stops at about six digits
        found = found - np.linalg.solve(hessian(function, found), gradient(function, found))
    return found


def small_study(seed, *, rows=16, width=2, strata=1, late=False, moments=6):
    """A tiny data set with many ties."""
    rng = np.random.default_rng(seed)
    columns = rng.normal(size=(rows, width)).round(1)
    entry = rng.integers(0, 3, rows).astype(float) if late else None
    begin = np.zeros(rows) if entry is None else entry
    time = begin + rng.integers(1, moments + 1, rows)
    event = rng.random(rows) < 0.7
    stratum = np.array(["north", "south", "west"])[rng.integers(0, strata, rows)] if strata > 1 else None
    return columns, time, event, entry, stratum
