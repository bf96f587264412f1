"""What an expression says of a row is what Python says of it, with three values: true, false and missing.

Expressions are drawn at random, written as text, read, and run by the engine over a small table. Beside it stands an
evaluator of a few lines that works on the drawn structure, row by row, and knows nothing of the parser or the engine.
"""

from __future__ import annotations

import datetime
import operator
from typing import Any

import ibis
import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.data.expressions import check, parse
from adjustplan.data.expressions.compiling import Rows

KINDS = {
    "whole": "number",
    "broken": "number",
    "odd `name` of 1": "number",
    "coded": "number",
    "flag": "boolean",
    "note": "text",
    "day": "date",
    "moment": "date",
}
WRITTEN = {name: name for name in KINDS} | {"odd `name` of 1": "`odd ``name`` of 1`"}
TEXTS = ["N1", "it's", 'say "x"', "", "  ", "x'; DROP TABLE rows; --", "back\\slash", "%_", "ä"]
DAYS = [datetime.date(2015, 12, 31), datetime.date(2016, 2, 29), datetime.date(2016, 3, 1), datetime.date(1900, 2, 28)]
SIGNS = {
    "=": operator.eq,
    "!=": operator.ne,
    "<": operator.lt,
    "<=": operator.le,
    ">": operator.gt,
    ">=": operator.ge,
}
WHOLE, BROKEN = st.integers(-3, 3), st.integers(-6, 6).map(lambda half: half / 2)


def maybe(values: st.SearchStrategy[Any]) -> st.SearchStrategy[Any]:
    return st.one_of(st.none(), values)


ROW = st.fixed_dictionaries(
    {
        "whole": maybe(WHOLE),
        "broken": maybe(BROKEN),
        "odd `name` of 1": maybe(BROKEN),
        "coded": maybe(st.integers(0, 1)),
        "flag": maybe(st.booleans()),
        "note": maybe(st.sampled_from(TEXTS)),
        "day": maybe(st.sampled_from(DAYS)),
        "moment": maybe(st.sampled_from(DAYS)),
    }
)


def column(*names: str) -> st.SearchStrategy[Any]:
    return st.sampled_from(names).map(lambda name: ("column", name))


def constant(values: st.SearchStrategy[Any]) -> st.SearchStrategy[Any]:
    return values.map(lambda value: ("constant", value))


def is_no_number(what: Any) -> bool:
    return what != ("column", "coded")


NUMBERS = st.recursive(
    st.one_of(column("whole", "broken", "odd `name` of 1", "coded"), constant(WHOLE), constant(BROKEN)),
    lambda inner: st.one_of(st.tuples(st.sampled_from("+-*/"), inner, inner), st.tuples(st.just("negative"), inner)),
    max_leaves=4,
)
SIGN = st.sampled_from(sorted(SIGNS))
EQUAL = st.sampled_from(["=", "!="])
NOTE, DAY = column("note"), column("day", "moment")
VALUE = st.one_of(NUMBERS, NOTE, DAY, column("flag"))
SIMPLE = st.one_of(
    column("flag", "coded"),
    constant(st.booleans()),
    st.tuples(SIGN, NUMBERS, NUMBERS),
    st.tuples(EQUAL, NOTE, constant(st.sampled_from(TEXTS[:3] + TEXTS[5:]))),
    st.tuples(SIGN, DAY, st.one_of(DAY, constant(st.sampled_from(DAYS)))),
    st.tuples(EQUAL, column("flag", "coded"), constant(st.booleans())),
    st.tuples(st.sampled_from(["in", "not in"]), NUMBERS, st.lists(st.one_of(WHOLE, BROKEN), min_size=1, max_size=3)),
    st.tuples(st.sampled_from(["in", "not in"]), NOTE, st.lists(st.sampled_from(TEXTS[:3]), min_size=1, max_size=3)),
    st.tuples(st.sampled_from(["in", "not in"]), DAY, st.lists(st.sampled_from(DAYS), min_size=1, max_size=3)),
    st.tuples(st.sampled_from(["is missing", "is not missing"]), VALUE),
)
CONDITIONS = st.recursive(
    SIMPLE,
    lambda inner: st.one_of(
        st.tuples(st.sampled_from(["and", "or"]), inner, inner),
        st.tuples(st.just("not"), inner),
        st.tuples(st.sampled_from(["is missing", "is not missing"]), inner),
        st.tuples(EQUAL, inner.filter(is_no_number), inner.filter(is_no_number)),
    ),
    max_leaves=6,
)


def truth(what: Any, row: dict[str, Any]) -> Any:
    """The value of a drawn expression for one row; None is missing."""
    head = what[0]
    if head == "constant":
        return what[1]
    if head == "column":
        value = row[what[1]]
        return None if isinstance(value, str) and not value.strip() else value
    if head in ("is missing", "is not missing"):
        return (truth(what[1], row) is None) == (head == "is missing")
    if head in ("and", "or", "not"):
        parts = [truth(part, row) for part in what[1:]]
        parts = [None if part is None else bool(part) for part in parts]
        if head == "not":
            return None if parts[0] is None else not parts[0]
        decides = head == "or"
        return decides if decides in parts else None if None in parts else not decides
    values = [truth(part, row) for part in (what[1:2] if head in ("in", "not in") else what[1:])]
    if None in values:
        return None
    if head in ("in", "not in"):
        return (values[0] in what[2]) == (head == "in")
    if head == "negative":
        return -values[0]
    if head in SIGNS:
        return SIGNS[head](*values)
    if head == "/":
        return None if values[1] == 0 else values[0] / values[1]
    return {"+": operator.add, "-": operator.sub, "*": operator.mul}[head](*values)


def as_text(value: Any) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, datetime.date):
        return f"date({value.year}, {value.month}, {value.day})"
    if isinstance(value, str):
        mark = "'" if '"' in value and "'" not in value else '"'
        return mark + value.replace(mark, mark * 2) + mark
    return repr(value)


def text_of(what: Any) -> str:
    """A drawn expression as somebody would write it, every part in parentheses."""
    head = what[0]
    if head == "constant":
        return as_text(what[1])
    if head == "column":
        return WRITTEN[what[1]]
    if head in ("is missing", "is not missing"):
        return f"({text_of(what[1])}) {head}"
    if head in ("in", "not in"):
        return f"({text_of(what[1])}) {head} ({', '.join(map(as_text, what[2]))})"
    if head in ("not", "negative"):
        return f"{'not' if head == 'not' else '-'} ({text_of(what[1])})"
    return f"({text_of(what[1])}) {head} ({text_of(what[2])})"


def frame_of(rows: list[dict[str, Any]], single: bool = False) -> pd.DataFrame:
    types = {"whole": "Int64", "coded": "Int16", "flag": "boolean"}
    frame = pd.DataFrame({name: pd.Series([row[name] for row in rows], dtype=types.get(name)) for name in KINDS})
    frame["moment"] = pd.to_datetime(frame["moment"]) + pd.Timedelta(hours=23, minutes=59)
    for name in ("broken", "odd `name` of 1"):
        frame[name] = frame[name].astype("float32" if single else "float64")
    return frame.astype({"note": "string"}).assign(place=range(len(rows)))


def asked(frame: pd.DataFrame, texts: list[str]) -> pd.DataFrame:
    """The engine's answers, a column for each text."""
    import pyarrow as pa

    schema = pa.schema(
        [
            ("whole", pa.int64()),
            ("broken", pa.float32() if frame["broken"].dtype == np.float32 else pa.float64()),
            ("odd `name` of 1", pa.float64()),
            ("coded", pa.int16()),
            ("flag", pa.bool_()),
            ("note", pa.string()),
            ("day", pa.date32()),
            ("moment", pa.timestamp("us")),
            ("place", pa.int64()),
        ]
    )
    rows = Rows(ibis.memtable(pa.Table.from_pandas(frame, schema=schema, preserve_index=False)), KINDS)
    answers = {}
    for number, text in enumerate([*texts, *(f"({text}) is missing" for text in texts)]):
        tree, faults = parse(text)
        assert tree is not None, (text, faults)
        checked = check(tree, text, KINDS, condition=True)
        assert not checked.faults, (text, checked.faults)
        answers[f"answer_{number}"] = rows.condition(tree)
    return rows.table.mutate(**answers).order_by("place").to_pyarrow().to_pandas(types_mapper=pd.ArrowDtype)


@settings(max_examples=60, deadline=None)
@given(rows=st.lists(ROW, min_size=1, max_size=8), conditions=st.lists(CONDITIONS, min_size=1, max_size=6))
def test_the_engine_answers_as_three_valued_logic_does(rows: list[dict[str, Any]], conditions: list[Any]) -> None:
    answers = asked(frame_of(rows), [text_of(condition) for condition in conditions])
    for number, condition in enumerate(conditions):
        for place, row in enumerate(rows):
            expected, got = truth(condition, row), answers[f"answer_{number}"][place]
            expected = None if expected is None else bool(expected)
            assert (None if pd.isna(got) else bool(got)) is expected, (text_of(condition), row)
            assert bool(answers[f"answer_{number + len(conditions)}"][place]) is (expected is None)


def answers_to(text: str, **values: Any) -> bool | None:
    row = dict.fromkeys(KINDS) | values
    got = asked(frame_of([row]), [text])["answer_0"][0]
    return None if pd.isna(got) else bool(got)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("true or false and false", True),
        ("(true or false) and false", False),
        ("not false and false", False),
        ("not (false and false)", True),
        ("2 + 3 * 4 = 14", True),
        ("(2 + 3) * 4 = 20", True),
        ("10 - 4 - 3 = 3", True),
        ("24 / 4 / 2 = 3", True),
        ("7 / 2 = 3.5", True),
        ("- 2 * - 3 = 6", True),
        ("1 - -1 = 2", True),
        ("not 1 = 2", True),
        ("1 in (2, 1)", True),
        ("1 not in (2, 3)", True),
        ("-1 in (-1)", True),
        ("1 / 0 is missing", True),
        ("date(2016, 2, 29) < date(2016, 3, 1)", True),
        ("1e3 = 1000 and .5 = 0.50", True),
        ("true\n  and\ttrue", True),
    ],
)
def test_signs_bind_as_in_arithmetic_and_words_as_in_logic(text: str, expected: bool) -> None:
    assert answers_to(text) is expected


def test_missing_decides_nothing_but_a_false_part_of_and_and_a_true_part_of_or() -> None:
    assert answers_to("whole > 1") is None
    assert answers_to("not whole > 1") is None
    assert answers_to("whole > 1 and false") is False
    assert answers_to("whole > 1 or true") is True
    assert answers_to("whole > 1 and true") is None
    assert answers_to("whole != 1") is None
    assert answers_to("whole not in (1, 2)") is None


def test_a_text_of_blanks_and_not_a_number_are_missing() -> None:
    assert answers_to("note is missing", note="  ") is True
    assert answers_to("note != 'N1'", note="") is None
    assert answers_to("broken is missing", broken=float("nan")) is True
    assert answers_to("broken > 1", broken=float("nan")) is None


def test_a_moment_counts_as_its_day() -> None:
    late = datetime.date(2016, 2, 29)
    assert answers_to("moment = date(2016, 2, 29)", moment=late) is True
    assert answers_to("moment <= date(2016, 2, 29)", moment=late) is True


def test_large_whole_numbers_are_told_apart() -> None:
    """2^53 and 2^53 + 1 are one number in double precision, and two identifiers."""
    assert answers_to("whole = 9007199254740992", whole=2**53 + 1) is False
    assert answers_to("whole = 9007199254740993", whole=2**53 + 1) is True


def test_a_tenth_stored_in_single_precision_equals_a_tenth() -> None:
    row = dict.fromkeys(KINDS) | {"broken": 0.1}
    texts = ["broken = 0.1", "broken <= 0.1", "broken in (0.1, 5)", "0.1 >= broken", "broken > 0.1", "broken != 0.1"]
    answers = asked(frame_of([row], single=True), texts)
    assert [bool(answers[f"answer_{n}"][0]) for n in range(len(texts))] == [True, True, True, True, False, False]


def test_seventeen_digits_survive_the_way_to_the_engine() -> None:
    value = 0.1 + 0.2
    assert answers_to(f"broken = {value!r}", broken=value) is True
    assert answers_to("broken = 0.3", broken=value) is False


def test_a_number_stands_as_a_condition_through_0_and_1() -> None:
    assert answers_to("coded", coded=1) is True
    assert answers_to("not coded", coded=0) is True
    assert answers_to("coded = false", coded=0) is True
    assert answers_to("flag = 1", flag=True) is True
    assert answers_to("flag in (0)", flag=True) is False


@pytest.mark.parametrize("attempt", [*TEXTS[5:], "\n", "\u2028", "a\x01b", "';--", "\\'", "$1", "{}", ":name", "?"])
def test_whatever_is_written_in_a_text_stays_a_text(attempt: str) -> None:
    written = as_text(f"x{attempt}")
    assert answers_to(f"note = {written}", note=f"x{attempt}") is True
    assert answers_to(f"note = {written}", note="x") is False
    assert answers_to(f"note in ({written}, 'q')", note=f"x{attempt}") is True


@pytest.mark.parametrize("dialect", ["duckdb", "postgres"])
@pytest.mark.parametrize("attempt", ["x'; DROP TABLE rows; --", "x\\'; DROP TABLE rows; --"])
def test_a_query_holds_a_hostile_text_as_one_literal(dialect: str, attempt: str) -> None:
    import sqlglot

    text = f"note = {as_text(attempt)} or day < date(2016, 2, 29) and broken / whole > 1.5"
    tree, _ = parse(text)
    assert tree is not None
    table = ibis.table({"note": "string", "day": "date", "broken": "float64", "whole": "int64"}, name="rows")
    sql = ibis.to_sql(table.select(answer=Rows(table, KINDS).condition(tree)), dialect=dialect)
    parsed = sqlglot.parse(str(sql), dialect=dialect)
    assert len(parsed) == 1
    assert attempt in {str(literal.this) for literal in parsed[0].find_all(sqlglot.exp.Literal)}


def test_a_long_list_and_a_deep_nest_still_run() -> None:
    texts = [
        " or ".join(f"whole = {number}" for number in range(240)),
        f"whole in ({', '.join(map(str, range(490)))})",
        "(" * 39 + " + ".join(["whole"] * 100) + ")" * 39 + " = 500",
        "not " * 38 + "whole = 5",
    ]
    assert [answers_to(text, whole=5) for text in texts] == [True] * 4
