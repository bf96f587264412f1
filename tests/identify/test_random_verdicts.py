"""Random graphs of five to eight variables, some unmeasured, some restricted: verdicts against enumeration.

A verdict says whether a set is sufficient, which paths it leaves open, which members do harm and which are
not needed.
"""

from __future__ import annotations

from hypothesis import given, settings
from hypothesis import strategies as st
from truth.brute_force import Question
from truth.drawn_graphs import questions

from adjustplan import identify

MANY = settings(max_examples=200, deadline=None, derandomize=True, print_blob=False)
ALL_PATHS = 10_000  # more than any graph here has


def judged(question: Question, members: frozenset[str], most: int = ALL_PATHS) -> identify.Verdict:
    return identify.judge(
        question.graph,
        question.exposure,
        question.outcome,
        members,
        effect=question.effect,
        most_open_paths=most,
    )


def some_of(among: frozenset[str]) -> st.SearchStrategy[frozenset[str]]:
    """A strategy for subsets of some of the covariates."""
    if not among:
        return st.just(frozenset())
    return st.lists(st.sampled_from(sorted(among)), unique=True).map(frozenset)


@MANY
@given(question=questions(), data=st.data())
def test_a_set_with_what_cannot_be_had_is_not_sufficient_and_its_unmeasured_members_do_harm(question, data):
    members = data.draw(some_of(question.covariates))
    verdict = judged(question, members)
    assert verdict.sufficient == question.is_sufficient(members)
    assert identify.is_sufficient(
        question.graph, question.exposure, question.outcome, members, effect=question.effect
    ) == verdict.sufficient  # fmt: skip
    assert members & question.unmeasured <= set(verdict.harmful)


@MANY
@given(question=questions(), data=st.data())
def test_naming_what_is_restricted_anyway_changes_nothing(question, data):
    members = data.draw(some_of(question.candidates))
    verdict = judged(question, members | question.restricted)
    assert verdict.sufficient == judged(question, members).sufficient
    assert set(verdict.adjust) - question.restricted == members
    assert not set(verdict.redundant) & question.restricted


@MANY
@given(question=questions(), data=st.data())
def test_the_open_paths_are_those_that_enumeration_finds_shortest_first(question, data):
    members = data.draw(some_of(question.candidates))
    verdict = judged(question, members)
    shown = [path.variables for path in verdict.open_paths]
    if verdict.sufficient:
        assert shown == []
        return
    assert verdict.complete
    assert len(set(shown)) == len(shown)
    assert set(shown) == question.open_paths(members)
    assert [len(path) for path in shown] == sorted(len(path) for path in shown)


@MANY
@given(question=questions(), data=st.data())
def test_a_verdict_that_shows_one_path_says_whether_there_are_more(question, data):
    members = data.draw(some_of(question.candidates))
    verdict = judged(question, members, most=1)
    truth = question.open_paths(members)
    assert len(verdict.open_paths) == min(1, len(truth))
    assert verdict.complete == (len(truth) <= 1)


@MANY
@given(question=questions(), data=st.data())
def test_members_do_harm_when_they_change_the_effect_or_open_a_path(question, data):
    members = data.draw(some_of(question.candidates))
    left_open = [path for path in question.to_block if path.is_open(question.conditioned(members))]
    opening = {name for path in left_open for below in path.downstream for name in below & members}
    # A path that its restricted colliders keep open in any case is not opened by the members below them.
    sole = {name for path in left_open for name in members if not path.is_open(question.conditioned(members - {name}))}
    harmful = set(judged(question, members).harmful)
    assert (members & question.forbidden) | sole <= harmful
    assert harmful <= (members & question.forbidden) | opening


@MANY
@given(question=questions(), data=st.data())
def test_no_member_of_a_sufficient_set_does_harm(question, data):
    if question.sufficient_sets:
        members = data.draw(st.sampled_from(question.sufficient_sets))
        assert judged(question, members).harmful == ()


@MANY
@given(question=questions(), data=st.data())
def test_the_redundant_members_are_those_that_can_be_left_out_one_at_a_time(question, data):
    members = data.draw(some_of(question.candidates))
    verdict = judged(question, members)
    spare = {name for name in members if question.is_sufficient(members - {name})}
    assert set(verdict.redundant) == (spare if question.is_sufficient(members) else set())


@MANY
@given(question=questions(), data=st.data())
def test_what_is_restricted_and_forbidden_distorts_every_verdict(question, data):
    members = data.draw(some_of(question.candidates))
    verdict = judged(question, members)
    assert set(verdict.distorting) == question.restricted & question.forbidden
    assert not (verdict.distorting and verdict.sufficient)


@MANY
@given(question=questions(), data=st.data())
def test_whatever_is_held_against_a_variable_is_explained(question, data):
    members = data.draw(some_of(question.covariates))
    verdict = judged(question, members)
    for name in (*verdict.harmful, *verdict.redundant, *verdict.distorting):
        assert verdict.reasons[name].strip()
