"""The commands that take a plan, as a user meets them, on the example study."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from program import Run

EXAMPLE = Path(__file__).resolve().parents[2] / "examples" / "night_work"


@pytest.fixture
def study(folder: Path) -> Path:
    """The example study, copied into the folder the program runs in."""
    shutil.copytree(EXAMPLE, folder, dirs_exist_ok=True, ignore=shutil.ignore_patterns("document"))
    return folder / "plan.toml"


def test_graph_commands_take_a_plan_alone(run: Run, study: Path) -> None:
    assert study.exists()
    sets = json.loads(run("sets", "plan.toml", "--format", "json").stdout)
    assert sets["sets"] == [["age", "canteen"], ["age", "depot"]]
    judged = json.loads(run("judge", "plan.toml", "--format", "json").stdout)
    assert (judged["adjust"], judged["sufficient"]) == (["age", "depot"], True)
    asked_otherwise = json.loads(run("sets", "plan.toml", "-x", "sleep_debt", "--format", "json").stdout)
    assert asked_otherwise["exposure"] == "sleep_debt"


def test_fit_as_json_has_the_promised_keys(run: Run, study: Path) -> None:
    assert study.exists()
    done = run("fit", "plan.toml", "--format", "json")
    assert done.returncode == 0
    told = json.loads(done.stdout)
    assert told["measure"] == "risk ratio"
    assert set(told["crude"]) >= {"estimate", "lower", "upper", "standard_error"}
    planned = told["adjusted"][0]
    assert planned["set"] == ["age", "depot"]
    assert set(planned) >= {"set", "estimate", "lower", "upper", "standard_error", "rows"}
    assert planned["rows"] == told["rows"] < told["rows_total"]
    assert planned["lower"] < planned["estimate"] < planned["upper"] < told["crude"]["estimate"]


def test_text_and_json_say_the_same(run: Run, study: Path) -> None:
    assert study.exists()
    told = json.loads(run("fit", "plan.toml", "--format", "json").stdout)
    text = run("fit", "plan.toml").stdout
    for result in told["adjusted"]:
        assert f"{result['estimate']:.3g} ({result['lower']:.3g} to {result['upper']:.3g})" in text


def test_findings_give_exit_code_1(run: Run, study: Path) -> None:
    study.write_text(study.read_text().replace('["age", "depot"]', '["age"]', 1))
    done = run("fit", "plan.toml")
    assert done.returncode == 1
    assert "not sufficient" in done.stdout


def test_write_makes_the_document_and_keeps_an_existing_one(run: Run, study: Path) -> None:
    assert run("write", "plan.toml", "-o", "doc").returncode == 0
    document = study.parent / "doc" / "plan.md"
    before = document.read_bytes()
    again = run("write", "plan.toml", "-o", "doc")
    assert again.returncode == 2
    assert "--force" in again.stderr
    assert document.read_bytes() == before
    assert run("write", "plan.toml", "-o", "doc", "--force").returncode == 0


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("exposure   =", "exposer   =", "Did you mean “exposure”?"),
        ('"risk ratio"', '"risk ration"', "Did you mean “risk ratio”?"),
        ('"night_work.edges"', '"nightwork.edges"', "Did you mean"),
        ('"night_work.csv"', '"night_works.csv"', "no such data file"),
        ('design = "cohort"', 'design = "case-control"', "cannot estimate a risk ratio"),
        ("[analysis.forms]", '[analysis.columns]\nage = "agee"\n[analysis.forms]', "Did you mean “age”?"),
        ('exposed = "rotating nights"', 'exposed = "nights"', "rotating nights"),
    ],
)
def test_a_mistake_in_a_plan_gets_a_clear_line_and_exit_code_2(
    run: Run, study: Path, old: str, new: str, words: str
) -> None:
    assert old in study.read_text()
    study.write_text(study.read_text().replace(old, new, 1))
    done = run("fit", "plan.toml")
    assert done.returncode == 2
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""


def test_a_plan_that_is_a_graph_is_refused(run: Run) -> None:
    done = run("fit", "g.edges")
    assert done.returncode == 2
    assert "g.edges" in done.stderr
