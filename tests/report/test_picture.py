"""The picture: every variable and arrow is in it, and what must be seen is told in words and shape."""

from __future__ import annotations

import xml.etree.ElementTree as ET

import pydot
import pytest

from adjustplan.errors import OutputError, QuestionError
from adjustplan.graph import CausalGraph, Variable, parse_edge_list
from adjustplan.identify import roles
from adjustplan.report.picture import draw_picture, spoken

SVG = "{http://www.w3.org/2000/svg}"
GRAPH = parse_edge_list(
    "income -> damp\nincome -> asthma\ndamp -> mould -> asthma\ngenes -> asthma\ngenes: unmeasured\nage: restricted\n"
)


def texts(svg: bytes) -> list[str]:
    return ["".join(node.itertext()) for node in ET.fromstring(svg).iter(f"{SVG}text")]


def attributes(dot: str, name: str) -> dict[str, str]:
    (node,) = pydot.graph_from_dot_data(dot)[0].get_node(f'"{name}"')
    return node.get_attributes()


def test_every_variable_and_arrow_is_in_the_picture() -> None:
    svg = draw_picture(GRAPH, roles(GRAPH, "damp", "asthma")).svg()
    shown = texts(svg)
    for variable in GRAPH:
        assert variable.name in shown
    edges = [g for g in ET.fromstring(svg).iter(f"{SVG}g") if g.get("class") == "edge"]
    assert len(edges) == len(GRAPH.arrows)


def test_boxes_say_in_words_what_they_are() -> None:
    shown = texts(draw_picture(GRAPH, roles(GRAPH, "damp", "asthma"), ["income"]).svg())
    for words in ("EXPOSURE", "OUTCOME", "MEDIATOR", "CONFOUNDER", "ADJUSTED FOR", "UNMEASURED", "RESTRICTED"):
        assert words in shown


def test_shapes_tell_apart_ends_unmeasured_and_conditioned() -> None:
    dot = draw_picture(GRAPH, roles(GRAPH, "damp", "asthma"), ["income"]).dot
    assert attributes(dot, "damp")["peripheries"] == "2"
    assert "dashed" in attributes(dot, "genes")["style"]
    assert "rounded" in attributes(dot, "mould")["style"]
    for conditioned in ("income", "age"):
        assert "rounded" not in attributes(dot, conditioned)["style"]


def test_only_arrows_on_causal_paths_are_heavy() -> None:
    graph = pydot.graph_from_dot_data(draw_picture(GRAPH, roles(GRAPH, "damp", "asthma")).dot)[0]
    heavy = {
        (edge.get_source().strip('"'), edge.get_destination().strip('"'))
        for edge in graph.get_edges()
        if float(edge.get("penwidth")) > 2
    }
    assert heavy == {("damp", "mould"), ("mould", "asthma")}


def test_variables_of_one_wave_share_a_column_and_waves_run_left_to_right() -> None:
    graph = CausalGraph(
        [("c", "x"), ("x", "y")],
        [Variable("y", wave=2), Variable("z", wave=0), Variable("c", wave=0), Variable("x", wave=1)],
    )
    svg = ET.fromstring(draw_picture(graph).svg())
    across = {
        "".join(text.itertext()): float(text.get("x", "nan"))
        for node in svg.iter(f"{SVG}g")
        if node.get("class") == "node"
        for text in node.iter(f"{SVG}text")
    }
    assert across["z"] == pytest.approx(across["c"], abs=30)
    assert across["c"] < across["x"] < across["y"]


@pytest.mark.parametrize("nasty", ["<script>alert(1)</script>", 'a "b" & c', "x\\n<BR/>", "שלום עולם", "a" * 300])
def test_any_label_comes_out_as_text(nasty: str) -> None:
    graph = CausalGraph([("x", "y")], [Variable("x", label=nasty)])
    svg = draw_picture(graph, roles(graph, "x", "y")).svg()
    assert "".join(nasty.split()) in "".join("".join(texts(svg)).split())
    assert not list(ET.fromstring(svg).iter(f"{SVG}script"))


def test_the_picture_can_be_read_aloud() -> None:
    words = spoken(GRAPH, roles(GRAPH, "damp", "asthma"), ["income"])
    for part in ("no arrow leads from damp to asthma", "Mediator: mould", "Unmeasured: genes", "Adjusted for: income"):
        assert part in words


def test_png_and_dot_are_written_and_other_endings_refused(tmp_path) -> None:
    picture = draw_picture(GRAPH)
    picture.save(tmp_path / "g.png")
    assert (tmp_path / "g.png").read_bytes().startswith(b"\x89PNG\r\n\x1a\n")
    picture.save(tmp_path / "g.dot")
    assert pydot.graph_from_dot_file(str(tmp_path / "g.dot"))
    with pytest.raises(OutputError, match=r"\.svg, \.png or \.dot"):
        picture.save(tmp_path / "g.gif")
    with pytest.raises(OutputError, match="exists already"):
        picture.save(tmp_path / "g.png")


def test_an_unknown_variable_cannot_be_adjusted_for() -> None:
    with pytest.raises(QuestionError, match="Did you mean “income”"):
        draw_picture(GRAPH, roles(GRAPH, "damp", "asthma"), ["incom"])
