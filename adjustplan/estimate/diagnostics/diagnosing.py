"""Every diagnostic of the planned set, from the numbers that the fit has anyway.

A diagnostic that fails takes nothing else with it: it is then None, stands in the list of what is absent with the
reason, and is a finding. One that does not apply (a rule about outcomes where the outcome is a quantity) is absent with
its reason and no finding.

Models that run on rows have no problem on patterns. Theirs is posed here, which gives balance, positivity, overlap,
outcomes per parameter and the inflation of the variance; influence and linearity rest on the fit and are absent.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from adjustplan.data import Floats, Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.asking import AbsentError, Desk
from adjustplan.estimate.diagnostics.balance import Marks, effective_size
from adjustplan.estimate.diagnostics.collinearity import Inflation, inflation_findings, variance_inflation
from adjustplan.estimate.diagnostics.covariates import CovariateBalance, balance_of_groups, balance_of_number
from adjustplan.estimate.diagnostics.curves import departure, straight_lines
from adjustplan.estimate.diagnostics.leaving_out import LeavingOut, leaving_out
from adjustplan.estimate.diagnostics.linearity import Departure, linearity_findings
from adjustplan.estimate.diagnostics.of_rows import departures_of_rows, leaving_out_row
from adjustplan.estimate.diagnostics.outcomes import OutcomesPerParameter, outcomes_findings, outcomes_per_parameter
from adjustplan.estimate.diagnostics.overlap import (
    Positivity,
    ScoreOverlap,
    overlap_findings,
    positivity,
    positivity_findings,
    score_overlap,
)
from adjustplan.estimate.diagnostics.section import Absent, Diagnostics, NamedTest, WeightDiagnostics, gathered
from adjustplan.estimate.diagnostics.weights import summarise_weights, weight_findings
from adjustplan.estimate.modelling import Modelled, pose
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Setting, Solution
from adjustplan.estimate.row_models import has_own_interval
from adjustplan.estimate.ways.propensity import propensity
from adjustplan.plan.analysis_faults import WITHOUT_OUTCOME_MODEL

__all__ = ["Absent", "Diagnostics", "NamedTest", "WeightDiagnostics", "diagnose"]

MOST_REFITTED = 300_000
"""Patterns times covariates up to which straight lines are tested by fitting again; the rest is left out, and said."""


@dataclass(frozen=True, eq=False)
class _Case:
    """What the diagnostics look at."""

    patterns: Patterns
    setting: Setting
    members: Sequence[str]
    problem: Problem
    adjusted: Modelled
    weights: Floats | None
    patterns_given: Patterns

    @property
    def solution(self) -> Solution | None:
        """What the way to adjust found, if it was on these patterns."""
        return self.adjusted.solution if self.problem is self.adjusted.problem else None

    @property
    def people(self) -> Floats:
        """People of each pattern."""
        return self.problem.moments.people.astype(np.float64)

    @property
    def groups(self) -> tuple[Marks, Marks]:
        """Exposed and reference people, as far as they count."""
        counts = self.problem.moments.weight > 0
        return self.problem.is_exposed & counts, self.problem.is_reference & counts

    @property
    def has_levels(self) -> bool:
        """Whether two levels are compared and somebody has each."""
        return all(bool(group.any()) for group in self.groups)


def diagnose(
    complete: Patterns,
    setting: Setting,
    members: Sequence[str],
    adjusted: Modelled,
    *,
    weights: Floats | None = None,
    proportional_hazards: Sequence[NamedTest] | None = None,
    findings: Sequence[Finding] = (),
) -> Diagnostics | None:
    """Diagnose the adjusted estimate of a set.

    Parameters
    ----------
    complete : Patterns
        Of the rows complete for the exposure and ``members``; atoms for models that need rows.
    setting : Setting
        Of the estimate.
    members : sequence of str
    adjusted : Modelled
        What came of the set.
    weights : array of float, shape (patterns,), optional
        Of inverse probability, for each pattern of the rows pooled by exposure and members, 0 for people at neither
        level compared; by default those of ``adjusted``, if it has any.
    proportional_hazards : sequence of NamedTest, optional
        Of a Cox model.
    findings : sequence of Finding
        What these tests say.

    Returns
    -------
    Diagnostics or None
        None where the set poses no problem that a model could be fitted to; its findings say why.
    """
    try:
        case = _case(complete, setting, members, adjusted, weights)
    except NotEstimableError:
        return None
    desk = Desk()
    balance = desk.ask("Balance", lambda: _balance(case), lambda found: found.findings)
    holes = desk.ask("Positivity", lambda: _positivity(case), positivity_findings)
    overlap = desk.ask("Overlap", lambda: _overlap(case), overlap_findings)
    carried = None
    if case.weights is not None:
        carried = desk.ask("Weights", lambda: _weights(case), lambda found: weight_findings(found.summary))
    outcomes = desk.ask("Outcomes per parameter", lambda: _outcomes(case), outcomes_findings)
    influence = desk.ask("Influence", lambda: _influence(case), lambda found: found.findings)
    linearity = _linearity(case, desk)
    inflation = desk.ask(
        "Variance inflation", lambda: _inflation(case), lambda found: inflation_findings(setting.exposure, found)
    )
    hazards = None if proportional_hazards is None else tuple(proportional_hazards)
    # what the fit has said already is not said again
    known = {finding.message for finding in adjusted.findings}
    said = [one for one in gathered(desk.said) if one.message.partition(": ")[2] not in known]
    return Diagnostics(
        balance,
        holes,
        overlap,
        carried,
        outcomes,
        influence,
        linearity,
        inflation,
        hazards,
        tuple(desk.absent),
        (*said, *findings),
    )


def _case(
    complete: Patterns, setting: Setting, members: Sequence[str], adjusted: Modelled, weights: Floats | None
) -> _Case:
    problem, patterns = adjusted.problem, complete
    if problem is None or len(problem.moments) != len(complete):
        patterns = complete.complete([setting.exposure, *members])
        forms = {name: "category" if form == "stratum" else form for name, form in setting.forms.items()}
        problem, _ = pose(patterns, replace(setting, forms=forms, variance="robust", modifier=None), members)
    if weights is None and adjusted.solution is not None and problem is adjusted.problem:
        weights = adjusted.solution.balance
    if weights is not None and len(weights) != len(patterns):
        raise ValueError(f"{len(weights)} weights for {len(patterns)} patterns")
    return _Case(patterns, setting, members, problem, adjusted, weights, complete)


def _needs_members(case: _Case) -> None:
    if not case.members:
        raise AbsentError("nothing is adjusted for.")


def _needs_levels(case: _Case) -> None:
    if not case.has_levels:
        raise AbsentError("the exposure has no two groups that are compared.")


def _balance(case: _Case) -> CovariateBalance:
    _needs_members(case)
    people, weight = case.people, case.problem.moments.weight
    rows = weight * (people.sum() / weight.sum())
    if case.setting.coding.form == "category":
        _needs_levels(case)
        _finite(case.weights)
        return balance_of_groups(case.patterns, case.members, case.setting.forms, case.groups, rows, case.weights)
    exposure = case.patterns.values[case.setting.exposure].to_numpy(dtype=np.float64)
    return balance_of_number(case.patterns, case.members, case.setting.forms, exposure, rows)


def _finite(weights: Floats | None) -> None:
    if weights is not None and not np.isfinite(weights).all():
        message = "A weight is infinite, because somebody’s exposure was all but impossible."
        raise NotEstimableError(
            "estimate-extreme-weights", message, "Truncate the weights, or restrict the population."
        )


def _positivity(case: _Case) -> Positivity:
    _needs_members(case)
    _needs_levels(case)
    names = [name for name in case.members if case.setting.forms[name] in ("category", "stratum")]
    if not names:
        raise AbsentError("no covariate is a category; see the overlap.")
    exposed, reference = case.groups
    strata = case.patterns.values.groupby(names, sort=False).ngroup().to_numpy()
    return positivity(np.asarray(strata, dtype=np.int64), exposed, reference, case.people)


def _overlap(case: _Case) -> ScoreOverlap:
    _needs_members(case)
    _needs_levels(case)
    score = None if case.solution is None else case.solution.scores
    if score is None:
        score = propensity(case.problem).weights(case.problem)[0].probability
    return score_overlap(score, *case.groups, case.people)


def _weights(case: _Case) -> WeightDiagnostics:
    _needs_levels(case)
    assert case.weights is not None
    _finite(case.weights)
    weights, people = case.weights, case.people
    groups = case.groups
    either = groups[0] | groups[1]
    sizes = [effective_size(weights[group], people[group]) for group in groups]
    counts = [float(people[group].sum()) for group in groups]
    return WeightDiagnostics(summarise_weights(weights[either], people[either]), sizes[0], sizes[1], *counts)


def _outcomes(case: _Case) -> OutcomesPerParameter:
    kind, moments = case.setting.kind, case.problem.moments
    if case.setting.way in WITHOUT_OUTCOME_MODEL:
        raise AbsentError(f"{case.setting.way} has no model of the outcome.")
    if kind == "mean":
        raise AbsentError("the outcome is a quantity, and the rule is about people who have an outcome.")
    counted = _whole(float(case.people @ np.nan_to_num(moments.mean)))
    strata = [name for name in case.members if case.setting.forms[name] == "stratum"]
    parameters = sum(name not in strata for name in case.problem.matrix.variables if name)
    others = _whole(float(case.people.sum()) - counted) if kind == "risk" else None
    return outcomes_per_parameter(counted, others, parameters)


def _whole(count: float) -> float:
    """A count is whole; a mean times people is so only up to rounding, or with sampling weights not at all."""
    return round(count) * 1.0 if abs(count - round(count)) <= 1e-6 * max(count, 1.0) else count


def _influence(case: _Case) -> LeavingOut:
    fitted = case.adjusted.row_fit
    if fitted is not None and fitted.result is not None:
        return leaving_out_row(fitted)
    estimate, solution = case.adjusted.estimate, case.solution
    if solution is None or estimate is None or solution.influence is None:
        raise AbsentError("the estimate has no influence of each person to go by.")
    binary = case.setting.kind == "risk"
    return leaving_out(solution.influence, case.problem.moments, estimate.standard_error, binary=binary)


def _linearity(case: _Case, desk: Desk) -> tuple[Departure, ...] | None:
    """A test for each straight line; what fails is left out and said."""
    solution, estimate = case.solution, case.adjusted.estimate
    lines = straight_lines(case.patterns, case.problem, case.members)
    if not lines:
        return ()
    fitted = case.adjusted.row_fit
    if fitted is not None and fitted.result is not None:
        tests = departures_of_rows(case.patterns_given, case.setting, tuple(case.members), fitted)
        asked = [desk.ask(f"Linearity of {name}", test, linearity_findings) for name, test in tests.items()]
        return tuple(one for one in asked if one is not None)
    if has_own_interval(case.setting):
        desk.absent.append(Absent("Linearity", f"a {case.setting.model} regression is not fitted again with curves."))
        return None
    if solution is None or case.setting.way == "stratification":
        desk.absent.append(Absent("Linearity", "there is no estimate to set beside that with a curve."))
        return None
    error = None if estimate is None else estimate.standard_error
    found: list[Departure] = []
    affordable = max(1, MOST_REFITTED // len(case.patterns))
    for name in lines[:affordable]:
        tested = desk.ask(
            f"Linearity of {name}",
            lambda name=name: departure(case.patterns, case.problem, solution, error, name),  # type: ignore[misc]
            linearity_findings,
        )
        found += [] if tested is None else [tested]
    for name in lines[affordable:]:
        reason = f"fitting {len(case.patterns)} patterns again for each straight line would take too long."
        desk.absent.append(Absent(f"Linearity of {name}", reason))
    return tuple(found)


def _inflation(case: _Case) -> Inflation:
    _needs_members(case)
    if case.setting.way in WITHOUT_OUTCOME_MODEL:
        raise AbsentError(f"{case.setting.way} has no model of the outcome.")
    matrix = case.problem.matrix
    if case.problem.setting.modifier in case.members and case.problem.setting.way != "regression":
        raise AbsentError("the model has products of exposure and modifier, and each has its own.")
    return variance_inflation(matrix.columns, case.problem.moments.weight, ~matrix.covariates, matrix.contrast)
