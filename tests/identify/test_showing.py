"""Results show themselves: as text, as a table in a notebook, as a pandas frame, and as JSON."""

from __future__ import annotations

import json
from html.parser import HTMLParser

import pytest

from adjustplan.graph import CausalGraph, Variable
from adjustplan.identify import judge, list_sets, roles

GRAPH = CausalGraph([("a<b>", "x"), ("a<b>", "y"), ("x", "y"), ("c", "y")], [Variable("a<b>", label='"A" & <b>')])


class Cells(HTMLParser):
    """Collects the text of table cells."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: set[str] = set()
        self.text = ""

    def handle_starttag(self, tag: str, _attributes: object) -> None:
        self.tags.add(tag)

    def handle_data(self, data: str) -> None:
        self.text += data


@pytest.mark.parametrize(
    "result",
    [roles(GRAPH, "x", "y"), judge(GRAPH, "x", "y", ["a<b>", "c"]), list_sets(GRAPH, "x", "y")],
    ids=["roles", "verdict", "sets"],
)
def test_a_result_shows_in_a_notebook_and_as_a_frame(result) -> None:
    html = Cells()
    html.feed(result._repr_html_())
    assert html.tags == {"table", "caption", "thead", "tbody", "tr", "th", "td"}  # “<b>” came out as text
    assert "a<b>" in html.text
    frame = result.to_frame()
    assert len(frame) == len(list(result.records()))
    assert str(result).startswith(result.caption())
    assert json.loads(json.dumps(result.to_dict(), allow_nan=False))["exposure"] == "x"


def test_a_verdict_can_be_asked_whether_it_is_good() -> None:
    assert judge(GRAPH, "x", "y", ["a<b>"])
    assert not judge(GRAPH, "x", "y", [])


def test_a_frame_of_roles_has_a_row_for_each_variable() -> None:
    frame = roles(GRAPH, "x", "y").to_frame()
    assert list(frame["variable"]) == ["a<b>", "x", "y", "c"]
    assert frame.set_index("variable").loc["a<b>", "advice"] == "needed"
