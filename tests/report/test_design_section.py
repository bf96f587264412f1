"""The document says of each design what it can and cannot show."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

import adjustplan as ap
from adjustplan.report.design import design_section
from adjustplan.study import DESIGNS

EXAMPLES = Path(__file__).resolve().parents[2] / "examples"


def section(name: str, plan: str = "plan.toml") -> str:
    return "\n\n".join(design_section(ap.read_plan(EXAMPLES / name / plan)))


@pytest.mark.parametrize("folder", sorted(path.parent.name for path in EXAMPLES.glob("*/plan.toml")))
def test_every_design_says_what_it_can_do_and_what_threatens_it(folder: str) -> None:
    plan = ap.read_plan(EXAMPLES / folder / "plan.toml")
    assert plan.study is not None
    design = DESIGNS[plan.study.design]
    told = section(folder)
    for part in (design.can_do, design.time_order, design.holds_fixed, *design.threats[1:]):
        assert part in told.replace("\\", "")


def test_a_case_control_study_says_what_its_odds_ratio_estimates() -> None:
    told = section("glaze_work")
    assert "the odds ratio estimates the rate ratio" in told
    assert "exposure and sampling are separated" in told
    assert "Matched for: `age`" in told


def test_a_case_series_estimates_no_effect() -> None:
    assert "It can estimate no effect: nobody without the outcome is observed" in section("pool_rash")


def test_an_ecological_estimate_says_that_it_is_between_groups(tmp_path: Path) -> None:
    study = Path(shutil.copytree(EXAMPLES / "street_trees", tmp_path / "study"))
    plan = study / "plan.toml"
    plan.write_text(
        plan.read_text()
        .replace('"rate ratio"', '"mean difference"')
        .replace('"count"', '"continuous"')
        .replace("spline(4)", "linear")
        .replace('person_time  = "person_years"\n', "")
    )
    rows = "".join(f"{i % 7},{i % 5},{10 + i % 21},{i % 7 + i % 5 + (i * 7) % 11}\n" for i in range(60))
    (study / "street_trees.csv").write_text("income,density,tree_cover,heat_admissions\n" + rows)
    document, _ = ap.write_document(ap.read_plan(plan), tmp_path / "out")
    told = document.read_text(encoding="utf-8")
    assert "Between groups, not people: For 30 compared with 10" in told
    assert "Adjusted mean difference between groups" in told
