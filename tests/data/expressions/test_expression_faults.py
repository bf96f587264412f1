"""What is wrong with an expression is said before anything runs, at its character, and no text breaks the reader."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.data.expressions import check, columns_of, parse
from adjustplan.data.expressions.faults import alone, of_expression
from adjustplan.data.expressions.words import KEYWORDS, written

KINDS = {
    "age": "number",
    "weight": "number",
    "site": "text",
    "ward": "text",
    "diabetic": "boolean",
    "enrolled": "date",
    "blob": "other",
    "systolic pressure": "number",
}


def complaints(text: str, condition: bool = True) -> list[tuple[str, str, str, int]]:
    tree, faults = parse(text)
    if tree is not None:
        assert not faults
        faults = check(tree, text, KINDS, condition=condition).faults
    return [(fault.code, fault.message, fault.remedy, fault.at) for fault in faults]


@pytest.mark.parametrize(
    ("text", "at", "said", "helped"),
    [
        ("", 0, "empty", "age >= 18"),
        ("age == 18", 4, "==", "one “=”"),
        ("age <> 18", 4, "<>", "!="),
        ("age ≥ 18", 4, "≥", ">="),
        ("age => 18", 4, "=>", ">="),
        ("diabetic && age > 1", 9, "&&", "“and”"),
        ("diabetic || age > 1", 9, "||", "“or”"),
        ("!diabetic", 0, "!", "not"),
        ("site = “north”", 7, "quotation mark", '"'),
        ("site = 'north", 7, "never closed", "twice"),
        ("`age > 3", 0, "backtick", "Close"),
        ("age > 18 AND diabetic", 9, "found “AND”", "“and”"),
        ("systolic pressure > 140", 9, "found “pressure”", "backticks"),
        ("age > ", 5, "found the end", "Complete"),
        ("(age > 18", 0, "never closed", ")"),
        ("age > 18)", 8, "found “)”", "Take it out"),
        ("18 <= age <= 65", 10, "cannot go on", "and"),
        ("age = missing", 6, "no value to compare", "is missing"),
        ("age = NULL", 6, "no value to compare", "is missing"),
        ("age is 5", 7, "Expected “missing”", "="),
        ("site in 'north'", 8, "Expected “(”", "parentheses"),
        ("site in (north)", 9, "name of a column", '"north"'),
        ("age in (1, 2 + 3)", 13, "Expected a comma", "list"),
        ("age in ()", 8, "Expected a column or a value", ""),
        ("log(age) > 1", 0, "no function “log”", "Known"),
        ("enrolled < date(2015, 2, 29)", 11, "no such day", "date(year, month, day)"),
        ("enrolled < date(2015-02-01)", 20, "Expected “,”", "date(year, month, day)"),
        ("age > 18years", 6, "starts like a number", "backticks"),
        ("age > 1e999", 6, "too large", "1e308"),
        ("age ** 2 > 5", 4, "**", "multiply"),
        ("age; drop", 3, ";", "Take it out"),
        ("5 > ", 3, "found the end", ""),
    ],
)
def test_a_slip_of_the_pen_is_placed_and_helped(text: str, at: int, said: str, helped: str) -> None:
    (code, message, remedy, place), *_ = complaints(text)
    assert (code, place) == ("data-expression-syntax", at)
    assert said in message
    assert helped in remedy


@pytest.mark.parametrize(
    ("text", "code", "at", "said", "helped"),
    [
        ("wieght > 18", "data-missing-column", 0, "no column “wieght”", "“weight”"),
        ("diabetic and ag > 18", "data-missing-column", 13, "no column “ag”", "“age”"),
        ("age > '18'", "data-expression-type", 6, "holds numbers", "quotes off"),
        ("'18' < age", "data-expression-type", 0, "holds numbers", "quotes off"),
        ("site = 1", "data-expression-type", 7, "holds text", '"1"'),
        ("site > 'a'", "data-expression-type", 0, "no order", "in ("),
        ("diabetic < true", "data-expression-type", 0, "no order", "="),
        ("diabetic = 'yes'", "data-expression-type", 11, "true and false", "the column alone"),
        ("diabetic = 2", "data-expression-type", 11, "true and false", "the column alone"),
        ("enrolled < '2015-01-01'", "data-expression-type", 11, "holds dates", "date(2015, 1, 31)"),
        ("enrolled < 2015-01-01", "data-expression-type", 0, "holds dates", "date(2015, 1, 31)"),
        ("enrolled - enrolled > 365", "data-expression-type", 0, "holds dates", "days"),
        ("site", "data-expression-type", 0, "holds text", 'site = "…"'),
        ("not site", "data-expression-type", 4, "neither true nor false", "Compare"),
        ("age + 1", "data-expression-type", 0, "“age + 1” is a number", "Compare"),
        ("age > 1 and weight * 2", "data-expression-type", 12, "“weight * 2” is a number", "Compare"),
        ("site in ('a', 5)", "data-expression-type", 14, "holds text", '"5"'),
        ("blob = 3", "data-expression-type", 0, "neither numbers", "is missing"),
        ("site = age", "data-expression-type", 0, "“age” holds numbers", "like with like"),
        ("(age > 3) + 1 = 2", "data-expression-type", 1, "true or false", "numbers"),
    ],
)
def test_like_is_compared_with_like(text: str, code: str, at: int, said: str, helped: str) -> None:
    (found, message, remedy, place), *_ = complaints(text)
    assert (found, place) == (code, at)
    assert said in message
    assert helped in remedy


def test_everything_wrong_with_a_readable_expression_is_said_at_once() -> None:
    found = complaints("aeg > 18 and site = 5 and not enrolled or wieght < 3")
    assert [(code, at) for code, _, _, at in found] == [
        ("data-missing-column", 0),
        ("data-expression-type", 20),
        ("data-expression-type", 30),
        ("data-missing-column", 42),
    ]
    assert len(complaints("age & 3 | site ≠ ;")) == 4


@pytest.mark.parametrize(
    "text",
    ["age >= 18 and not diabetic", "`systolic pressure` > 140", "blob is not missing", "age", "site = ward", "true"],
)
def test_sound_conditions_pass(text: str) -> None:
    assert complaints(text) == []


def test_a_column_whose_name_is_a_word_of_the_language_stands_in_backticks() -> None:
    tree, _ = parse("`in` = 1 and `not` = 2 and date > 3 and `NULL` = 4")
    assert tree is not None
    assert columns_of(tree) == {"in", "not", "date", "NULL"}


def test_a_number_as_a_condition_has_to_be_0_or_1() -> None:
    tree, _ = parse("age and (weight = true or not age)")
    assert tree is not None
    assert check(tree, "", KINDS, condition=True).zero_one == {"age", "weight"}


def test_a_repeated_column_cannot_be_used() -> None:
    tree, _ = parse("age > 1")
    assert tree is not None
    (fault,) = check(tree, "age > 1", KINDS, repeated=frozenset(["age"])).faults
    assert fault.code == "data-column-twice"


def test_a_fault_in_a_later_line_is_shown_with_that_line() -> None:
    text = "age >= 18\n  and site == 'north'"
    (fault,) = parse(text)[1]
    finding = alone(of_expression(fault, text, ("data", "where")))
    assert (finding.line, finding.column, finding.excerpt) == (2, 12, "  and site == 'north'")
    assert str(finding).splitlines()[-1].index("^") == 4 + 11


@pytest.mark.parametrize("unit", ["(", "not ", "-", "(age > 1 and ", "age in (", "`"])
@pytest.mark.parametrize("times", [41, 5_000, 100_000])
def test_no_depth_blows_the_stack(unit: str, times: int) -> None:
    tree, faults = parse(unit * times + "age")
    assert tree is None
    assert {fault.code for fault in faults} <= {"data-expression-size", "data-expression-syntax"}


@pytest.mark.parametrize("text", ["age" + " + age" * 50_000, " " * 20_001, "age > 1" + " or age > 1" * 400])
def test_a_text_out_of_all_proportion_is_refused(text: str) -> None:
    assert [fault.code for fault in parse(text)[1]] == ["data-expression-size"]


PIECES = st.sampled_from(
    [
        *KEYWORDS,
        *KINDS,
        *"()=<>!+-*/,`'\".;&| \n\\",
        "date(",
        "2015",
        "1e5",
        "<=",
        "!=",
        "“",
        "é",
        "\0",
        "٣",
        "²",
        "\u200f",
    ]
)


@settings(max_examples=400, deadline=None)
@given(st.one_of(st.text(max_size=40), st.lists(PIECES, max_size=25).map(" ".join), st.lists(PIECES).map("".join)))
def test_no_text_whatever_breaks_the_reader(text: str) -> None:
    tree, faults = parse(text)
    assert (tree is None) == bool(faults)
    if tree is not None:
        faults = check(tree, text, KINDS, condition=True).faults
    for fault in faults:
        assert 0 <= fault.at <= len(text)
        assert fault.message.endswith((".", "”."))
        assert str(alone(of_expression(fault, text, ())))


@given(st.text(min_size=1, max_size=12).filter(lambda name: "\0" not in name))
def test_any_name_can_be_written(name: str) -> None:
    tree, faults = parse(f"{written(name)} is missing")
    assert not faults
    assert tree is not None
    assert columns_of(tree) == {name}
