"""Random graphs: tracing lists exactly the paths there are, and says of each what opens or blocks it."""

from __future__ import annotations

from itertools import combinations, islice

from hypothesis import given, settings
from hypothesis import strategies as st
from truth.brute_force import Question
from truth.drawn_graphs import questions

from adjustplan import identify
from adjustplan.graph import CausalGraph

MANY = settings(max_examples=200, deadline=None, derandomize=True, print_blob=False)


def traced(question: Question, members: frozenset[str] = frozenset()) -> list[identify.TracedPath]:
    return list(identify.trace(question.graph, question.exposure, question.outcome, members, effect=question.effect))


@MANY
@given(question=questions(largest=7))
def test_tracing_finds_every_path_once(question):
    found = [path.variables for path in traced(question)]
    assert len(found) == len(set(found))
    assert set(found) == {path.names for path in question.paths}


@MANY
@given(question=questions(largest=7))
def test_short_paths_come_before_long_ones(question):
    lengths = [len(path.variables) for path in traced(question)]
    assert lengths == sorted(lengths)


@MANY
@given(question=questions(largest=7))
def test_a_path_is_causal_when_all_its_arrows_point_the_same_way(question):
    directed = {path.names: path.directed for path in question.paths}
    assert all(path.causal == directed[path.variables] for path in traced(question))


@MANY
@given(question=questions(largest=7))
def test_a_path_is_written_with_its_arrows(question):
    written = {path.names: path.text for path in question.paths}
    assert all(path.text == written[path.variables] for path in traced(question))


@MANY
@given(question=questions(largest=7), data=st.data())
def test_a_path_is_open_when_the_blocking_rule_says_so(question, data):
    members = data.draw(st.sampled_from(question.subsets))
    truth = {path.names: path.is_open(question.conditioned(members)) for path in question.paths}
    for path in traced(question, members):
        assert path.open == truth[path.variables], path.text


@MANY
@given(question=questions(largest=7))
def test_the_first_paths_can_be_had_without_the_rest(question):
    first = list(islice(identify.trace(question.graph, question.exposure, question.outcome), 2))
    assert [path.variables for path in first] == [path.variables for path in traced(question)[:2]]


def test_a_part_of_the_graph_from_which_no_path_comes_back_adds_no_path():
    upstream = [f"cause{number}" for number in range(25)]
    arrows = [("age", "diet"), ("age", "gout"), ("diet", "gout"), ("birth", "age")]
    arrows += [(cause, "birth") for cause in upstream] + list(combinations(upstream, 2))
    graph = CausalGraph(arrows)
    assert [path.text for path in identify.trace(graph, "diet", "gout")] == [
        "diet -> gout",
        "diet <- age -> gout",
    ]
