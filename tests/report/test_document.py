"""The document: it holds what a reader asks for, says it correctly, and never overwrites or half-writes."""

from __future__ import annotations

import re
import runpy
import shutil
from pathlib import Path

import pytest
from markdown_it import MarkdownIt

import adjustplan as ap
from adjustplan.errors import DataError, OutputError

EXAMPLE = Path(__file__).resolve().parents[2] / "examples" / "night_work"


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A copy of the example study."""
    return Path(shutil.copytree(EXAMPLE, tmp_path / "study", ignore=shutil.ignore_patterns("document")))


def write(study: Path, **options: object) -> str:
    document, picture = ap.write_document(ap.read_plan(study / "plan.toml"), study / "out", **options)
    assert picture.read_text().startswith("<?xml")
    return document.read_text(encoding="utf-8")


def test_the_document_shows_the_planted_effect_and_the_crude_bias(study: Path) -> None:
    """Truth: the model the example's data are drawn from, which its script states and multiplies out."""
    truth = runpy.run_path(str(EXAMPLE / "make_data.py"))["true_risk_ratio"]()
    shown = re.search(
        r"crude risk ratio is \*\*([\d.]+) \(([\d.]+) to ([\d.]+)\)\*\*; adjusted for `age`, `depot` it is"
        r" \*\*([\d.]+) \(([\d.]+) to ([\d.]+)\)\*\*",
        write(study),
    )
    assert shown is not None
    crude_lower, lower, upper = (float(shown[place]) for place in (2, 5, 6))
    assert lower < truth < upper
    assert crude_lower > truth


def test_the_document_holds_every_part_a_reviewer_asks_for(study: Path) -> None:
    told = write(study)
    plan = ap.read_plan(study / "plan.toml")
    for heading in (
        "The question",
        "What is thought to cause what",
        "The part each variable plays",
        "Sufficient sets",
        "The chosen set and why",
        "Crude and adjusted estimates",
        "Cautions",
    ):
        assert f"\n## {heading}\n" in told
    for variable in plan.graph:
        assert f"`{variable.name}`" in told
    for arrow in plan.graph.arrows:
        assert f"| `{arrow.cause}` | `{arrow.effect}` | {arrow.reason}" in told
    assert "](plan-graph.svg)" in told
    assert "1. `age`, `canteen`\n2. `age`, `depot`" in told
    assert "known before the first shift" in told
    for caution in ("nothing unmeasured confounds", "no clinical advice", "ethics committee", "licensed physician"):
        assert caution in told


def test_the_same_inputs_give_the_same_bytes(study: Path) -> None:
    first = write(study)
    assert write(study, force=True) == first


def test_existing_files_are_kept_and_nothing_is_half_written(study: Path) -> None:
    (study / "out").mkdir()
    (study / "out" / "plan-graph.svg").write_text("mine")
    with pytest.raises(OutputError, match="exists already"):
        write(study)
    assert [path.name for path in (study / "out").iterdir()] == ["plan-graph.svg"]
    assert (study / "out" / "plan-graph.svg").read_text() == "mine"


def test_data_that_cannot_serve_leave_no_document(study: Path) -> None:
    (study / "night_work.csv").unlink()
    with pytest.raises(DataError):
        write(study)
    assert not (study / "out").exists()


def test_an_insufficient_set_is_called_that_with_its_open_path(study: Path) -> None:
    plan = study / "plan.toml"
    plan.write_text(plan.read_text().replace('["age", "depot"]', '["age", "sick_leave"]', 1))
    told = write(study)
    assert "is **not sufficient**" in told
    assert "night_work ← depot → canteen → diabetes" in told
    assert "holding it fixed distorts the effect" in told


def test_a_plan_without_data_has_a_document_without_estimates(study: Path) -> None:
    plan = study / "plan.toml"
    plan.write_text(plan.read_text().split("[analysis]")[0])
    assert "nothing is estimated" in write(study)


def test_when_no_set_is_sufficient_the_document_says_why(study: Path) -> None:
    graph = study / "night_work.edges"
    graph.write_text(graph.read_text() + "chronotype -> diabetes\n")
    told = write(study)
    assert "No set of measured variables is sufficient" in told
    assert "night_work ← chronotype → diabetes" in told


def test_words_of_the_plan_come_out_as_text(study: Path) -> None:
    nasty = 'A | "table" <script>alert(1)</script> *and* [a link](x) $x^2$'
    plan = study / "plan.toml"
    plan.write_text(plan.read_text().replace("Rotating night work and type 2 diabetes in depot staff", "TITLE"))
    plan.write_text(plan.read_text().replace('"TITLE"', f"'{nasty}'").split("[analysis]")[0])
    html = MarkdownIt("commonmark").enable("table").render(write(study))
    assert "<script>" not in html
    assert "<h1>A | &quot;table&quot; &lt;script&gt;alert(1)&lt;/script&gt; *and* [a link](x) $x^2$</h1>" in html
