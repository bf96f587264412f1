"""Do the sufficient sets agree?

If the graph is right, every sufficient set estimates the same effect, so their estimates differ by chance only. They
come from the same people and are therefore highly correlated: small differences between them can already be more than
chance. The test stacks the estimating equations of all sets on the rows that are complete for all of them, which gives
the covariance of the estimates, and asks whether their differences are jointly zero (a Wald test).

A conditional odds ratio depends on the covariates in the model even where there is no confounding, so two sufficient
sets may rightly differ in it. What is compared is then the marginal odds ratio, by standardisation.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from scipy.special import chdtrc

from adjustplan.data import Floats, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.modelling import Modelled, estimate_effect
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.results import Estimate, aligned, chi_square_text, interval_text, p_text, with_interval
from adjustplan.estimate.row_models import needs_rows
from adjustplan.estimate.rows.result import sandwich
from adjustplan.estimate.standard_errors import joint_covariance
from adjustplan.estimate.ways import CONDITIONAL
from adjustplan.identify.showing import set_text
from adjustplan.plan.analysis_schema import Way

_SAME = 1e-9
"""Eigenvalues of the covariance of the differences below this share of the largest estimate's variance are rounding:
two sets whose estimates cannot differ, because they are one and the same function of the data."""
SIGNIFICANT = 0.05
_ALSO = (
    " But this is a conditional odds or hazard ratio, which depends on the covariates in the model even where nothing"
    " confounds, so sets may differ for that reason alone."
)


@dataclass(frozen=True)
class Agreement:
    """Whether the sufficient sets estimate the same effect.

    Attributes
    ----------
    way : str
        How the estimates that are compared were adjusted.
    rows : int
        Rows that are complete for every set.
    sets : tuple of tuple of str
    estimates : tuple of Estimate
        On these rows.
    statistic, degrees, p
        Of the Wald test; None where the estimates cannot differ.
    apart : tuple of (int, int)
        The two sets whose estimates lie furthest apart.
    difference : Estimate
        Of these two: their difference, or for ratios their ratio.
    collapsible : bool
        Whether the measure depends on the covariates in the model only through confounding.
    """

    way: Way
    rows: int
    sets: tuple[tuple[str, ...], ...]
    estimates: tuple[Estimate, ...]
    statistic: float | None
    degrees: int
    p: float | None
    apart: tuple[int, int]
    difference: Estimate
    collapsible: bool = True

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values."""
        plain = asdict(self)
        return plain | {
            "sets": [list(members) for members in self.sets],
            "estimates": [asdict(estimate) for estimate in self.estimates],
            "apart": list(self.apart),
            "meaning": self.meaning,
        }

    @property
    def meaning(self) -> str:
        """What the test says, in a sentence."""
        if self.p is None:
            return "The sets cannot disagree: their estimates are the same function of these data."
        assert self.statistic is not None  # there is a p
        test, shown = chi_square_text(self.statistic, self.degrees), p_text(self.p)
        if self.p >= SIGNIFICANT:
            return f"The sufficient sets agree within chance ({test}, {shown})."
        return (
            f"The sufficient sets disagree by more than chance ({test}, {shown}). If the graph were right they would"
            " estimate the same effect: an arrow is missing or wrong, something unmeasured or badly measured confounds,"
            f" or a model's form is wrong.{'' if self.collapsible else _ALSO}"
        )

    def lines(self) -> list[str]:
        """As text."""
        head = f"Agreement of the sufficient sets, by {self.way}, on {self.rows} rows"
        rows = [
            (", ".join(members) or "nothing", interval_text(one))
            for members, one in zip(self.sets, self.estimates, strict=True)
        ]
        return [head, *aligned(rows), f"  {self.meaning}"]

    @property
    def findings(self) -> tuple[Finding, ...]:
        """A warning where the sets disagree."""
        if self.p is None or self.p >= SIGNIFICANT:
            return ()
        one, other = (set_text(self.sets[place]) for place in self.apart)
        remedy = f"Look first at what tells {one} and {other} apart."
        return (Finding("estimate-sets-disagree", self.meaning, remedy, "warning"),)


def agreement(patterns: Patterns, setting: Setting, sets: Sequence[tuple[str, ...]]) -> Agreement | None:
    """Compare the sets; None where fewer than two can be estimated on common rows.

    Parameters
    ----------
    patterns : Patterns
        Of the whole file.
    setting : Setting
        Its models run on patterns; a conditional odds ratio is replaced by the marginal one.
    sets : sequence of tuple of str
        Those that the graph calls sufficient.
    """
    conditional = setting.measure == "odds ratio" and CONDITIONAL[setting.way]
    if conditional and setting.model != "conditional logistic":
        setting = setting.by("standardisation", "logistic")
    elif setting.way == "stratification":
        setting = setting.by("regression", "linear" if setting.scale == "difference" else "poisson")
    everything = sorted(set().union(*sets))
    complete = patterns.complete([setting.exposure, *everything], pooled=not needs_rows(setting))
    if not complete.people:
        return None
    found: list[tuple[tuple[str, ...], Estimate, Modelled]] = []
    for members in sets:
        modelled = estimate_effect(complete, setting, members)
        if modelled.estimate and _has_influence(modelled):
            found.append((members, modelled.estimate, modelled))
    if len(found) < 2:
        return None
    covariance = _covariance([modelled for *_, modelled in found])
    values = np.array([_value(estimate, setting) for _, estimate, _ in found])
    differences = np.eye(len(values))[1:] - np.eye(len(values))[0]
    apart, spread = differences @ values, differences @ covariance @ differences.T
    sizes, directions = np.linalg.eigh(spread)
    kept = sizes > _SAME * np.diag(covariance).max()
    degrees = int(kept.sum())
    statistic = float(np.sum((directions[:, kept].T @ apart) ** 2 / sizes[kept]))
    low, high = int(np.argmin(values)), int(np.argmax(values))
    error = math.sqrt(max(float(covariance[low, low] + covariance[high, high] - 2 * covariance[low, high]), 0.0))
    return Agreement(
        setting.way,
        complete.people,
        tuple(members for members, *_ in found),
        tuple(estimate for _, estimate, *_ in found),
        statistic if degrees else None,
        degrees,
        float(chdtrc(degrees, statistic)) if degrees else None,
        (high, low),
        with_interval(values[high] - values[low], error, ratio=setting.scale != "difference"),
        setting.model not in ("cox", "conditional logistic") or setting.way != "regression",
    )


def _has_influence(modelled: Modelled) -> bool:
    if modelled.row_fit is not None:
        return modelled.row_fit.result is not None
    return modelled.solution is not None and modelled.solution.influence is not None


def _covariance(found: Sequence[Modelled]) -> Floats:
    """The covariance of estimates from the same people, whatever their models."""
    fitted = [modelled.row_fit for modelled in found if modelled.row_fit is not None]
    if fitted:
        each = [fit.result.influence @ fit.matrix.contrast for fit in fitted if fit.result is not None]
        return sandwich(np.column_stack(each), fitted[0].counts.astype(np.float64), fitted[0].cluster)
    problem = found[0].problem
    assert problem is not None
    influences = [modelled.solution.influence for modelled in found if modelled.solution is not None]
    return joint_covariance(problem, [influence for influence in influences if influence is not None])


def _value(estimate: Estimate, setting: Setting) -> float:
    return estimate.estimate if setting.scale == "difference" else math.log(estimate.estimate)
