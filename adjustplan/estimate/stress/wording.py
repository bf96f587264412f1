"""A fragile estimate in words and tables."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from adjustplan.estimate.stress.results import CAUTIONS, Fragility, PrevalenceTipping
from adjustplan.estimate.stress.scales import Moved


def as_text(result: Fragility) -> str:
    """The whole result, to be read."""
    crude = "" if result.crude is None else f"; crude {_n(result.crude)}"
    lines = [result.caption(), f"estimate {_interval(Moved(result.estimate, result.lower, result.upper))}{crude}"]
    for head, body in _sections(result):
        lines += ["", head, *(f"  {line}" for line in body)]
    lines += [f"{finding.severity}: {finding}" for finding in result.findings]
    return "\n".join(line.rstrip() for line in [*lines, "", *CAUTIONS])


def summary(result: Fragility) -> list[str]:
    """The E-values and robustness values in sentences."""
    said: list[str] = []
    target = _target(result)
    if result.confounding:
        value = result.confounding.evalue
        beyond = f", beyond {result.adjusted_for}" if result.members else ""
        both = f"with both {result.exposure} and {result.outcome}{beyond}"
        if value.estimate is None:
            said.append(f"No unmeasured confounding could move the {result.measure} to {target}.")
        else:
            said.append(
                f"To move the {result.measure} of {_n(result.estimate)} to {target}, an unmeasured confounder would"
                f" need a risk ratio of at least {_n(value.estimate)} {both} (the E-value)."
            )
        limit = result.lower if value.side == "lower" else result.upper
        if value.limit is None:
            said.append(f"No unmeasured confounding could move the {value.side} limit there.")
        elif value.limit == 1:
            said.append(f"The 95 % interval holds {_n(result.target)} already, so its E-value is 1.")
        else:
            said.append(f"To move the {value.side} limit of {_n(limit)} there, {_n(value.limit)} would be enough.")
        said.append(f"Put as a risk ratio: {value.conversion}.")
    if robust := result.robustness:
        said.append(
            f"A confounder that explains {_p(robust.value)} of what is left of {result.exposure} and of"
            f" {result.outcome} alike would move the estimate to {target} (the robustness value);"
            f" {_p(robust.limit_value)} would be enough for the limit of the 95 % interval."
        )
        said.append(
            f"{result.exposure} explains {_p(robust.partial_r2)} of what is left of {result.outcome}; a confounder that"
            f" explained all of that would need to explain {_p(robust.extreme)} of {result.exposure}."
        )
    return said


def said_of_unmeasured(result: Fragility, name: str) -> str:
    """How strong an unmeasured variable of the graph would have to be."""
    start = f"“{name}” is unmeasured and on a path that adjusting for {result.adjusted_for} leaves open."
    assumed = {each.name: each.bounded for each in result.confounding.named} if result.confounding else {}
    if name in assumed:
        left = assumed[name]
        return (
            f"{start} With risk ratios of at most {_n(left.with_exposure)} and {_n(left.with_outcome)} it could leave"
            f" {_interval(left.moved)}."
        )
    if result.confounding is None or result.confounding.evalue.estimate is None:
        return start
    value = result.confounding.evalue
    limit = (
        "" if value.limit is None or value.limit == 1 else f", and of {_n(value.limit)} to move the {value.side} limit"
    )
    return (
        f"{start} It would need risk ratios of at least {_n(value.estimate or 1)} with {result.exposure} and with"
        f" {result.outcome} to move the estimate to {_target(result)}{limit}."
    )


def _sections(result: Fragility) -> Iterator[tuple[str, list[str]]]:
    if told := summary(result):
        yield "How strong must it be?", told
    if result.unmeasured:
        yield "Unmeasured in the graph", [said_of_unmeasured(result, name) for name in result.unmeasured]
    yield from _confounding(result)
    if result.prevalences:
        yield "How common must it be among the exposed?", [_prevalence(result, each) for each in result.prevalences]
    if result.yardsticks:
        yield "An unmeasured confounder as strong as a covariate would leave", _yardsticks(result)
    if result.linear_confounders:
        head = ("confounder", "of exposure", "of outcome", "estimate left", "enough")
        rows = [
            (
                each.name,
                _p(each.move.share_of_exposure),
                _p(each.move.share_of_outcome),
                _interval(each.move.moved),
                _yes(result.explains(each.move.moved)),
            )
            for each in result.linear_confounders
        ]
        yield "Confounders by the share of the variance they explain", _table([head, *rows])
    if result.biases:
        yield "Without the bias: median and 95 % of the draws", _biases(result)


def _confounding(result: Fragility) -> Iterator[tuple[str, list[str]]]:
    told = result.confounding
    if told is None:
        return
    if told.named:
        head = ("confounder", "with exposure", "with outcome", "bounding factor", "estimate left", "enough")
        rows = [
            (
                each.name,
                _n(each.bounded.with_exposure),
                _n(each.bounded.with_outcome),
                _n(each.bounded.factor),
                _interval(each.bounded.moved),
                _yes(each.bounded.explains),
            )
            for each in told.named
        ]
        yield "What a confounder could leave, at most moved", _table([head, *rows])
    heads = ("with exposure", *(f"outcome {_n(step)}" for step in told.strengths))
    grid = [
        (_n(step), *(f"{_n(cell.moved.estimate)}{'*' if cell.explains else ''}" for cell in row))
        for step, row in zip(told.strengths, told.array, strict=True)
    ]
    note = f"* moved to {_target(result)} or beyond"
    yield "What would be left of the estimate, by strength", [*_table([heads, *grid]), note]
    columns = ("with exposure", "outcome, for the estimate", f"outcome, for the {told.evalue.side} limit")
    tips = [(_n(each.with_exposure), _enough(each.for_estimate), _enough(each.for_limit)) for each in told.tipping]
    yield "Just enough to tip it", _table([columns, *tips])


def _prevalence(result: Fragility, each: PrevalenceTipping) -> str:
    effect = "adding" if result.measure == "mean difference" else "with an effect of"
    start = f"“{each.name}”, {effect} {_n(each.effect)} and in {_p(each.among_reference)} of the reference group:"
    if each.among_exposed is None:
        return f"{start} no share among the exposed moves the estimate to {_target(result)}."
    return f"{start} {_p(each.among_exposed)} of the exposed would move the estimate to {_target(result)}."


def _yardsticks(result: Fragility) -> list[str]:
    rows: list[tuple[str, ...]] = [("covariate", "its strength", "estimate left", "enough")]
    for each in result.yardsticks:
        if each.linear is not None:
            shares = _p(each.linear.share_of_exposure), _p(each.linear.share_of_outcome)
            strength = f"explains {shares[0]} of the exposure, at most {shares[1]} of the outcome"
        else:
            assert each.change is not None
            strength = f"without it {_n(each.change.without)}"
        rows.append((each.name, strength, _interval(each.moved), _yes(result.explains(each.moved))))
    lines = _table(rows)
    if any(each.change is not None for each in result.yardsticks):
        lines.append(
            "Leaving the covariate out moved the estimate; the same move is made once more from the adjusted one."
        )
    return lines


def _biases(result: Fragility) -> list[str]:
    rows: list[tuple[str, ...]] = [("bias", "kind", "from the bias alone", "with random error", "impossible draws")]
    for each in result.biases:
        intervals = [_interval(moved) if moved else "none" for moved in (each.systematic, each.total)]
        rows.append((each.name, each.kind, *intervals, f"{each.impossible} of {each.draws}"))
    return [*_table(rows), f"seed {result.biases[0].seed}"]


def _table(rows: Sequence[tuple[str, ...]]) -> list[str]:
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    return ["  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)) for row in rows]


def _target(result: Fragility) -> str:
    value = _n(result.target)
    return f"{value} (no effect)" if result.target == result.no_effect else value


def _interval(moved: Moved) -> str:
    return f"{_n(moved.estimate)} ({_n(moved.lower)} to {_n(moved.upper)})"


def _enough(strength: float | None) -> str:
    return "none is enough" if strength is None else _n(strength)


def _yes(explains: bool) -> str:
    return "yes" if explains else "no"


def _n(value: float) -> str:
    return f"{value:.3g}"


def _p(share: float) -> str:
    return f"{100 * share:.3g} %"
