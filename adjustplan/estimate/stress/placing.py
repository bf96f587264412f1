"""From what is observed to a place on the scale of risk ratios: which bridge the study and its outcome allow.

An odds ratio is near a risk ratio only where the outcome is rare in every group. In a case-control study that depends
on the sampling: with controls drawn from those at risk when each case comes about it is the rate ratio, with controls
from everybody at the start the risk ratio, whether the outcome is rare or not (``study.ODDS_RATIO_MEANS``).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from adjustplan.errors import Finding
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.stress.differences import difference_position
from adjustplan.estimate.stress.observed import Observed
from adjustplan.estimate.stress.scales import RARE, Position, ratio_position
from adjustplan.plan import Plan


def place(plan: Plan, observed: Observed) -> tuple[Position, Observed, tuple[Finding, ...]]:
    """Where the estimate stands; what is observed, completed by the risks of a difference; what was assumed.

    Raises
    ------
    NotEstimableError
        If there is no bridge from this estimate to a risk ratio.
    """
    measure = observed.measure
    said: list[Finding] = []
    numbers = (observed.estimate, observed.lower, observed.upper)
    if observed.is_ratio or measure == "mean difference":
        common = False
        if measure in ("odds ratio", "hazard ratio"):
            common, said = _common(plan, observed)
        position: Position = ratio_position(measure, *numbers, common=common, outcome_sd=observed.outcome_sd)
        return position, observed, tuple(said)
    if observed.risks is None:
        observed, said = _with_risks(observed)
    exposed, reference = observed.risks or (0.0, 0.0)
    if abs(exposed - reference - observed.estimate) > 1e-6 * max(exposed, reference):
        message = f"The two values {exposed:.4g} and {reference:.4g} do not differ by the {measure}."
        raise NotEstimableError("stress-no-conversion", message, "Standardise, so that risks and difference agree.")
    sizes = _sizes(observed)
    return difference_position(measure, exposed, reference, *numbers[1:], sizes=sizes), observed, tuple(said)


def _common(plan: Plan, observed: Observed) -> tuple[bool, list[Finding]]:
    """Whether the outcome is common, and what had to be assumed."""
    study = plan.study
    control_sampling = study.sampling if study and study.design == "case-control" else None
    if observed.measure == "odds ratio" and control_sampling in ("incidence-density", "case-cohort"):
        return False, []
    known = list(_risks(plan, observed))
    if known:
        return max(known) >= RARE, []
    message = f"Nothing says how common the outcome is, so the {observed.measure} is treated as that of a common one."
    remedy = "State assumed_risk in [study]; where the outcome is rare the E-value is larger."
    return True, [Finding("stress-outcome-frequency", message, remedy, "note", str(plan.path), plan.line("study"))]


def _risks(plan: Plan, observed: Observed) -> Iterator[float]:
    """The risks of the outcome in both groups, or the assumed one, as far as the design shows them."""
    if plan.study is None or plan.study.design != "case-control":
        if observed.risks is not None:
            yield from observed.risks
            return
        if observed.table is not None:
            a, b, c, d = map(float, observed.table.cells)
            yield from (cases / everybody for cases, everybody in ((a, a + b), (c, c + d)) if everybody)
            return
    if plan.study and plan.study.assumed_risk is not None:
        yield plan.study.assumed_risk


def _with_risks(observed: Observed) -> tuple[Observed, list[Finding]]:
    """The crude risk of the reference group, and that plus the difference, where no adjusted risks are known."""
    if observed.table is None or observed.measure == "rate difference":
        message = f"The {observed.measure} cannot be put as a ratio, because the two values it is of are not known."
        raise NotEstimableError("stress-no-conversion", message, "Adjust by standardisation, which gives both.")
    _, _, c, d = map(float, observed.table.cells)
    if not c + d:
        message = f"The {observed.measure} cannot be put as a ratio, because the reference group is empty."
        raise NotEstimableError("stress-no-conversion", message, "Name a contrast of which both levels have people.")
    reference = c / (c + d)
    message = f"The crude risk in the reference group, {reference:.3g}, stands for the adjusted one in the E-value."
    note = Finding("stress-crude-risk", message, "Adjust by standardisation, which gives the adjusted one.", "note")
    return replace(observed, risks=(reference + observed.estimate, reference)), [note]


def _sizes(observed: Observed) -> tuple[float, float] | None:
    """People, or person-time, in both groups; None where that is not known of both."""
    sizes = observed.sizes
    if sizes is None and observed.table is not None and observed.measure != "rate difference":
        a, b, c, d = map(float, observed.table.cells)
        sizes = a + b, c + d
    return sizes if sizes is not None and min(sizes) > 0 else None
