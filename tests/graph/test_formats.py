"""DOT, GraphML and CSV: what they carry comes back, what they cannot carry is said, what is broken is refused."""

from __future__ import annotations

import networkx as nx
import pytest
from hypothesis import given, settings
from test_edge_list import graphs

from adjustplan.errors import AdjustplanWarning, GraphError, OutputError
from adjustplan.graph import CausalGraph, Variable, read_graph, write_graph
from adjustplan.graph.dot import format_dot, parse_dot
from adjustplan.graph.graphml import format_graphml, parse_graphml
from adjustplan.graph.pairs import format_pairs, parse_pairs

FULL = CausalGraph(
    [("a b", "x", 'says "so" | <b>'), ("x", "y"), ("naïve", "y", "back\\slash")],
    [
        Variable("a b", label="Two words, “quoted”", wave=0, cost=2.5),
        Variable("naïve", unmeasured=True),
        Variable("apart", restricted=True),
    ],
)


@pytest.mark.parametrize("ending", [".edges", ".dot", ".gv", ".graphml"])
def test_a_full_format_gives_back_the_same_graph(tmp_path, ending: str) -> None:
    write_graph(FULL, tmp_path / f"g{ending}")
    assert read_graph(tmp_path / f"g{ending}") == FULL


@settings(max_examples=60, deadline=None)
@given(graphs())
def test_dot_gives_back_any_graph_without_control_characters(graph: CausalGraph) -> None:
    spoken = [text for v in graph for text in (v.name, v.label)] + [arrow.reason for arrow in graph.arrows]
    if all(text.isprintable() for text in spoken):
        assert parse_dot(format_dot(graph)) == graph


@pytest.mark.parametrize("ending", [".dot", ".graphml", ".csv"])
@pytest.mark.parametrize("sign", ["\x01", "\n", "\r", "\ufffe"])
def test_signs_that_a_format_cannot_carry_are_refused(tmp_path, ending: str, sign: str) -> None:
    graphs = [CausalGraph([(f"a{sign}b", "c")])]
    if ending != ".csv":  # which leaves out reasons and labels, and says so
        graphs += [CausalGraph([("a", "c", f"why{sign}not")]), CausalGraph([("a", "c")], [Variable("a", f"x{sign}y")])]
    for graph in graphs:
        with pytest.raises(GraphError, match="cannot carry"):
            write_graph(graph, tmp_path / f"g{ending}")
        assert not (tmp_path / f"g{ending}").exists()
        write_graph(graph, tmp_path / "g.edges", force=True)
        assert read_graph(tmp_path / "g.edges") == graph


def test_csv_refuses_a_name_whose_spaces_it_would_lose(tmp_path) -> None:
    with pytest.raises(GraphError, match="cannot carry"):
        write_graph(CausalGraph([(" a", "b")]), tmp_path / "g.csv")


@settings(max_examples=60, deadline=None)
@given(graphs())
def test_every_full_format_gives_back_any_graph_it_does_not_refuse(tmp_path_factory, graph: CausalGraph) -> None:
    folder = tmp_path_factory.mktemp("formats")
    refused = 0
    for ending in (".dot", ".graphml"):
        try:
            write_graph(graph, folder / f"g{ending}")
        except GraphError:
            refused += 1
        else:
            assert read_graph(folder / f"g{ending}") == graph
    assert refused in (0, 2)


def test_csv_gives_back_the_arrows_and_says_what_it_leaves_out(tmp_path) -> None:
    with pytest.warns(AdjustplanWarning, match="left out") as said:
        write_graph(FULL, tmp_path / "g.csv")
    for word in ("reasons of 2 arrows", "“a b” (label, wave, cost)", "“naïve” (unmeasured)", "“apart”"):
        assert word in str(said[0].message)
    ends = {(arrow.cause, arrow.effect) for arrow in FULL.arrows}
    assert {(arrow.cause, arrow.effect) for arrow in read_graph(tmp_path / "g.csv").arrows} == ends


def test_dot_is_read_as_others_write_it() -> None:
    text = 'digraph "a study" { rankdir=LR; age:n -> {smog; "lung function"}; subgraph cluster_1 { smog -> asthma } }'
    graph = parse_dot(text)
    assert {str(arrow) for arrow in graph.arrows} == {"age -> smog", "age -> lung function", "smog -> asthma"}


def test_networkx_reads_our_dot_and_graphml_as_the_same_digraph() -> None:
    """Reference: networkx's own readers (``networkx.parse_graphml``, ``networkx.nx_pydot``)."""
    ends = {(arrow.cause, arrow.effect) for arrow in FULL.arrows}
    assert set(nx.parse_graphml(format_graphml(FULL)).edges()) == ends
    simple = CausalGraph([("a", "b"), ("b", "c")])
    import pydot

    read = nx.nx_pydot.from_pydot(pydot.graph_from_dot_data(format_dot(simple))[0])
    assert {(a.strip('"'), b.strip('"')) for a, b, *_ in read.edges} == {("a", "b"), ("b", "c")}


def test_a_causal_graph_goes_through_networkx_unchanged() -> None:
    assert CausalGraph.from_networkx(FULL.to_networkx()) == FULL


def test_looks_that_mean_nothing_are_named() -> None:
    with pytest.warns(AdjustplanWarning, match="shape"):
        parse_dot("digraph { a [shape=box]; a -> b }")


@pytest.mark.parametrize(
    ("parse", "text", "words"),
    [
        (parse_dot, "graph { a -- b }", "undirected"),
        (parse_dot, "digraph { a -> ", "Not DOT"),
        (parse_dot, "", "Not DOT"),
        (parse_dot, "digraph { a -> b; b -> a }", "circle"),
        (parse_dot, "digraph { a -> b; a -> b }", "twice"),
        (parse_dot, "digraph { a [cost=lots]; a -> b }", "The cost of “a” is “lots”"),
        (parse_dot, "digraph { a [unmeasured=perhaps]; a -> b }", "true or false"),
        (parse_graphml, "<graphml", "Not a GraphML file"),
        (parse_graphml, "", "Not a GraphML file"),
        (parse_graphml, "<html/>", "Not a GraphML file"),
        (parse_pairs, "a,b,c\n", "two filled columns"),
        (parse_pairs, "a,\n", "two filled columns"),
        (parse_pairs, 'a,"b\n', "Not CSV"),
        (parse_pairs, "cause,effect\n", "no variables"),
        (parse_pairs, "a,b\nb,a\n", "circle"),
    ],
)
def test_what_is_no_causal_graph_is_refused(parse, text: str, words: str) -> None:
    with pytest.raises(GraphError, match=words) as caught:
        parse(text, "the.file")
    assert all(finding.file == "the.file" for finding in caught.value.findings)


def test_an_undirected_graphml_is_refused() -> None:
    text = "\n".join(nx.generate_graphml(nx.path_graph(3)))
    with pytest.raises(GraphError, match="undirected"):
        parse_graphml(text)


def test_a_foreign_csv_header_is_not_taken_for_an_arrow_in_silence() -> None:
    with pytest.warns(AdjustplanWarning, match="header"):
        parse_pairs("source,target\na,b\nb,c\n")


def test_csv_names_with_commas_and_quotes_come_back() -> None:
    graph = CausalGraph([('a, "b"', "c")])
    assert parse_pairs(format_pairs(graph)) == graph


def test_an_unknown_ending_is_refused_with_the_known_ones(tmp_path) -> None:
    with pytest.raises(GraphError, match=r"Did you mean “\.edges”"):
        read_graph(tmp_path / "g.edge")
    with pytest.raises(GraphError, match="no ending"):
        write_graph(FULL, tmp_path / "g")


def test_an_existing_file_is_kept_unless_forced(tmp_path) -> None:
    path = tmp_path / "g.edges"
    path.write_text("mine")
    with pytest.raises(OutputError, match="exists already"):
        write_graph(FULL, path)
    assert path.read_text() == "mine"
    write_graph(FULL, path, force=True)
    assert read_graph(path) == FULL


def test_a_missing_file_offers_the_nearest_name(tmp_path) -> None:
    (tmp_path / "night_work.edges").write_text("a -> b")
    with pytest.raises(GraphError, match=r"Did you mean “.*night_work\.edges”"):
        read_graph(tmp_path / "nightwork.edges")
