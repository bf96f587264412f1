"""Random graphs of five to eight variables, some unmeasured or restricted: sets against enumeration.

The smallest graphs miss what needs room: long detours, colliders whose descendants matter, sets of three or
four. A failing graph is shrunk by hypothesis to the smallest that still fails.
"""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from truth.brute_force import Question
from truth.drawn_graphs import questions

from adjustplan import identify
from adjustplan.graph import CausalGraph, Variable

ENGINES = ("small", "large")
MANY = settings(max_examples=200, deadline=None, derandomize=True, print_blob=False)


def asked(question: Question) -> tuple:
    return question.graph, question.exposure, question.outcome


@pytest.mark.parametrize("engine", ENGINES)
@MANY
@given(question=questions())
def test_every_set_is_judged_as_its_paths_say(question, engine):
    for members in question.subsets:
        answer = identify.is_sufficient(*asked(question), members, effect=question.effect, engine=engine)
        assert answer == question.is_sufficient(members), set(members)


@pytest.mark.parametrize("engine", ENGINES)
@MANY
@given(question=st.one_of(questions(), questions(several_sets=True)))
def test_the_stream_holds_every_minimal_set_once(question, engine):
    stream = list(identify.iterate_sufficient_sets(*asked(question), effect=question.effect, engine=engine))
    assert sorted(map(sorted, stream)) == sorted(map(sorted, question.minimal_sets))


@pytest.mark.parametrize("engine", ENGINES)
@MANY
@given(question=st.one_of(questions(), questions(several_sets=True)))
def test_the_stream_comes_in_the_same_order_each_time(question, engine):
    first = list(identify.iterate_sufficient_sets(*asked(question), effect=question.effect, engine=engine))
    again = list(identify.iterate_sufficient_sets(*asked(question), effect=question.effect, engine=engine))
    assert first == again


@MANY
@given(question=questions())
def test_the_list_is_sorted_by_size_and_then_by_names(question):
    assert identify.sufficient_sets(*asked(question), effect=question.effect) == question.minimal_sets


@pytest.mark.parametrize("engine", ENGINES)
@MANY
@given(question=st.one_of(questions(), questions(several_sets=True)))
def test_one_set_is_given_where_there_is_one_and_it_is_minimal(question, engine):
    found = identify.one_sufficient_set(*asked(question), effect=question.effect, engine=engine)
    assert (found in question.minimal_sets) if question.minimal_sets else (found is None)


@MANY
@given(question=st.one_of(questions(), questions(several_sets=True)))
def test_no_sufficient_set_is_smaller_than_the_smallest(question):
    found = identify.smallest_sufficient_set(*asked(question), effect=question.effect)
    if question.sufficient_sets:
        assert question.is_sufficient(found)
        assert len(found) == min(map(len, question.sufficient_sets))
    else:
        assert found is None


@MANY
@given(question=st.one_of(questions(), questions(several_sets=True)))
def test_no_sufficient_set_costs_less_than_the_cheapest(question):
    found = identify.cheapest_sufficient_set(*asked(question), effect=question.effect)
    if question.sufficient_sets:
        assert question.is_sufficient(found)
        assert question.cost(found) == min(map(question.cost, question.sufficient_sets))
    else:
        assert found is None


@MANY
@given(question=st.one_of(questions(), questions(several_sets=True)))
def test_the_cheapest_set_holds_nobody_it_could_do_without(question):
    found = identify.cheapest_sufficient_set(*asked(question), effect=question.effect)
    assert found is None or found in question.minimal_sets


def test_two_cheap_variables_may_cost_less_than_one_dear_one():
    arrows = [("age", "wealth"), ("age", "health"), ("wealth", "diet"), ("health", "diet"), ("age", "gout")]
    graph = CausalGraph([*arrows, ("diet", "gout")], [Variable("age", cost=2.5)])
    assert identify.smallest_sufficient_set(graph, "diet", "gout") == {"age"}
    assert identify.cheapest_sufficient_set(graph, "diet", "gout") == {"wealth", "health"}


def test_a_set_further_out_is_listed_once_though_two_ways_lead_to_it():
    # From {wealth, health} one comes to {age} by giving up either member.
    graph = CausalGraph([("age", "wealth"), ("age", "health"), ("wealth", "diet"), ("health", "diet"), ("age", "gout")])
    assert identify.sufficient_sets(graph, "diet", "gout") == [{"age"}, {"health", "wealth"}]
