"""Every promise made in the comments of ``graphs/*.edges`` and in the table of ``graphs/README.md``."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import pytest
from truth.brute_force import Question

from adjustplan import identify
from adjustplan.graph import CausalGraph, read_graph

LIBRARY = Path(__file__).resolve().parents[2] / "graphs"
FILES = sorted(LIBRARY.glob("*.edges"))
ROW = re.compile(r"\| `(?P<file>[^`]+)` \| `(?P<exposure>\w+)` → `(?P<outcome>\w+)` \|[^|]+\| (?P<sets>[^|]+) \|")
TABLE = {row["file"]: row for row in ROW.finditer((LIBRARY / "README.md").read_text(encoding="utf-8"))}


class Lesson:
    """A graph of the library with the question that its first lines name."""

    def __init__(self, name: str) -> None:
        path = LIBRARY / f"{name}.edges"
        self.text = path.read_text(encoding="utf-8")
        self.graph = read_graph(path)
        named = re.search(r"# Exposure: (\w+).* Outcome: (\w+)\n", self.text)
        assert named, "the first lines name no exposure and outcome"
        self.exposure, self.outcome = named.groups()

    def sets(self, effect: str = "total") -> list[set[str]]:
        return [set(s) for s in identify.sufficient_sets(self.graph, self.exposure, self.outcome, effect=effect)]

    def holds(self, *members: str, effect: str = "total") -> bool:
        return identify.is_sufficient(self.graph, self.exposure, self.outcome, members, effect=effect)

    def opened_by(self, *members: str, effect: str = "total") -> list[str]:
        verdict = identify.judge(self.graph, self.exposure, self.outcome, members, effect=effect)
        opened = {path.variables for path in verdict.open_paths}
        traced = identify.trace(self.graph, self.exposure, self.outcome, members, effect=effect)
        return [path.text for path in traced if path.variables in opened]

    def role(self, name: str, effect: str = "total") -> identify.VariableRole:
        found = identify.roles(self.graph, self.exposure, self.outcome, effect=effect)
        return next(variable for variable in found.variables if variable.name == name)


@pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)
def test_the_table_lists_the_minimal_sets_of_each_graph(file):
    lesson, row = Lesson(file.stem), TABLE[file.name]
    assert (row["exposure"], row["outcome"]) == (lesson.exposure, lesson.outcome)
    listed = [set(re.findall(r"\w+", members)) for members in re.findall(r"\{([^}]*)\}", row["sets"])]
    assert lesson.sets() == listed
    assert bool(listed) != (row["sets"] == "none")


@pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)
@pytest.mark.parametrize("effect", ["total", "direct"])
def test_enumeration_agrees_about_each_graph(file, effect):
    lesson = Lesson(file.stem)
    truth = Question(lesson.graph, lesson.exposure, lesson.outcome, effect)
    assert lesson.sets(effect) == [set(members) for members in truth.minimal_sets]


def test_the_table_has_a_row_for_each_graph_and_no_other():
    assert set(TABLE) == {file.name for file in FILES}


def test_confounding_needs_its_common_cause_and_nothing_else():
    lesson = Lesson("confounding")
    assert {"confounder", "common cause"} <= set(lesson.role("age").roles)
    assert lesson.role("age").advice == "needed"
    assert "instrument" in lesson.role("depot_size").roles
    assert lesson.role("depot_size").advice == "costly"
    assert not lesson.holds()


def test_a_mediator_stays_out_for_the_total_effect_and_goes_in_for_the_direct_one():
    lesson = Lesson("mediation")
    assert not lesson.holds("income", "iron_status")
    assert lesson.role("iron_status").advice == "never"
    assert lesson.sets("direct") == [{"income", "iron_status"}]


def test_a_direct_effect_is_confounded_even_where_the_exposure_is_allotted_by_lot():
    lesson = Lesson("mediator_outcome_confounding")
    assert lesson.sets("total") == [set()]
    assert lesson.sets("direct") == [{"exercise", "frailty"}]
    assert lesson.opened_by("exercise", effect="direct") == ["advice -> exercise <- frailty -> falls"]


def test_adjusting_for_a_collider_or_for_what_follows_from_it_opens_a_path():
    lesson = Lesson("collider")
    opened = ["air_pollution -> clinic_visit <- arthritis"]
    assert lesson.opened_by() == []
    assert lesson.opened_by("clinic_visit") == lesson.opened_by("letter") == opened
    assert lesson.role("clinic_visit").advice == lesson.role("letter").advice == "never"


def test_an_m_is_best_left_alone():
    lesson = Lesson("m_structure")
    opened = "vaccination <- trust -> visits <- lung_function -> pneumonia"
    assert lesson.opened_by("visits") == [opened]
    assert "collider" in lesson.role("visits").roles
    assert lesson.role("visits").advice == "never"


def test_the_middle_of_an_m_is_merely_risky_where_one_of_its_ends_is_measured():
    lesson = Lesson("m_structure")
    described = [replace(variable, unmeasured=variable.name == "trust") for variable in lesson.graph]
    lesson.graph = CausalGraph(lesson.graph.arrows, described)
    assert not lesson.holds("visits")
    assert lesson.holds("visits", "lung_function")
    assert lesson.role("visits").advice == "risky"


def test_the_body_of_the_butterfly_is_confounder_and_collider_at_once():
    lesson = Lesson("butterfly")
    assert {"confounder", "collider"} <= set(lesson.role("blood_count").roles)
    assert lesson.role("blood_count").advice == "needed"
    assert lesson.role("diet").advice == lesson.role("height").advice == "useful"
    assert lesson.opened_by("blood_count") == ["iron_tablets <- diet -> blood_count <- height -> birth_weight"]


def test_an_instrument_does_not_mend_unmeasured_confounding():
    lesson = Lesson("instrument")
    assert "instrument" in lesson.role("distance").roles
    assert lesson.opened_by("kidneys") == ["dialysis_start <- frailty -> death"]
    assert lesson.opened_by("kidneys", "distance") == ["dialysis_start <- frailty -> death"]


def test_restricting_to_those_who_answered_opens_a_path_that_adjustment_can_close():
    lesson = Lesson("selection_bias")
    assert lesson.opened_by() == ["shift_work -> answered <- time_pressure -> depression"]
    assert lesson.opened_by("time_pressure") == []


def test_those_who_stay_are_comparable_once_symptoms_are_adjusted_for():
    lesson = Lesson("loss_to_follow_up")
    assert lesson.opened_by() == ["new_drug -> stayed <- symptoms <- severity -> progression"]
    assert lesson.role("symptoms").advice == "needed"


def test_nothing_helps_when_the_drug_affects_the_symptoms_that_drive_people_out():
    lesson = Lesson("loss_to_follow_up")
    worse = CausalGraph([*lesson.graph.arrows, ("new_drug", "symptoms")], lesson.graph.variables)
    assert identify.sufficient_sets(worse, "new_drug", "progression") == []


def test_no_adjustment_undoes_sampling_on_the_outcome():
    lesson = Lesson("case_control_sampling")
    everyone = CausalGraph([arrow for arrow in lesson.graph.arrows if arrow.effect != "sampled"])
    assert not lesson.holds("age")
    assert identify.sufficient_sets(everyone, "pesticide", "lymphoma") == [{"age"}]


def test_behind_the_front_door_the_mediator_is_no_substitute_for_the_confounder():
    lesson = Lesson("front_door")
    assert not lesson.holds("indoor_particles")
    assert lesson.role("indoor_particles").roles == ("mediator",)
    assert lesson.role("indoor_particles").advice == "never"


def test_pearls_x4_is_not_enough_alone():
    lesson = Lesson("back_door_pearl_2009")
    assert lesson.holds("X3", "X4")
    assert lesson.holds("X4", "X5")
    assert "Xi <- X3 <- X1 -> X4 <- X2 -> X5 -> Xj" in lesson.opened_by("X4")
    assert lesson.role("X6").advice == "never"


def test_a_proxy_leaves_the_confounders_path_open():
    lesson = Lesson("proxy_confounder")
    assert lesson.opened_by() == lesson.opened_by("school_years") == ["physical_work <- wealth -> back_pain"]


def test_symptoms_are_needed_for_the_second_dose_and_forbidden_for_the_first():
    graph = Lesson("time_varying_confounding").graph
    second = identify.sufficient_sets(graph, "dose_2", "relapse")
    first = identify.sufficient_sets(graph, "dose_1", "relapse")
    assert second == [{"dose_1", "symptoms"}]
    assert first == [{"severity"}]
    assert not identify.is_sufficient(graph, "dose_1", "relapse", {"severity", "symptoms"})


def test_overadjustment_harms_and_unnecessary_adjustment_does_not():
    lesson = Lesson("overadjustment")
    harmful = {"transit", "colonoscopy"}
    unnecessary = {"birth_month", "supermarket", "flatulence", "family_history"}
    assert lesson.holds(*unnecessary)
    assert not any(lesson.holds(name) for name in harmful)
    assert {name for name in harmful | unnecessary if lesson.role(name).advice == "never"} == harmful
    assert lesson.role("supermarket").advice == "costly"
    assert lesson.role("family_history").roles == ("outcome predictor",)
    precise = identify.most_precise_set(lesson.graph, lesson.exposure, lesson.outcome)
    assert precise.members == {"family_history"}
