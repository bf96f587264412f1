"""How fragile the planned estimate is: everything that can be asked of it, put together.

The parts each have a file of their own, and know nothing of plans. Here the plan's ``[stress]`` says which are asked,
and the graph which unmeasured variables they are about. What cannot be answered is left out with a finding.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from adjustplan.errors import Finding, PlanError, Severity
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.stress.bias import Bias, Simulated, simulate
from adjustplan.estimate.stress.binary import tipping_prevalence, tipping_prevalence_of_difference
from adjustplan.estimate.stress.bounding import bounded, bounded_array, strengths, tipping_points
from adjustplan.estimate.stress.distributions import share_cut_off, typical
from adjustplan.estimate.stress.evalues import evalues
from adjustplan.estimate.stress.faults import faults
from adjustplan.estimate.stress.observed import Observed
from adjustplan.estimate.stress.placing import place
from adjustplan.estimate.stress.reaching import MOST_PATHS, unmeasured_on_open_paths
from adjustplan.estimate.stress.results import (
    Confounding,
    Fragility,
    LinearConfounding,
    Measured,
    NamedConfounder,
    PrevalenceTipping,
)
from adjustplan.estimate.stress.robustness import Robustness, moved_by, robustness
from adjustplan.estimate.stress.scales import Position
from adjustplan.estimate.stress.yardstick import left_out, moved_like
from adjustplan.plan import Plan
from adjustplan.plan.stress_schema import MisclassifiedOutcome, Stress

_MANY = 0.1  # share of impossible draws above which the assumptions look wrong; common practice, no source


def stress(plan: Plan, observed: Observed) -> Fragility:
    """How strong unmeasured confounding and other biases would have to be, and what they would leave.

    Parameters
    ----------
    plan : Plan
        With a planned set; its ``[stress]`` may be missing.
    observed : Observed
        The planned estimate and what is known around it.

    Raises
    ------
    PlanError
        If ``[stress]`` does not fit the rest of the plan.
    """
    assumed: Stress = plan.file.stress or Stress.model_validate({})
    if found := list(faults(plan, assumed, observed.measure, is_ratio=observed.is_ratio)):
        raise PlanError(found)
    target = observed.no_effect if assumed.target is None else assumed.target
    said: list[Finding] = []
    position: Position | None = None
    try:
        position, observed, notes = place(plan, observed)
        said += notes
    except NotEstimableError as error:
        said.append(error.finding)
    question = plan.question
    reaching = unmeasured_on_open_paths(
        plan.judged_graph, question.exposure, question.outcome, question.effect, plan.adjustment.members
    )
    if not reaching.complete:
        message = f"The planned set leaves more than {MOST_PATHS} paths open, of which the shortest were looked at."
        remedy = "More unmeasured variables than are named may lie on them; choose a set that blocks more."
        said.append(Finding("stress-many-paths", message, remedy, "warning", str(plan.path), plan.line("adjustment")))
    yardsticks = _yardsticks(plan, assumed, observed, target, said)
    linear = _linear_confounders(plan, assumed, observed, target, said)
    biases = _biases(plan, assumed, observed, said)
    return Fragility(
        measure=observed.measure,
        exposure=question.exposure,
        outcome=question.outcome,
        members=tuple(sorted(plan.adjustment.members)),
        estimate=observed.estimate,
        lower=observed.lower,
        upper=observed.upper,
        crude=observed.crude,
        target=target,
        no_effect=observed.no_effect,
        confounding=None if position is None else _confounding(assumed, position, target, reaching.names),
        unmeasured=reaching.names,
        prevalences=() if position is None else tuple(_prevalences(assumed, observed, position, target)),
        robustness=_robustness(observed, target),
        yardsticks=yardsticks,
        linear_confounders=linear,
        biases=biases,
        findings=tuple(dict.fromkeys(said)),
    )


def _confounding(assumed: Stress, position: Position, target: float, reaching: tuple[str, ...]) -> Confounding:
    value = evalues(position, target)
    steps = strengths(value.estimate)
    named = [
        NamedConfounder(
            each.name, each.name in reaching, bounded(position, target, each.with_exposure, each.with_outcome)
        )
        for each in sorted(assumed.confounder, key=lambda each: each.name)
    ]
    return Confounding(
        value,
        tuple(named),
        steps,
        bounded_array(position, target, steps),
        tipping_points(position, target, steps),
    )


def _prevalences(assumed: Stress, observed: Observed, position: Position, target: float) -> Iterator[PrevalenceTipping]:
    """For each confounder with two levels, the share among the exposed with which the estimate tips."""
    for each in sorted(assumed.binary_confounder, key=lambda each: each.name):
        share = typical(each.among_reference)
        if each.outcome_ratio is not None and observed.measure != "mean difference":
            effect = typical(each.outcome_ratio)
            if observed.is_ratio:
                factor = observed.estimate / target
            else:
                exposed, reference = observed.risks or (position.estimate, 0.0)
                factor = (exposed - target) / reference if reference else 0.0
            tips = tipping_prevalence(factor, share, effect) if factor > 0 else None
        elif each.outcome_difference is not None and not observed.is_ratio:
            effect = typical(each.outcome_difference)
            tips = tipping_prevalence_of_difference(observed.estimate - target, share, effect)
        else:
            continue
        yield PrevalenceTipping(each.name, share, effect, tips)


def _residual_freedom(observed: Observed) -> float | None:
    """The degrees of freedom, where shares of variance can be spoken of."""
    freedom = observed.degrees_of_freedom
    usable = (
        observed.measure == "mean difference" and freedom is not None and freedom > 1 and observed.standard_error > 0
    )
    return freedom if usable else None


def _robustness(observed: Observed, target: float) -> Robustness | None:
    freedom = _residual_freedom(observed)
    return None if freedom is None else robustness(observed.estimate, observed.standard_error, freedom, target)


def _yardsticks(
    plan: Plan, assumed: Stress, observed: Observed, target: float, said: list[Finding]
) -> tuple[Measured, ...]:
    """What an unmeasured confounder as strong as each covariate would leave."""
    found: list[Measured] = []
    freedom = _residual_freedom(observed)
    numbers = (observed.estimate, observed.lower, observed.upper)
    chosen = plan.adjustment.members if assumed.yardsticks is None else assumed.yardsticks
    for name in sorted(set(chosen)):
        covariate = observed.yardsticks.get(name)
        if covariate and freedom and covariate.with_exposure is not None and covariate.with_outcome is not None:
            move = moved_like(
                observed.estimate,
                observed.standard_error,
                freedom,
                covariate.with_exposure,
                covariate.with_outcome,
                target=target,
            )
            if move is not None:
                found.append(Measured(name, "explained variance", move.moved, move, None))
                continue
            message = f"Nothing unmeasured can be as strong as “{name}”, which explains most of the exposure."
            said.append(_here(plan, "stress-yardstick-too-strong", message, "", "note", "yardsticks"))
        elif covariate and covariate.without is not None and (covariate.without > 0 or not observed.is_ratio):
            change = left_out(*numbers, covariate.without, ratio=observed.is_ratio)
            found.append(Measured(name, "left out", change.moved, None, change))
        else:
            message = f"“{name}” cannot serve as a yardstick, because the model without it has no estimate."
            said.append(_here(plan, "stress-no-yardstick", message, "Name others in yardsticks.", "note", "yardsticks"))
    return tuple(found)


def _linear_confounders(
    plan: Plan, assumed: Stress, observed: Observed, target: float, said: list[Finding]
) -> tuple[LinearConfounding, ...]:
    freedom = _residual_freedom(observed)
    if assumed.linear_confounder and freedom is None:
        message = "A confounder by explained variance needs a mean difference from a linear regression, with the"
        message += " variance of the model."
        remedy = "Use [[stress.confounder]], with ratios."
        said.append(_here(plan, "stress-unfit", message, remedy, "error", "linear_confounder", 0))
    if freedom is None:
        return ()
    return tuple(
        LinearConfounding(
            each.name,
            moved_by(
                observed.estimate,
                observed.standard_error,
                freedom,
                each.share_of_exposure,
                each.share_of_outcome,
                target=target,
            ),
        )
        for each in sorted(assumed.linear_confounder, key=lambda each: each.name)
    )


def _biases(plan: Plan, assumed: Stress, observed: Observed, said: list[Finding]) -> tuple[Simulated, ...]:
    lists: dict[str, Sequence[Bias]] = {
        "binary_confounder": assumed.binary_confounder,
        "misclassified_exposure": assumed.misclassified_exposure,
        "misclassified_outcome": assumed.misclassified_outcome,
        "selection": assumed.selection,
    }
    found: list[Simulated] = []
    for kind, biases in lists.items():
        for number, bias in sorted(enumerate(biases), key=lambda pair: pair[1].name):
            key = (kind, number)
            said += _about(plan, key, bias)
            try:
                result = simulate(observed, bias, assumed.draws, assumed.seed)
            except NotEstimableError as error:
                finding = error.finding
                message = f"“{bias.name}”: {finding.message}"
                said.append(_here(plan, finding.code, message, finding.remedy, finding.severity, *key))
                continue
            found.append(result)
            said += _impossible(plan, key, result)
    return tuple(found)


def _about(plan: Plan, where: tuple[str, int], bias: Bias) -> Iterator[Finding]:
    """What to know of the assumptions of one bias before it is drawn."""
    for key, share in share_cut_off(bias):
        cut = f"{100 * share:.3g} % of the normal distribution of {key}"
        message = f"“{bias.name}”: {cut} is where it cannot be, and is cut off."
        yield _here(plan, "stress-cut-off", message, "A beta or triangular distribution stays inside.", "note", *where)
    if isinstance(bias, MisclassifiedOutcome) and plan.study and plan.study.design == "case-control":
        message = (
            f"“{bias.name}”: sampling by the recorded outcome changes sensitivity and specificity among the sampled."
        )
        remedy = "Give those of the people sampled, not those of the population."
        yield _here(plan, "stress-sampled-by-outcome", message, remedy, "warning", *where)


def _impossible(plan: Plan, where: tuple[str, int], result: Simulated) -> Iterator[Finding]:
    if not result.impossible:
        return
    told = f"{result.impossible} of {result.draws} draws"
    remedy = "Look whether sensitivity or specificity is assumed too low for these data."
    if result.systematic is None:
        message = f"“{result.name}” is impossible: no draw of it could have made these data."
        yield _here(plan, "stress-no-possible-draw", message, remedy, "error", *where)
    else:
        message = f"“{result.name}”: {told} could not have made these data, and were left out."
        severity: Severity = "warning" if result.share_impossible > _MANY else "note"
        yield _here(plan, "stress-impossible-draws", message, remedy, severity, *where)


def _here(plan: Plan, code: str, message: str, remedy: str, severity: Severity, *key: str | int) -> Finding:
    return Finding(code, message, remedy, severity, str(plan.path), plan.line("stress", *key))
