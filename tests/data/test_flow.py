"""A flow accounts for everybody: who is left, and why others are not."""

from __future__ import annotations

import pytest

from adjustplan.data.flow import Flow, FlowStep, LeftOut


def test_each_step_and_those_it_left_out_add_up_to_the_step_before() -> None:
    flow = Flow.start(100).then("eligible", 80, "under 18").then("with outcome", 80, "no outcome")
    flow = flow.then_without("analysed", (LeftOut("no age", 5), LeftOut("no site", 3)))
    assert [step.rows for step in flow.steps] == [100, 80, 80, 72]
    assert [step.rows + step.lost for step in flow.steps[1:]] == [step.rows for step in flow.steps[:-1]]
    assert flow.rows == 72


def test_a_step_that_leaves_nobody_out_gives_no_reason() -> None:
    assert Flow.start(3).then("eligible", 3, "under 18").steps[-1] == FlowStep("eligible", 3)


@pytest.mark.parametrize("rows", [-1, 11])
def test_nobody_joins_on_the_way_and_no_more_leave_than_there_were(rows: int) -> None:
    with pytest.raises(ValueError, match="cannot leave"):
        Flow.start(10).then("eligible", rows, "under 18")
