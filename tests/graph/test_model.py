"""The model of a causal graph refuses what is none, wherever it comes from."""

from __future__ import annotations

import pytest

from adjustplan.errors import GraphError, QuestionError
from adjustplan.graph import Arrow, CausalGraph, Variable


def test_variables_are_added_in_the_order_in_which_arrows_name_them() -> None:
    graph = CausalGraph([("b", "a"), ("a", "c")], [Variable("z")])
    assert [variable.name for variable in graph] == ["z", "b", "a", "c"]


def test_graphs_are_equal_whatever_the_order() -> None:
    first = CausalGraph([("a", "b"), ("a", "c", "why")])
    second = CausalGraph([Arrow("a", "c", "why"), ("a", "b")], [Variable("c")])
    assert first == second
    assert hash(first) == hash(second)
    assert first != CausalGraph([("a", "b"), ("a", "c")])


def test_everything_wrong_is_said_at_once() -> None:
    with pytest.raises(GraphError) as caught:
        CausalGraph([("a", "b"), ("b", "a"), ("c", "c")], [Variable("d", cost=float("nan")), Variable("d")])
    codes = {finding.code for finding in caught.value.findings}
    assert codes == {"graph-cycle", "graph-self-arrow", "graph-bad-cost", "graph-variable-twice"}


def test_an_unknown_variable_offers_the_nearest() -> None:
    with pytest.raises(QuestionError, match="Did you mean “night_work”"):
        CausalGraph([("night_work", "diabetes")]).number("nightwork")
