"""The engine against the covariance algebra of linear models: no paths, no colliders, only regression in
endless data.

See ``truth/linear_gaussian.py``. A set is sufficient exactly when the exposure's coefficient, adjusted for
it, is the effect; the most precise set is the one whose coefficient varies least.
"""

from __future__ import annotations

from hypothesis import given, settings
from truth.brute_force import Question
from truth.drawn_graphs import questions
from truth.linear_gaussian import LinearModel

from adjustplan import identify

MANY = settings(max_examples=200, deadline=None, derandomize=True, print_blob=False)


def asked(question: Question) -> tuple:
    return question.graph, question.exposure, question.outcome


@MANY
@given(question=questions(largest=7, effects=("total",)))
def test_regression_finds_the_total_effect_exactly_with_the_sufficient_sets(question):
    model = LinearModel(question, seed=3)
    for members in question.subsets:
        unbiased = model.adjusted_coefficient(members) == model.effect
        assert identify.is_sufficient(*asked(question), members) == unbiased, set(members)


@MANY
@given(question=questions(largest=7, effects=("direct",)))
def test_regression_finds_the_direct_effect_exactly_with_the_sufficient_sets(question):
    if question.graph.arrow(question.exposure, question.outcome) is None:
        return  # an effect of nil can be found in spite of forbidden members; see test_the_truth_itself
    model = LinearModel(question, seed=4)
    for members in question.subsets:
        unbiased = model.adjusted_coefficient(members) == model.effect
        assert identify.is_sufficient(*asked(question), members, effect="direct") == unbiased, set(members)


@MANY
@given(question=questions(largest=7))
def test_no_sufficient_set_gives_a_more_precise_estimate_than_the_most_precise_one(question):
    # Henckel, Perković and Maathuis 2022, Journal of the Royal Statistical Society B 84:579-599.
    best = identify.most_precise_set(*asked(question), effect=question.effect)
    if best.members is None:
        assert best.reason.strip()
        return
    assert question.is_sufficient(best.members)
    model = LinearModel(question, seed=5)
    least = model.asymptotic_variance(best.members)
    for members in question.sufficient_sets:
        assert least <= model.asymptotic_variance(members), set(members)


@MANY
@given(question=questions(largest=7, statuses=False, effects=("total",)))
def test_with_everything_measured_the_most_precise_set_is_the_other_causes_of_the_causal_paths(question):
    # The closed form of the same paper: what causes a variable on a causal path (the exposure aside), less
    # what those variables lead to. It is defined where the exposure has an effect.
    causal = question.on_causal_paths - {question.exposure}
    if causal and question.sufficient_sets:
        causes = {cause for name in causal for cause in question.arrows.causes[name]}
        expected = causes - question.forbidden - {question.exposure}
        assert identify.most_precise_set(*asked(question)).members == expected
