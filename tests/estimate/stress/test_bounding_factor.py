"""The bounding factor against brute force: no confounder biases by more, and one biases by just as much."""

from __future__ import annotations

import numpy as np
import pytest

from adjustplan.estimate.stress.bounding import (
    bounded,
    bounded_array,
    bounding_factor,
    partner_strength,
    strengths,
    tipping_points,
)
from adjustplan.estimate.stress.differences import difference_position
from adjustplan.estimate.stress.evalues import evalue
from adjustplan.estimate.stress.scales import Position, ratio_position

POSITIONS: list[tuple[Position, float]] = [
    (ratio_position("risk ratio", 2.2, 1.4, 3.4), 1.0),
    (ratio_position("risk ratio", 0.45, 0.3, 0.7), 1.0),
    (ratio_position("odds ratio", 2.2, 1.4, 3.4, common=True), 1.2),
    (ratio_position("hazard ratio", 2.2, 1.4, 3.4, common=True), 1.0),
    (ratio_position("mean difference", 4.0, 1.0, 7.0, outcome_sd=9.0), 0.0),
    (difference_position("risk difference", 0.3, 0.12, 0.1, 0.26, sizes=(200, 700)), 0.0),
    (difference_position("risk difference", 0.12, 0.3, -0.26, -0.1, sizes=(200, 700)), 0.0),
]


@pytest.mark.parametrize("levels", [2, 3])
def test_no_confounder_biases_by_more_than_the_bounding_factor(levels: int) -> None:
    rng = np.random.default_rng(levels)
    closest = 0.0
    for _ in range(3000):
        among = rng.dirichlet(np.full(levels, 0.4), 2) + 1e-9  # exposed, reference
        among /= among.sum(1, keepdims=True)
        risk = np.clip(rng.beta(0.6, 1.5, (2, levels)), 1e-6, 1)
        share = rng.uniform(0.05, 0.95)
        whole = share * among[0] + (1 - share) * among[1]
        p1, p0 = among[0] @ risk[0], among[1] @ risk[1]
        with_outcome = (risk.max(1) / risk.min(1)).max()
        raised = bounding_factor((among[0] / among[1]).max(), with_outcome)
        lowered = bounding_factor((among[1] / among[0]).max(), with_outcome)
        for standard in (whole, among[0], among[1]):
            truth = (standard @ risk[0]) / (standard @ risk[1])
            bias = p1 / p0 / truth
            assert 1 / lowered <= bias * (1 + 1e-9)
            assert bias <= raised * (1 + 1e-9)
            closest = max(closest, bias / raised)
        if 0 < p0 < 1 and 0 < p1 < 1:
            position = difference_position(
                "risk difference", p1, p0, p1 - p0 - 0.1, p1 - p0 + 0.1, sizes=(share, 1 - share)
            )
            difference = whole @ (risk[0] - risk[1])
            assert position.moved(raised, True).estimate <= difference + 1e-9
            assert position.moved(lowered, False).estimate >= difference - 1e-9
    assert closest > 0.8  # the drawn confounders do come near it


@pytest.mark.parametrize(("a", "b"), [(1.0, 3.0), (2.0, 2.0), (5.0, 1.3), (40.0, 7.0)])
def test_one_confounder_biases_by_exactly_the_bounding_factor(a: float, b: float) -> None:
    # everybody exposed has it, one in a of the others, and it multiplies the risk by b; no effect of the exposure
    crude = (0.01 * b) / (0.01 * b / a + 0.01 * (1 - 1 / a))
    assert bounding_factor(a, b) == pytest.approx(crude, rel=1e-12)


def test_strengths_that_are_just_enough_move_the_estimate_to_the_target() -> None:
    for position, target in POSITIONS:
        steps = strengths(6.0)
        for tip in tipping_points(position, target, steps):
            if tip.for_estimate is not None:
                left = bounded(position, target, tip.with_exposure, tip.for_estimate).moved
                assert left.estimate == pytest.approx(target, abs=1e-9)
            if tip.for_limit is not None and tip.for_limit > 1:
                left = bounded(position, target, tip.with_exposure, tip.for_limit).moved
                nearest = left.lower if position.estimate > target else left.upper
                assert nearest == pytest.approx(target, abs=1e-8)


def test_a_strength_not_above_the_needed_bias_is_never_enough() -> None:
    assert partner_strength(2.0, 2.0) is None
    assert bounding_factor(2.0, 1e12) < 2.0
    assert partner_strength(2.0, 2.0001) == pytest.approx(2.0 * 1.0001 / 0.0001)
    assert partner_strength(1.0, 1.0) == 1.0
    assert partner_strength(None, 5.0) is None


def test_the_array_shows_the_estimate_tip() -> None:
    for position, target in POSITIONS:
        needed = position.needed(target).estimate
        assert needed is not None
        steps = strengths(evalue(needed))
        array = bounded_array(position, target, steps)
        told = {cell.explains for row in array for cell in row}
        assert told == {True, False}
        for row in array:
            for cell in row:
                beyond = (cell.moved.estimate - target) * (position.estimate - target) <= 1e-12
                assert cell.explains == beyond
        distances = [abs(cell.moved.estimate - position.estimate) for cell in array[2]]
        assert distances == sorted(distances)


@pytest.mark.parametrize("value", [1.0, 1.01, 1.8, 2.0, 21.0, 900.0, 5000.0, None])
def test_the_strengths_of_the_array_rise_and_surround_the_evalue(value: float | None) -> None:
    steps = strengths(value)
    assert len(steps) == 6
    assert list(steps) == sorted(set(steps))
    if value is not None and value <= 1000:
        assert steps[-1] >= value


def test_a_strength_below_1_is_refused() -> None:
    with pytest.raises(ValueError, match="at least 1"):
        bounding_factor(0.5, 2.0)
