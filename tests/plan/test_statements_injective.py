"""Statements never confuse two contents, not even when names and texts are written to look like other statements."""

from __future__ import annotations

from typing import Any

from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.graph import Arrow, CausalGraph, Variable
from adjustplan.plan import PlanFile
from adjustplan.plan.changes import differences
from adjustplan.plan.statements import Statements, graph_statements, plan_statements

TRICKY = st.sampled_from(
    [
        "a",
        "b",
        "a b",
        "a -> b",
        'b: reason = "x"',
        '"',
        "\\",
        "a\nb",
        "a: unmeasured",
        "é",
        "e\u0301",
        "a\u2028b",
        "a.b",
    ]
)
PROSE = st.sampled_from(["", "x", "x y", "x  y", " x", 'x"', "\\", "x\ny", 'x", set = ["'])


@st.composite
def graphs(draw: st.DrawFn) -> CausalGraph:
    """A graph of few variables whose names and reasons try to look like other statements."""
    names = draw(st.lists(TRICKY, min_size=2, max_size=4, unique=True))
    pairs = [(a, b) for place, a in enumerate(names) for b in names[place + 1 :]]
    arrows = [Arrow(a, b, draw(PROSE)) for a, b in pairs if draw(st.booleans())]
    waves = st.sampled_from([None, 0])
    costs = st.sampled_from([1.0, 0.0, 2.0])
    return CausalGraph(
        arrows, [Variable(n, draw(PROSE), draw(st.booleans()), False, draw(waves), draw(costs)) for n in names]
    )


def one_spaced(graph: CausalGraph) -> object:
    """What a graph means: prose with single spaces, order left out."""
    arrows = {(a.cause, a.effect, " ".join(a.reason.split())) for a in graph.arrows}
    told = {(v.name, " ".join(v.label.split()), v.unmeasured, v.wave, v.cost) for v in graph}
    return arrows, told


@settings(max_examples=300, deadline=None)
@given(first=graphs(), second=graphs())
def test_two_graphs_share_their_statements_only_when_they_mean_the_same(
    first: CausalGraph, second: CausalGraph
) -> None:
    told, other = graph_statements(first), graph_statements(second)
    same = one_spaced(first) == one_spaced(second)
    assert (told == other) == same
    assert ("\n".join(told) == "\n".join(other)) == same
    assert bool(differences(Statements(told, ()), Statements(other, ()))) != same


SETS = st.lists(TRICKY, max_size=3)
CHOICES = st.fixed_dictionaries({"set": SETS, "rationale": PROSE})


@st.composite
def plans(draw: st.DrawFn) -> dict[str, Any]:
    """The tables of a plan whose texts try to look like other statements."""
    told: dict[str, Any] = {"title": draw(PROSE.filter(bool)), "graph": draw(TRICKY)}
    told["question"] = {
        "exposure": draw(TRICKY),
        "outcome": draw(TRICKY),
        "effect": draw(st.sampled_from(["total", "direct"])),
    }
    if draw(st.booleans()):
        told["adjustment"] = {**draw(CHOICES), "alternative": draw(st.lists(CHOICES, max_size=2))}
    if draw(st.booleans()):
        columns = draw(st.dictionaries(TRICKY, TRICKY, max_size=2))
        told["analysis"] = {"measure": "risk ratio", "columns": columns}
    told["waiver"] = draw(st.lists(st.fixed_dictionaries({"rule": TRICKY, "reason": PROSE.filter(bool)}), max_size=2))
    return told


def meaning(told: dict[str, Any]) -> object:
    """What a plan means: prose with single spaces, sets as sets, the graph's file name left out."""

    def spaced(words: str) -> str:
        return " ".join(words.split())

    def chosen(table: dict[str, Any]) -> object:
        return frozenset(table["set"]), spaced(table["rationale"])

    adjustment = told.get("adjustment")
    return (
        spaced(told["title"]),
        told["question"],
        adjustment and (chosen(adjustment), sorted(map(repr, map(_in_order, map(chosen, adjustment["alternative"]))))),
        told.get("analysis"),
        sorted((waiver["rule"], spaced(waiver["reason"])) for waiver in told["waiver"]),
    )


def _in_order(choice: Any) -> object:
    return sorted(choice[0]), choice[1]


@settings(max_examples=300, deadline=None)
@given(first=plans(), second=plans(), data=st.data())
def test_two_plans_share_their_statements_only_when_they_mean_the_same(
    first: dict[str, Any], second: dict[str, Any], data: st.DataObject
) -> None:
    table = data.draw(st.sampled_from(["title", "graph", "question", "adjustment", "analysis", "waiver"]))
    if data.draw(st.booleans()):  # mostly alike: two that differ in one table at most
        second = {**{k: v for k, v in first.items() if k != table}, **{k: v for k, v in second.items() if k == table}}
    told, other = (plan_statements(PlanFile.model_validate(tables)) for tables in (first, second))
    same = meaning(first) == meaning(second)
    assert ("\n".join(told) == "\n".join(other)) == same
    assert bool(differences(Statements((), told), Statements((), other))) != same


STRANGE = st.text() | st.sampled_from(
    [
        "waiver has { rule = 1 }",
        "adjustment.alternative has { set = [1] }",
        "adjustment.set has [1]",
        "adjustment.set is empty",
        "study.size = nan",
        "study.size = [1",
        "variable a: wave = 1",
        "arrow a -> b",
    ]
)


@settings(max_examples=200, deadline=None)
@given(before=st.sets(STRANGE, max_size=4), after=st.sets(STRANGE, max_size=4))
def test_sentences_that_are_no_statements_of_ours_go_neither_unsaid_nor_astray(
    before: set[str], after: set[str]
) -> None:
    first, second = tuple(sorted(before)), tuple(sorted(after))
    for old, new in ((Statements(first, ()), Statements(second, ())), (Statements((), first), Statements((), second))):
        assert bool(differences(old, new)) == (before != after)
