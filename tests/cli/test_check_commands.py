"""``check`` and ``explain`` as a user meets them: what is checked, what is said, exit codes, files."""

from __future__ import annotations

import json
import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path
from xml.etree import ElementTree as ET

import pytest
import yaml
from program import Run

ROOT = Path(__file__).resolve().parents[2]
PLAN = """\
title = "Night work and diabetes"
graph = "g.edges"

[question]
exposure = "night_work"
outcome = "diabetes"

[study]
design = "cohort"

[adjustment]
set = ["age", "site"]
rationale = "Both are on the personnel file."
"""
FAILING = PLAN.replace('["age", "site"]', '["age", "site", "sick_leave"]')


@pytest.fixture
def plan(folder: Path) -> Path:
    path = folder / "plan.toml"
    path.write_text(PLAN)
    return path


def plans_of(done: subprocess.CompletedProcess[str]) -> list[str]:
    told: list[str] = json.loads(done.stdout)["plans"]
    return told


def test_a_sound_plan_passes_with_exit_code_0(run: Run, plan: Path) -> None:
    done = run("check", plan.name)
    assert done.returncode == 0
    assert done.stdout.splitlines()[-1].startswith("passed: 1 plan, 0 errors")
    assert done.stderr == ""


def test_an_error_fails_it_with_exit_code_1(run: Run, plan: Path) -> None:
    plan.write_text(FAILING)
    done = run("check", "plan.toml")
    assert done.returncode == 1
    assert re.search(r"^plan\.toml:12: error: .*sick_leave.*\[adjustment-[a-z]+\]$", done.stdout, re.M)


def test_a_warning_fails_it_only_when_strict(run: Run, plan: Path) -> None:
    assert plan.exists()
    assert "warning: " in run("check", "plan.toml").stdout
    assert run("check", "plan.toml", "--strict").returncode == 1


def test_a_plan_that_cannot_be_read_gives_exit_code_2_and_hides_no_other(run: Run, plan: Path, folder: Path) -> None:
    plan.write_text(FAILING)
    (folder / "broken.toml").write_text(PLAN.replace("[study]", "[sturdy]"))
    done = run("check", "broken.toml", "plan.toml", "missing.toml", "--format", "json")
    assert done.returncode == 2
    told = json.loads(done.stdout)
    assert told["plans"] == ["broken.toml", "plan.toml", "missing.toml"]
    codes = {(finding["file"], finding["code"]) for finding in told["findings"]}
    assert ("broken.toml", "plan-unknown-key") in codes
    assert ("missing.toml", "plan-unreadable") in codes
    assert any(file == "plan.toml" and code.startswith("adjustment-") for file, code in codes)
    assert told["passed"] is False
    assert "Traceback" not in done.stderr


def test_json_has_the_promised_keys(run: Run, plan: Path) -> None:
    assert plan.exists()
    told = json.loads(run("check", "plan.toml", "--format", "json").stdout)
    assert told["passed"] is True
    assert told["findings"]
    for finding in told["findings"]:
        assert set(finding) >= {"code", "severity", "message", "file", "line", "remedy"}


def test_a_folder_is_searched_for_plans_and_for_nothing_else(run: Run, folder: Path) -> None:
    for name in ("b/deep/plan.toml", "a.toml", ".hidden/plan.toml", "env/plan.toml"):
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_text(PLAN)
    (folder / "env" / "pyvenv.cfg").write_text("")  # PEP 405: a virtual environment
    (folder / "pyproject.toml").write_text('[project]\nname = "x"\n[tool.question]\ngraph = "no"\n')
    (folder / "broken.toml").write_text("[project\n")
    (folder / "meant.toml").write_text('title = "Half a plan\n[question]\n')
    (folder / "no_graph.toml").write_text('title = "t"\n[question]\nexposure = "a"\n')
    done = run("check", ".", "--format", "json")
    assert plans_of(done) == ["a.toml", "meant.toml", "no_graph.toml", "b/deep/plan.toml"]
    assert done.returncode == 2


def test_patterns_are_expanded_and_plans_named_twice_are_checked_once(run: Run, folder: Path) -> None:
    (folder / "studies" / "x").mkdir(parents=True)
    for name in ("studies/a.toml", "studies/b.toml", "studies/x/c.toml", "plan[1].toml"):
        (folder / name).write_text(PLAN)
    (folder / "studies" / "settings.toml").write_text("depth = 3\n")
    assert plans_of(run("check", "studies/*.toml", "--format", "json")) == ["studies/a.toml", "studies/b.toml"]
    every = ["studies/a.toml", "studies/b.toml", "studies/x/c.toml"]
    assert sorted(plans_of(run("check", "studies/**/*.toml", "--format", "json"))) == every
    assert plans_of(run("check", "studies", "./studies/a.toml", "stud*", "--format", "json")) == every
    assert plans_of(run("check", "plan[1].toml", "--format", "json")) == ["plan[1].toml"]


@pytest.mark.parametrize("named", [".", "*.toml", "**/*"])
def test_nothing_found_is_one_clear_line_and_exit_code_2(run: Run, named: str) -> None:
    done = run("check", named)
    assert done.returncode == 2
    assert len(done.stderr.splitlines()) == 1
    assert "No plan is found" in done.stderr
    assert done.stdout == ""


def test_an_empty_pattern_beside_a_plan_still_gives_exit_code_2(run: Run, plan: Path) -> None:
    done = run("check", plan.name, "elsewhere/*.toml")
    assert done.returncode == 2
    assert "elsewhere/*.toml: No plan is found" in done.stderr
    assert "passed: 1 plan" in done.stdout


def test_a_report_is_written_to_a_file_and_an_existing_one_kept(run: Run, plan: Path, folder: Path) -> None:
    assert plan.exists()
    done = run("check", "plan.toml", "--format", "junit", "-o", "out/report.xml")
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "wrote out/report.xml\n")
    report = folder / "out" / "report.xml"
    assert ET.fromstring(report.read_bytes()).tag == "testsuites"
    report.write_text("mine")
    again = run("check", "plan.toml", "--format", "sarif", "-o", "out/report.xml")
    assert again.returncode == 2
    assert "--force" in again.stderr
    assert report.read_text() == "mine"
    assert run("check", "plan.toml", "--format", "sarif", "-o", "out/report.xml", "--force").returncode == 0
    assert json.loads(report.read_text(encoding="utf-8"))["version"] == "2.1.0"


def test_a_failing_check_writes_its_report_too(run: Run, plan: Path, folder: Path) -> None:
    plan.write_text(FAILING)
    assert run("check", "plan.toml", "--format", "junit", "-o", "report.xml").returncode == 1
    assert ET.fromstring((folder / "report.xml").read_bytes()).get("failures") != "0"


def test_no_colour_in_a_pipe(run: Run, plan: Path) -> None:
    assert "\x1b" not in run("check", plan.name, FORCE_COLOR="1").stdout


def test_names_that_steer_a_terminal_are_made_harmless(run: Run, plan: Path, folder: Path) -> None:
    (folder / "g.edges").write_text('"night\x1b[31m" -> b\nnight_work -> diabetes\nage, site -> diabetes\n')
    plan.write_text(FAILING)
    done = run("check", "plan.toml")
    assert "\x1b" not in done.stdout + done.stderr


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("check",), "PLAN"),
        (("check", "plan.toml", "--format", "yaml"), "yaml"),
        (("check", "plan.toml", "--strikt"), "--strikt"),
        (("check", "g.edges", "-o", "."), "folder"),
        (("explain", "graph-cycel"), "Did you mean “graph-cycle”?"),
        (("explain", "zzz"), "lists them all"),
        (("explain", "graph-cycle", "--format", "sarif"), "sarif"),
    ],
)
def test_a_mistake_gets_a_clear_line_and_exit_code_2(run: Run, arguments: tuple[str, ...], words: str) -> None:
    done = run(*arguments)
    assert done.returncode == 2
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""


def test_explain_tells_of_a_rule_and_of_what_readers_find(run: Run) -> None:
    rule = run("explain", "study-immortal-time")
    assert rule.returncode == 0
    assert "Suissa 2008" in rule.stdout
    told = json.loads(run("explain", "graph-cycle", "--format", "json").stdout)
    assert told["code"] == "graph-cycle"
    assert "circle" in told["text"]


def test_explain_lists_every_code_by_family(run: Run) -> None:
    listed = run("explain")
    assert listed.returncode == 0
    assert "\nstudy\n" in listed.stdout
    told = json.loads(run("explain", "--format", "json").stdout)
    assert {item["code"] for item in told["rules"]} >= {"study-few-outcomes", "model-few-outcomes"}
    assert "plan-not-toml" in {item["code"] for item in told["others"]}


@pytest.mark.parametrize("command", ["check", "explain"])
def test_the_commands_have_help(run: Run, command: str) -> None:
    done = run(command, "--help")
    assert done.returncode == 0
    assert len(done.stdout.splitlines()) > 8


def test_checking_a_plan_without_data_loads_no_library_that_fits_models(plan: Path, folder: Path) -> None:
    (folder / "g.edges").write_text(
        "age, site -> night_work\nage, site -> diabetes\nnight_work -> sleep_debt -> diabetes\n"
    )
    heavy = {"pandas", "statsmodels", "ibis", "duckdb", "numpy", "scipy", "matplotlib", "pydot", "formulaic"}
    code = (
        f"import sys; sys.argv = ['adjustplan', 'check', {plan.name!r}]\n"
        "from adjustplan.cli import main\n"
        "try: main()\n"
        "except SystemExit: pass\n"
        f"print(sorted({heavy!r} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=folder, capture_output=True, text=True, check=True)
    assert "passed" in done.stdout
    assert done.stdout.splitlines()[-1] == "[]"


# the hook for pre-commit


@pytest.fixture
def hook() -> dict[str, object]:
    hooks = yaml.safe_load((ROOT / ".pre-commit-hooks.yaml").read_text(encoding="utf-8"))
    found: dict[str, object] = next(hook for hook in hooks if hook["id"] == "adjustplan-check")
    return found


def test_the_hook_runs_a_check_of_the_whole_repository(run: Run, plan: Path, hook: dict[str, object]) -> None:
    program, *arguments = shlex.split(str(hook["entry"]))
    given = hook["args"]
    assert isinstance(given, list)
    assert program == "adjustplan"
    assert hook["pass_filenames"] is False
    assert run(*arguments, *given).returncode == 0
    plan.write_text(FAILING)
    assert run(*arguments, *given).returncode == 1


@pytest.mark.parametrize(
    ("changed", "runs"),
    [("a/plan.toml", True), ("a/g.edges", True), ("plan.seal", True), ("g.graphml", True), ("notes.md", False)],
)
def test_the_hook_runs_when_a_plan_or_its_graph_changes(hook: dict[str, object], changed: str, runs: bool) -> None:
    assert bool(re.search(str(hook["files"]), changed)) is runs


def test_the_crosswalk_says_which_recommendations_are_met(run: Run, folder: Path) -> None:
    shutil.copytree(ROOT / "examples" / "night_work", folder / "study", ignore=shutil.ignore_patterns("document"))
    told = run("check", "study/plan.toml", "--crosswalk").stdout
    for number in range(1, 9):
        assert f"Tennant et al. 2021, {number}. " in told
    for number in ("7", "9", "12a", "12d", "12e", "16a"):
        assert f"STROBE, {number}. " in told
    assert "not met: STROBE, 12d. " in told
    assert json.loads(run("check", "study/plan.toml", "--format", "json").stdout)["crosswalk"]
    assert run("check", "study/plan.toml", "--crosswalk", "-o", "report.txt").returncode == 0
    assert (folder / "report.txt").read_text(encoding="utf-8") == told
