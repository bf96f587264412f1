"""Random graphs of five to seven variables: roles, advice, and two theorems about them."""

from __future__ import annotations

from hypothesis import given, settings
from truth.brute_force import Question
from truth.drawn_graphs import questions
from truth.roles import advice, roles

from adjustplan import identify

MANY = settings(max_examples=250, deadline=None, derandomize=True, print_blob=False)


def found_roles(question: Question) -> dict[str, identify.VariableRole]:
    found = identify.roles(question.graph, question.exposure, question.outcome, effect=question.effect)
    return {variable.name: variable for variable in found.variables}


@MANY
@given(question=questions(largest=7))
def test_each_variable_plays_the_parts_its_definitions_say(question):
    for name, variable in found_roles(question).items():
        assert set(variable.roles) == roles(question, name), name


@MANY
@given(question=questions(largest=7))
def test_the_advice_follows_from_the_sets(question):
    for name, variable in found_roles(question).items():
        assert variable.advice == advice(question, name), name


@MANY
@given(question=questions(largest=7))
def test_every_piece_of_advice_comes_with_a_reason(question):
    for variable in found_roles(question).values():
        assert variable.advice is None or variable.reason.strip()


@MANY
@given(question=questions(largest=7))
def test_following_the_advice_never_hurts(question):
    # Take one minimal set and add everything that is called costly or optional: it stays sufficient.
    advised = found_roles(question)
    harmless = {name for name, variable in advised.items() if variable.advice in {"costly", "optional"}}
    for members in question.minimal_sets:
        for name in harmless:
            assert question.is_sufficient(members | {name}), name


@MANY
@given(question=questions(largest=7, effects=("total",)))
def test_all_confounders_together_suffice_where_anything_does(question):
    # VanderWeele and Shpitser 2013 (Annals of Statistics 41:196-220): with "confounder" defined as here,
    # adjusting for all confounders is enough. It is about covariates that precede the exposure, so nothing
    # may be restricted.
    if question.minimal_sets and not question.restricted:
        confounders = {name for name, variable in found_roles(question).items() if "confounder" in variable.roles}
        assert question.is_sufficient(confounders)


@MANY
@given(question=questions(largest=7, effects=("total",)))
def test_the_causes_of_exposure_or_outcome_suffice_where_anything_does(question):
    # The disjunctive cause criterion: VanderWeele and Shpitser 2011, Biometrics 67:1406-1413.
    arrows = question.arrows
    later = arrows.descendants[question.exposure] | arrows.descendants[question.outcome]
    before = [members for members in question.sufficient_sets if not members & later]
    if before and not question.restricted:
        causes = {
            name
            for name in question.candidates - later
            if arrows.descendants[name] & {question.exposure, question.outcome}
        }
        assert identify.is_sufficient(question.graph, question.exposure, question.outcome, causes)
