"""Graphs whose answers stand in print.

Each test draws a graph from a publication and holds the engine to what the authors say of it. The graphs
and answers were written down from memory of the printed page, without the page at hand; every one of them
is also among what the definitions give by enumeration, which each test checks, so a slip of memory could
only make a test say something true about a graph that differs from the printed one. Variables carry the
authors' letters.
"""

from __future__ import annotations

import pytest
from truth.brute_force import Question

from adjustplan import identify
from adjustplan.graph import CausalGraph, Variable


def sets(*members: str) -> list[frozenset[str]]:
    """Sets of variables, each written as names with blanks between."""
    return [frozenset(names.split()) for names in members]


def graph(arrows: str, unmeasured: str = "", restricted: str = "") -> CausalGraph:
    """A graph written as ``a>b b>c``, with what is unmeasured and what is restricted."""
    pairs = [tuple(arrow.split(">")) for arrow in arrows.split()]
    hidden = [Variable(name, unmeasured=True) for name in unmeasured.split()]
    fixed = [Variable(name, restricted=True) for name in restricted.split()]
    return CausalGraph(pairs, [*hidden, *fixed])


def all_sets(drawn: CausalGraph, exposure: str, outcome: str, effect: str = "total") -> list[frozenset[str]]:
    """The engine's minimal sets, once enumeration has given the same."""
    found = identify.sufficient_sets(drawn, exposure, outcome, effect=effect)
    assert found == Question(drawn, exposure, outcome, effect).minimal_sets
    return found


# Pearl, Causality, 2nd edition 2009, section 3.3.1, figure 3.4; first in Pearl 1993, Statistical Science
# 8:266-269.
BACK_DOOR = graph("X1>X3 X1>X4 X2>X4 X2>X5 X3>Xi X4>Xi X4>Xj X5>Xj Xi>X6 X6>Xj")


@pytest.mark.parametrize("members", sets("X3 X4", "X4 X5"))
def test_pearl_names_two_sets_that_meet_the_back_door_criterion(members):
    assert identify.is_sufficient(BACK_DOOR, "Xi", "Xj", members)
    assert members in all_sets(BACK_DOOR, "Xi", "Xj")


def test_x4_alone_opens_the_way_round_that_pearl_spells_out():
    verdict = identify.judge(BACK_DOOR, "Xi", "Xj", {"X4"})
    assert not verdict.sufficient
    assert ("Xi", "X3", "X1", "X4", "X2", "X5", "Xj") in [path.variables for path in verdict.open_paths]


def test_x6_carries_the_effect_and_so_belongs_to_no_set():
    # In the same book X6 is what the front-door criterion uses instead (section 3.3.2).
    assert not any("X6" in members for members in all_sets(BACK_DOOR, "Xi", "Xj"))
    assert not identify.is_sufficient(BACK_DOOR, "Xi", "Xj", {"X3", "X4", "X6"})


# Pearl, Causality, 2nd edition 2009, section 3.3.2, figure 3.5: the front door.
FRONT_DOOR = graph("U>X U>Y X>Z Z>Y", unmeasured="U")


def test_behind_the_front_door_no_adjustment_is_enough():
    assert all_sets(FRONT_DOOR, "X", "Y") == []
    assert identify.one_sufficient_set(FRONT_DOOR, "X", "Y") is None


# Greenland, Pearl and Robins 1999, Epidemiology 10:37-48: air pollution A, sex B, bronchial reactivity C,
# antihistamine treatment E, asthma D.
ASTHMA = graph("A>E A>C B>C B>D C>E C>D E>D")


def test_bronchial_reactivity_alone_is_not_enough_though_it_blocks_its_own_path():
    verdict = identify.judge(ASTHMA, "E", "D", {"C"})
    assert [path.variables for path in verdict.open_paths] == [("E", "A", "C", "B", "D")]


def test_bronchial_reactivity_with_air_pollution_or_with_sex_is_enough():
    assert all_sets(ASTHMA, "E", "D") == sets("A C", "B C")


# The same paper: without the arrows from C, adjusting for nothing is right and adjusting for C alone is
# wrong.
M_STRUCTURE = graph("A>E A>C B>C B>D E>D")


def test_adjusting_for_the_collider_of_an_m_opens_a_path():
    assert all_sets(M_STRUCTURE, "E", "D") == [frozenset()]
    assert not identify.is_sufficient(M_STRUCTURE, "E", "D", {"C"})


@pytest.mark.parametrize("members", sets("A C", "B C", "A B C"))
def test_the_path_opened_by_the_collider_of_an_m_is_blocked_again_by_either_side(members):
    assert identify.is_sufficient(M_STRUCTURE, "E", "D", members)


# Shpitser, VanderWeele and Robins 2010, Proceedings of UAI, on why the back-door criterion is not complete.
def test_what_the_exposure_affects_may_be_adjusted_for_off_the_causal_paths():
    side_effect = graph("X>Y X>Z")
    assert identify.is_sufficient(side_effect, "X", "Y", {"Z"})


def test_what_a_mediator_affects_may_not_be_adjusted_for():
    shadow = graph("X>M M>Y M>Z")
    assert not identify.is_sufficient(shadow, "X", "Y", {"Z"})


# Schisterman, Cole and Platt 2009, Epidemiology 20:488-495.
def test_adjusting_for_an_intermediate_or_its_marker_is_overadjustment():
    overadjusted = graph("E>M M>D M>marker")
    assert identify.is_sufficient(overadjusted, "E", "D", set())
    assert not identify.is_sufficient(overadjusted, "E", "D", {"M"})
    assert not identify.is_sufficient(overadjusted, "E", "D", {"marker"})


def test_four_kinds_of_variables_are_unnecessary_but_harmless():
    # Outside the system; cause of exposure alone; effect of exposure alone; cause of outcome alone.
    unnecessary = CausalGraph([("E", "D"), ("C2", "E"), ("E", "C3"), ("C4", "D")], [Variable("C1")])
    assert all_sets(unnecessary, "E", "D") == [frozenset()]
    assert identify.is_sufficient(unnecessary, "E", "D", {"C1", "C2", "C3", "C4"})
    assert set(identify.judge(unnecessary, "E", "D", {"C1", "C2", "C3", "C4"}).redundant) == {
        "C1",
        "C2",
        "C3",
        "C4",
    }


# Hernán and others 2002, American Journal of Epidemiology 155:176-184: folic acid supplements E, birth
# defect D, stillbirth or therapeutic abortion C, which both affect.
def test_folic_acid_and_birth_defects_must_not_be_adjusted_for_stillbirth():
    birth_defects = graph("E>C D>C E>D")
    assert all_sets(birth_defects, "E", "D") == [frozenset()]
    assert not identify.is_sufficient(birth_defects, "E", "D", {"C"})


# Hernán, Hernández-Díaz and Robins 2004, Epidemiology 15:615-625: loss to follow-up C, symptoms L, severity
# U.
def test_loss_to_follow_up_is_mended_by_symptoms_that_treatment_does_not_affect():
    lost = graph("E>C U>L L>C U>D E>D", unmeasured="U", restricted="C")
    assert all_sets(lost, "E", "D") == sets("L")


def test_loss_to_follow_up_is_beyond_adjustment_when_treatment_affects_the_symptoms():
    lost = graph("E>L U>L L>C E>C U>D E>D", unmeasured="U", restricted="C")
    assert all_sets(lost, "E", "D") == []


# Robins and Greenland 1992, Epidemiology 3:143-155; Cole and Hernán 2002, International Journal of
# Epidemiology 31:163-165: the direct effect needs the common causes of mediator and outcome.
def test_a_direct_effect_needs_what_confounds_mediator_and_outcome():
    arrows = "E>M M>D E>D U>M U>D"
    assert all_sets(graph(arrows), "E", "D", effect="direct") == sets("M U")
    assert all_sets(graph(arrows, unmeasured="U"), "E", "D", effect="direct") == []
    assert all_sets(graph(arrows, unmeasured="U"), "E", "D") == [frozenset()]
