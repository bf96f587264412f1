"""Questions that make no sense are refused in words, and never answered."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from adjustplan import identify
from adjustplan.errors import QuestionError
from adjustplan.graph import CausalGraph, Variable

ARROWS = [("age", "diet"), ("age", "gout"), ("diet", "gout"), ("diet", "visit"), ("gout", "visit")]
GRAPH = CausalGraph(ARROWS, [Variable("visit", restricted=True)])

# Every function, asked about exposure and outcome alone.
ASKING: dict[str, Callable[..., object]] = {
    "is_sufficient": lambda graph, x, y: identify.is_sufficient(graph, x, y, ()),
    "judge": lambda graph, x, y: identify.judge(graph, x, y, ()),
    "sufficient_sets": identify.sufficient_sets,
    "iterate_sufficient_sets": lambda graph, x, y: list(identify.iterate_sufficient_sets(graph, x, y)),
    "one_sufficient_set": identify.one_sufficient_set,
    "smallest_sufficient_set": identify.smallest_sufficient_set,
    "cheapest_sufficient_set": identify.cheapest_sufficient_set,
    "most_precise_set": identify.most_precise_set,
    "roles": identify.roles,
    "trace": lambda graph, x, y: list(identify.trace(graph, x, y)),
}
every_function = pytest.mark.parametrize("ask", ASKING.values(), ids=ASKING.keys())


@every_function
def test_an_unknown_exposure_is_refused_and_the_nearest_name_offered(ask):
    with pytest.raises(QuestionError, match="diet"):
        ask(GRAPH, "diett", "gout")


@every_function
def test_an_unknown_outcome_is_refused(ask):
    with pytest.raises(QuestionError, match="kidney_stones"):
        ask(GRAPH, "diet", "kidney_stones")


@every_function
def test_a_variable_has_no_effect_on_itself(ask):
    with pytest.raises(QuestionError):
        ask(GRAPH, "diet", "diet")


@every_function
@pytest.mark.parametrize(("exposure", "outcome"), [("visit", "gout"), ("diet", "visit")])
def test_what_is_held_fixed_is_neither_exposure_nor_outcome(ask, exposure, outcome):
    with pytest.raises(QuestionError, match="visit"):
        ask(GRAPH, exposure, outcome)


@pytest.mark.parametrize(
    "ask",
    [
        lambda members: identify.is_sufficient(GRAPH, "diet", "gout", members),
        lambda members: identify.judge(GRAPH, "diet", "gout", members),
        lambda members: list(identify.trace(GRAPH, "diet", "gout", members)),
    ],
    ids=["is_sufficient", "judge", "trace"],
)
@pytest.mark.parametrize("member", ["diet", "gout", "agee"])
def test_a_set_holds_neither_exposure_nor_outcome_nor_what_the_graph_does_not_know(ask, member):
    with pytest.raises(QuestionError, match=member):
        ask({"age", member})


def test_an_effect_is_total_or_direct():
    with pytest.raises((QuestionError, ValueError), match="partial"):
        identify.sufficient_sets(GRAPH, "diet", "gout", effect="partial")
