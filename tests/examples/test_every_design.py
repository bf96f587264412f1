"""Every design has an example: a plan that passes, and one that fails for the reason its README states."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from adjustplan.check import check_plan
from adjustplan.plan import read_plan
from adjustplan.study import DESIGNS

EXAMPLES = Path(__file__).resolve().parents[2] / "examples"
FOLDERS = sorted(path.parent for path in EXAMPLES.glob("*/plan.toml"))


@pytest.mark.parametrize("folder", FOLDERS, ids=lambda folder: folder.name)
def test_the_plan_passes_without_an_error_or_a_warning(folder: Path) -> None:
    report = check_plan(folder / "plan.toml")
    assert report.read
    assert [finding for finding in report.findings if finding.severity != "note"] == []


@pytest.mark.parametrize("folder", FOLDERS, ids=lambda folder: folder.name)
def test_the_flawed_plan_fails_for_the_reason_the_readme_states(folder: Path) -> None:
    stated = re.search(r"`flawed\.toml` fails with `([\w-]+)`", " ".join((folder / "README.md").read_text().split()))
    assert stated is not None
    report = check_plan(folder / "flawed.toml")
    assert {finding.code for finding in report.findings if finding.severity == "error"} == {stated[1]}


def test_every_design_has_an_example() -> None:
    shown = {plan.study.design for plan in (read_plan(folder / "plan.toml") for folder in FOLDERS) if plan.study}
    assert shown == set(DESIGNS)
