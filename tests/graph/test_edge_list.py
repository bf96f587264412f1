"""The edge list: what it says, what it refuses, and that writing and reading give back the same graph."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from adjustplan.errors import AdjustplanWarning, Finding, GraphError
from adjustplan.graph import Arrow, CausalGraph, Variable, format_edge_list, parse_edge_list, read_graph

NIGHT_WORK = """\
# Rotating night work and type 2 diabetes
age, site        -> night_work
age              -> diabetes              : incidence rises with age  # a comment
chronotype       -> night_work            : "evening" types volunteer for nights
night_work       → sleep_debt -> diabetes
chronotype: unmeasured, "Chronotype (evening, \\"late\\" preference)"
employed:   restricted
age:        wave=0, cost=0
"""


def test_a_graph_says_what_its_edge_list_says() -> None:
    graph = parse_edge_list(NIGHT_WORK)
    assert [str(arrow) for arrow in graph.arrows] == [
        "age -> night_work",
        "site -> night_work",
        "age -> diabetes",
        "chronotype -> night_work",
        "night_work -> sleep_debt",
        "sleep_debt -> diabetes",
    ]
    assert graph.arrow("age", "diabetes") == Arrow("age", "diabetes", "incidence rises with age")
    assert graph["chronotype"] == Variable(
        "chronotype", label='Chronotype (evening, "late" preference)', unmeasured=True
    )
    assert graph["employed"].restricted
    assert (graph["age"].wave, graph["age"].cost) == (0, 0.0)


def test_comma_lists_on_both_sides_mean_every_pair() -> None:
    graph = parse_edge_list("a, b -> c, d")
    assert {str(arrow) for arrow in graph.arrows} == {"a -> c", "a -> d", "b -> c", "b -> d"}


def test_names_are_words_of_any_script_or_quoted() -> None:
    graph = parse_edge_list('उम्र, Größe, 年齢, bmi.2 -> "body mass -> index"\r\n')
    assert [variable.name for variable in graph] == ["उम्र", "Größe", "年齢", "bmi.2", "body mass -> index"]


def test_a_name_typed_in_two_unicode_forms_is_one_variable() -> None:
    graph = parse_edge_list("caf\u00e9 -> a\ncafe\u0301 -> b")
    assert len(graph) == 3


def test_a_byte_order_mark_is_left_out(tmp_path) -> None:
    path = tmp_path / "g.edges"
    path.write_bytes(b"\xef\xbb\xbfa -> b\n")
    assert read_graph(path) == CausalGraph([("a", "b")])


@pytest.mark.parametrize(
    ("text", "line", "column", "words"),
    [
        ("a -> ", 1, 5, "Expected a name"),
        ("a --> b", 1, 3, "Expected an arrow"),
        ("a <- b", 1, 3, "points from cause to effect"),
        ("a => b", 1, 3, "Expected an arrow"),
        ("1a -> b", 1, 1, "starts with a digit"),
        ("a b -> c", 1, 3, "needs double quotes"),
        ("night-work -> b", 1, 1, "is not a name"),
        ("a, -> b", 1, 4, "Expected a name"),
        ("lonely", 1, 7, "Expected an arrow “->” or a colon"),
        ('"open -> b', 1, 1, "never closed"),
        ("a -> b\nc ->? d", 2, 3, "reserved"),
        ("a -> b\nb -> c\nc -> a", 1, 6, "a -> b -> c -> a"),
        ("a -> a", 1, 6, "arrow to itself"),
        ("a -> b\nc -> d\na -> b", 3, 6, "there twice"),
        ("a -> b\na: wave=2\nb: wave=1", 1, 6, "back in time"),
        ("a -> b\na: unmesured", 2, 4, "Did you mean “unmeasured”?"),
        ("a -> b\na: wave=1.5", 2, 4, "whole number"),
        ("a -> b\na: wave=" + "9" * 5000, 2, 4, "whole number"),
        ("a -> b\na: cost=-1", 2, 4, "0 or more"),
        ("a -> b\na: cost=inf", 2, 4, "finite"),
        ("a -> b\na: cost=nan", 2, 4, "finite"),
        ("a -> b\na: unmeasured, restricted", 2, 1, "both unmeasured and restricted"),
        ("a -> b\na: wave=1\na: wave=2", 3, 4, "given twice"),
        ("a -> b\nb: proxy of c", 2, 1, "not in the graph"),
        ("a -> b\nb: proxy of b", 2, 1, "proxy of itself"),
        ("a -> b\nb: proxy a", 2, 4, "Unknown item"),
        ("", None, None, "no variables"),
        ("# nothing\n\n", None, None, "no variables"),
    ],
)
def test_a_mistake_is_placed_and_explained(text: str, line: int | None, column: int | None, words: str) -> None:
    with pytest.raises(GraphError) as caught:
        parse_edge_list(text, "g.edges")
    (finding,) = caught.value.findings
    assert (finding.file, finding.line, finding.column) == ("g.edges", line, column)
    assert words in str(finding)
    assert finding.remedy
    if line is not None:
        assert text.splitlines()[line - 1] in str(finding)


def test_all_mistakes_of_a_file_are_reported_at_once() -> None:
    with pytest.raises(GraphError) as caught:
        parse_edge_list("a ->\nb -> c\nc -> b\nd -> d\ne: lable\nf: cost=x, wave=y\n")
    assert [finding.line for finding in caught.value.findings] == [1, 2, 4, 5, 6, 6]


def test_bytes_that_are_not_utf8_are_refused_with_their_line(tmp_path) -> None:
    path = tmp_path / "latin.edges"
    path.write_bytes("a -> b\nGröße -> b\n".encode("latin-1"))
    with pytest.raises(GraphError) as caught:
        read_graph(path)
    (finding,) = caught.value.findings
    assert finding.line == 2
    assert "0xf6" in finding.message


def test_a_described_variable_that_almost_matches_a_drawn_one_is_pointed_out() -> None:
    with pytest.warns(AdjustplanWarning, match="Did you mean “chronotype”"):
        parse_edge_list("chronotype -> night_work\nchronotpye: unmeasured")


names = st.text(st.characters(exclude_categories=("Cs",)), min_size=1, max_size=8).filter(str.strip)
reasons = st.text(st.characters(exclude_categories=("Cs",)), max_size=20)


@st.composite
def graphs(draw: st.DrawFn) -> CausalGraph:
    """Graphs with any names, labels and reasons: arrows lead from earlier to later names, so there is no cycle."""
    order = draw(st.lists(names, min_size=1, max_size=6, unique=True))
    arrows = [
        Arrow(cause, effect, draw(reasons))
        for place, effect in enumerate(order)
        for cause in order[:place]
        if draw(st.booleans())
    ]
    variables = []
    for place, name in enumerate(order):
        state = draw(st.sampled_from(["", "unmeasured", "restricted"]))
        variables.append(
            Variable(
                name,
                label=draw(reasons),
                unmeasured=state == "unmeasured",
                restricted=state == "restricted",
                wave=draw(st.none() | st.just(3)),
                cost=draw(st.floats(0, 1e300)),
                proxy_of=draw(st.sampled_from(["", *order[:place]])),
            )
        )
    return CausalGraph(arrows, variables)


@given(graphs())
@pytest.mark.filterwarnings("ignore::adjustplan.errors.AdjustplanWarning")
def test_writing_and_reading_give_the_same_graph(graph: CausalGraph) -> None:
    assert parse_edge_list(format_edge_list(graph)) == graph


@given(st.text(max_size=80))
@pytest.mark.filterwarnings("ignore::adjustplan.errors.AdjustplanWarning")
def test_any_text_is_a_graph_or_a_graph_error(text: str) -> None:
    findings: tuple[Finding, ...] = ()
    try:
        parse_edge_list(text)
    except GraphError as error:
        findings = error.findings
    assert all(finding.remedy for finding in findings)
