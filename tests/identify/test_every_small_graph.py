"""Every graph of up to four variables, every question, every set: the engine against plain enumeration.

There are 572 such graphs and some six thousand questions about them. Nothing is sampled, so what holds here
holds for every pattern of confounding, mediation and selection that four variables can show. With up to
three variables, every choice of what is unmeasured and what is restricted is tried as well.
"""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from truth.brute_force import Question
from truth.drawn_graphs import every_graph, every_pair, every_status
from truth.roles import advice, roles

from adjustplan import identify

ENGINES = ("small", "large")


def every_question(size: int) -> Iterator[Question]:
    for graph in every_graph(size):
        for exposure, outcome in every_pair(graph):
            total = Question(graph, exposure, outcome)
            yield total
            yield total.other_effect()


def every_question_and_status(size: int) -> Iterator[Question]:
    for graph in every_graph(size):
        for exposure, outcome in every_pair(graph):
            for known in every_status(graph, exposure, outcome):
                yield Question(known, exposure, outcome, "total")
                yield Question(known, exposure, outcome, "direct")


QUESTIONS = {
    "two variables": lambda: every_question(2),
    "three variables, measured or not": lambda: every_question_and_status(3),
    "four variables": lambda: every_question(4),
}


@pytest.fixture(scope="module", params=QUESTIONS)
def small_questions(request: pytest.FixtureRequest) -> list[Question]:
    return list(QUESTIONS[request.param]())


def asked(question: Question) -> tuple:
    """The first arguments of every function of the engine."""
    return question.graph, question.exposure, question.outcome


@pytest.mark.parametrize("engine", ENGINES)
def test_a_set_is_sufficient_exactly_when_no_path_says_otherwise(small_questions, engine):
    for question in small_questions:
        for members in question.subsets:
            answer = identify.is_sufficient(*asked(question), members, effect=question.effect, engine=engine)
            assert answer == question.is_sufficient(members), (question, set(members))


@pytest.mark.parametrize("engine", ENGINES)
def test_the_stream_holds_every_minimal_set_once(small_questions, engine):
    for question in small_questions:
        stream = identify.iterate_sufficient_sets(*asked(question), effect=question.effect, engine=engine)
        assert sorted(map(sorted, stream)) == sorted(map(sorted, question.minimal_sets)), question


@pytest.mark.parametrize("engine", ENGINES)
def test_one_set_is_given_where_there_is_one_and_it_is_minimal(small_questions, engine):
    for question in small_questions:
        found = identify.one_sufficient_set(*asked(question), effect=question.effect, engine=engine)
        if question.minimal_sets:
            assert found in question.minimal_sets, question
        else:
            assert found is None, question


def test_the_list_is_sorted_by_size_and_then_by_names(small_questions):
    for question in small_questions:
        listed = identify.sufficient_sets(*asked(question), effect=question.effect)
        assert listed == question.minimal_sets, question


def test_judging_a_set_names_exactly_the_paths_left_open(small_questions):
    for question in small_questions:
        for members in question.subsets:
            verdict = identify.judge(*asked(question), members, effect=question.effect)
            assert verdict.sufficient == question.is_sufficient(members), (question, set(members))
            shown = [path.variables for path in verdict.open_paths]
            assert set(shown) <= question.open_paths(members), (question, set(members))
            assert bool(shown) == bool(question.open_paths(members)), (question, set(members))


def test_each_variable_plays_the_parts_its_definitions_say(small_questions):
    for question in small_questions:
        found = identify.roles(*asked(question), effect=question.effect)
        assert {variable.name for variable in found.variables} == {variable.name for variable in question.graph}
        for variable in found.variables:
            assert set(variable.roles) == roles(question, variable.name), (question, variable.name)
            assert len(set(variable.roles)) == len(variable.roles)


def test_the_advice_follows_from_the_sets(small_questions):
    for question in small_questions:
        for variable in identify.roles(*asked(question), effect=question.effect).variables:
            assert variable.advice == advice(question, variable.name), (question, variable.name)


def test_tracing_finds_every_path_shortest_first(small_questions):
    for question in small_questions:
        traced = list(identify.trace(*asked(question), effect=question.effect))
        assert {path.variables for path in traced} == {path.names for path in question.paths}, question
        assert len(traced) == len(question.paths)
        lengths = [len(path.variables) for path in traced]
        assert lengths == sorted(lengths)
