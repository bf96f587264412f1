"""The yardsticks are held against each other before anything is held against them.

Enumeration of paths, the covariance algebra of linear models and networkx's d-separation are three roads to
the same answers. Where they meet, a mistake in one of them would have shown.
"""

import networkx as nx
from hypothesis import given, settings
from truth.brute_force import Question
from truth.drawn_graphs import every_graph, every_pair, questions
from truth.linear_gaussian import LinearModel

QUIET = settings(max_examples=120, deadline=None, derandomize=True, print_blob=False)


def test_there_are_as_many_small_graphs_as_robinson_counted():
    # Robinson 1973, "Counting labeled acyclic digraphs"; sequence A003024 of the OEIS.
    assert [sum(1 for _ in every_graph(size)) for size in (1, 2, 3, 4)] == [1, 3, 25, 543]


def test_blocking_every_path_is_what_networkx_calls_separated():
    for graph in every_graph(4):
        directed = graph.to_networkx()
        for exposure, outcome in every_pair(graph):
            question = Question(graph, exposure, outcome)
            for members in question.subsets:
                expected = nx.is_d_separator(directed, {exposure}, {outcome}, set(members))
                assert question.arrows.separated(exposure, outcome, members) == expected


@QUIET
@given(questions(largest=7, effects=("total",)))
def test_a_set_is_sufficient_exactly_when_regression_finds_the_total_effect(question):
    model = LinearModel(question, seed=1)
    for members in question.subsets:
        assert question.is_sufficient(members) == (model.adjusted_coefficient(members) == model.effect)


@QUIET
@given(questions(largest=7, effects=("direct",)))
def test_a_set_is_sufficient_exactly_when_regression_finds_the_direct_effect(question):
    model = LinearModel(question, seed=2)
    no_arrow = question.graph.arrow(question.exposure, question.outcome) is None
    for members in question.subsets:
        # Without the arrow the direct effect is nil, and regression may find that nil even when it adjusts
        # for what the outcome leads to; the single-door criterion forbids that all the same.
        if no_arrow and question.conditioned(members) & question.forbidden:
            assert not question.is_sufficient(members)
        else:
            assert question.is_sufficient(members) == (model.adjusted_coefficient(members) == model.effect)
