"""The figures and commands the README shows are those the program gives."""

from __future__ import annotations

import re
import runpy
from pathlib import Path

import adjustplan as ap
from adjustplan.report.numbers import figure

ROOT = Path(__file__).resolve().parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")
EXAMPLE = ROOT / "examples" / "night_work"


def test_the_readme_shows_the_estimates_of_the_example() -> None:
    fit = ap.fit(ap.read_plan(EXAMPLE / "plan.toml"))
    truth = runpy.run_path(str(EXAMPLE / "make_data.py"))["true_risk_ratio"]()
    for name, result in (("crude", fit.crude), ("adjusted for age and depot", fit.adjusted[0])):
        row = f"| {name} | {figure(result.estimate)} | {figure(result.lower)} to {figure(result.upper)} |"
        assert row in README
    assert f"| true, by the model the data are drawn from | {figure(truth)} | |" in README


def test_every_command_the_readme_names_exists() -> None:
    from typer.main import get_command

    from adjustplan.cli import checking, graphs, plans, registration, starting, stressing  # noqa: F401 (they register commands)
    from adjustplan.cli.app import app

    named = set(re.findall(r"^    adjustplan (\w+)", README, flags=re.MULTILINE))
    assert named
    assert named <= set(get_command(app).commands)


def test_every_file_the_readme_links_to_is_there() -> None:
    links = re.findall(r"\]\(([^)#:]+)\)", README)
    assert links
    for link in links:
        assert (ROOT / link).exists(), link
