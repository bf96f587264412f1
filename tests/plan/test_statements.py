"""Statements: layout and order leave no trace in a plan's fingerprints, and everything that means something does."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.graph import read_graph, write_graph
from adjustplan.plan import PlanFile, read_plan
from adjustplan.plan.changes import differences
from adjustplan.plan.statements import Statements, fingerprint, plan_statements, statements

TABLES = {
    "": ['title = "Swimming in canals and ear infection"', 'graph = "canal.edges"'],
    "question": [
        'exposure = "swims"',
        'outcome = "earache"',
        'population = "Members of   swimming clubs"',
        'contrast = { exposed = "canal", reference = "pool  only" }',
    ],
    "study": ['design = "cohort"', "follow_up_begins = 2021-05-01", "size = 400"],
    "adjustment": ['set = ["age", "town"]', 'rationale = "Both decide where\\n\\n  people swim."'],
    "analysis": ['measure = "risk ratio"', 'data = "canal.csv"'],
    "analysis.columns": ['age = "age  in years"', '"town" = "home"'],
    "analysis.forms": ['age = "spline(4)"', 'town = "category"'],
}
LISTS = {
    "adjustment.alternative": [
        ['set = ["age", "sewer"]', 'rationale = "Towns differ by their sewers."'],
        ["set = []", 'rationale = "As it is."'],
    ],
    "waiver": [['rule = "study-losses"', 'reason = "Nobody is followed."']],
}
DEFAULTS = {"question": ['effect = "total"', "other_exposures = []"], "study": ["adherence = false", "matched = []"]}
ARROWS = [
    ("age -> swims", "the young dare"),
    ("age -> earache", ""),
    ("town -> swims", ""),
    ("town -> sewer", 'a "main" sewer'),
    ("sewer -> earache", ""),
    ("swims -> earache", "water in the ear"),
]
VARIABLES = ['age: wave=0, "Age   group"', "town: cost=0", "sewer: cost=2.5", "skill: unmeasured"]


def laid_out(order: random.Random) -> tuple[str, str]:
    """The plan and the graph of above, in some order, with comments and white space of some kind."""

    def mixed(parts: list[Any]) -> list[Any]:
        return order.sample(parts, len(parts))

    def noise() -> str:
        return order.choice(["", "\n", "  # a remark\n", "\n\n# [study]\n"])

    def spread(line: str) -> str:
        return line.replace(" = ", order.choice(["=", " = ", "   =  "])) + order.choice(["", "  ", " # why"])

    plan = noise() + "".join(f"{spread(line)}\n{noise()}" for line in mixed(TABLES[""]))
    tables = [
        (f"[{name}]", lines + order.choice([[], DEFAULTS.get(name, [])])) for name, lines in TABLES.items() if name
    ]
    tables += [(f"[[{name}]]", lines) for name, several in LISTS.items() for lines in mixed(several)]
    for head, lines in mixed(tables):
        plan += f"{head}\n{noise()}" + "".join(f"{spread(line)}\n{noise()}" for line in mixed(lines))
    plan = plan.replace('"age", "town"', order.choice(['"age", "town"', '"town",\n  "age",\n', "'town', \"age\""]))
    plan = plan.replace("Members of   swimming", order.choice(["Members of swimming", "  Members of\\tswimming"]))
    lines = [f"{arrow} : {reason.replace(' ', order.choice([' ', '  ']))}" for arrow, reason in ARROWS]
    lines += VARIABLES + order.choice([[], ["swims: cost=1"]])
    graph = "".join(f"{noise()}{line}{order.choice(['', '   # hm'])}\n" for line in mixed(lines))
    return plan, graph.replace("->", order.choice(["->", " →"]))


def plainly() -> tuple[str, str]:
    """The plan and the graph of above as they stand there."""
    tables = [(f"[{name}]" if name else "", lines) for name, lines in TABLES.items()]
    tables += [(f"[[{name}]]", lines) for name, several in LISTS.items() for lines in several]
    plan = "\n".join("\n".join([head, *lines]) for head, lines in tables)
    return plan, "\n".join([*(f"{arrow} : {reason}" for arrow, reason in ARROWS), *VARIABLES])


def written(folder: Path, plan: str, graph: str) -> Statements:
    """The statements of a plan and a graph, through their files."""
    (folder / "canal.edges").write_text(graph, encoding="utf-8")
    (folder / "plan.toml").write_text(plan, encoding="utf-8")
    return statements(read_plan(folder / "plan.toml"))


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 2**32))
def test_order_comments_layout_and_written_defaults_leave_no_trace(
    tmp_path_factory: pytest.TempPathFactory, seed: int
) -> None:
    folder = tmp_path_factory.mktemp("plan")
    first = written(folder, *laid_out(random.Random(0)))
    again = written(folder, *laid_out(random.Random(seed)))
    assert again == first
    assert again.graph_fingerprint == first.graph_fingerprint
    assert again.plan_fingerprint == first.plan_fingerprint


def test_statements_are_one_sorted_line_for_each_fact(tmp_path: Path) -> None:
    told = written(tmp_path, *laid_out(random.Random(1)))
    assert list(told.graph) == sorted(told.graph)
    assert list(told.plan) == sorted(told.plan)
    assert {
        "variable skill: unmeasured",
        'variable age: label = "Age group"',
        "variable town: cost = 0.0",
        "arrow town -> sewer",
        'arrow town -> sewer: reason = "a \\"main\\" sewer"',
    } <= set(told.graph)
    assert {
        'adjustment.set has "age"',
        'adjustment.alternative has { rationale = "As it is.", set = [] }',
        'analysis.columns.age = "age  in years"',
        'question.contrast.reference = "pool  only"',
        'question.population = "Members of swimming clubs"',
        "study.follow_up_begins = 2021-05-01",
        'waiver has { reason = "Nobody is followed.", rule = "study-losses" }',
    } <= set(told.plan)


@pytest.mark.parametrize("ending", [".dot", ".graphml"])
def test_the_format_of_the_graph_leaves_no_trace(tmp_path: Path, ending: str) -> None:
    plan, graph = laid_out(random.Random(2))
    first = written(tmp_path, plan, graph)
    write_graph(read_graph(tmp_path / "canal.edges"), tmp_path / f"canal{ending}")
    (tmp_path / "plan.toml").write_text(plan.replace("canal.edges", f"canal{ending}"), encoding="utf-8")
    assert statements(read_plan(tmp_path / "plan.toml")) == first


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('"Swimming in', '"Bathing in', "the title changed from “Swimming in"),
        ('exposure = "swims"', 'exposure = "skill"', "the exposure changed from swims to skill"),
        ('outcome = "earache"', 'effect = "direct"\noutcome = "earache"', "the effect changed from total to direct"),
        ('"canal"', '"canals"', "the exposed level of the contrast changed from “canal” to “canals”"),
        ('"pool  only"', '"pool only"', "the reference level of the contrast changed"),
        ("Members of", "Guests of", "the population changed from “Members of"),
        ('design = "cohort"', 'design = "cohort"\nlost = "skill"', "the variable for still being followed, not stated"),
        ('design = "cohort"', 'design = "cohort"\nmatched = ["town"]', "town added to the variables matched for"),
        ("2021-05-01", "2021", "the start of follow-up changed from 2021-05-01 to 2021"),
        ("size = 400", "", "the planned size, 400 before, is no longer stated"),
        ('"age", "town"', '"age", "town", "sewer"', "sewer added to the set"),
        ('"age", "town"', '"age"', "town removed from the set"),
        ("Both decide", "Both settle", "the rationale of the set changed"),
        ('"age", "sewer"', '"sewer"', "the alternative {age, sewer} removed"),
        ('"As it is."', '"As it was."', "the rationale of the alternative {} changed"),
        ('"risk ratio"', '"odds ratio"', "the measure changed from risk ratio to odds ratio"),
        ('"canal.csv"', '"canals.csv"', "the data file changed"),
        ('"age  in years"', '"age in years"', "the column of age changed"),
        ('"spline(4)"', '"linear"', "the form of age changed from spline(4) to linear"),
        ("Nobody is", "Hardly anybody is", "the reason of the waiver of study-losses changed"),
        ('"study-losses"', '"study-meaning"', "the waiver of study-meaning added"),
        ("town -> sewer", "sewer -> town", "arrow sewer -> town added"),
        ("the young dare", "the old fear", "the reason of arrow age -> swims changed"),
        ("the young dare", "", "the reason of arrow age -> swims removed"),
        ("wave=0", "wave=1", "the wave of age changed from 0 to 1"),
        ('"Age   group"', '"Ages"', "the label of age changed from “Age group” to “Ages”"),
        ("skill: unmeasured", "skill: restricted", "variable skill is now restricted"),
        ("skill: unmeasured", "", "variable skill removed"),
        ("cost=2.5", "cost=2", "the cost of sewer changed from 2.5 to 2.0"),
        ("cost=2.5", "proxy of skill", "the variable measured by sewer, not stated before, is now skill"),
    ],
)
def test_a_change_of_meaning_changes_a_fingerprint_and_is_said_in_words(
    tmp_path: Path, old: str, new: str, words: str
) -> None:
    plan, graph = plainly()
    before = written(tmp_path, plan, graph)
    assert old in plan + graph
    after = written(tmp_path, plan.replace(old, new), graph.replace(old, new))
    kept = (before.graph_fingerprint, before.plan_fingerprint)
    assert (after.graph_fingerprint, after.plan_fingerprint) != kept
    told = differences(before, after)
    assert any(words in sentence for sentence in told), told


def test_planning_an_empty_set_is_not_planning_none() -> None:
    base: dict[str, Any] = {"title": "t", "graph": "g", "question": {"exposure": "a", "outcome": "b"}}
    without = Statements((), plan_statements(PlanFile.model_validate(base)))
    empty = Statements((), plan_statements(PlanFile.model_validate(base | {"adjustment": {"set": []}})))
    assert differences(without, empty) == ["the set is now stated, and empty"]
    assert without.plan_fingerprint != empty.plan_fingerprint


def test_levels_of_different_types_are_different() -> None:
    def told(level: object) -> str:
        question = {"exposure": "a", "outcome": "b", "contrast": {"exposed": level, "reference": 0}}
        return fingerprint(plan_statements(PlanFile.model_validate({"title": "t", "graph": "g", "question": question})))

    levels = [True, 1, 1.0, "1", "true", "True", "1.0", float("inf"), "inf"]
    assert len({told(level) for level in levels}) == len(levels)
