"""The graph commands as a user meets them: output, exit codes, and what is said when something is wrong."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import pytest
from program import Run

QUESTION = ("-x", "night_work", "-y", "diabetes")


def test_sets_lists_every_minimal_set(run: Run) -> None:
    done = run("sets", "g.edges", *QUESTION)
    assert done.returncode == 0
    assert "{age, site}" in done.stdout
    assert done.stderr == ""


def test_sets_as_json_has_the_promised_keys(run: Run) -> None:
    told = json.loads(run("sets", "g.edges", *QUESTION, "--format", "json").stdout)
    assert told["exposure"] == "night_work"
    assert told["outcome"] == "diabetes"
    assert told["effect"] == "total"
    assert told["sets"] == [["age", "site"]]
    assert told["complete"] is True


@pytest.mark.parametrize("which", ["one", "smallest", "cheapest", "precise"])
def test_one_best_set_can_be_asked_for(run: Run, which: str) -> None:
    told = json.loads(run("sets", "g.edges", *QUESTION, "--which", which, "--format", "json").stdout)
    assert told["sets"] == [["age", "site"]]


def test_a_direct_effect_needs_the_mediator(run: Run) -> None:
    told = json.loads(run("sets", "g.edges", *QUESTION, "--effect", "direct", "--format", "json").stdout)
    assert told["sets"] == [["age", "site", "sleep_debt"]]


def test_when_no_set_is_sufficient_a_path_is_named_and_the_exit_code_is_1(run: Run, folder: Path) -> None:
    (folder / "g.edges").write_text("u -> x\nu -> y\nx -> y\nu: unmeasured\n")
    done = run("sets", "g.edges", "-x", "x", "-y", "y")
    assert done.returncode == 1
    assert "x <- u -> y" in done.stdout


def test_a_limit_that_cuts_the_list_is_said(run: Run, folder: Path) -> None:
    (folder / "g.edges").write_text("\n".join(f"a{i} -> x\na{i} -> b{i} -> y" for i in range(4)) + "\nx -> y\n")
    done = run("sets", "g.edges", "-x", "x", "-y", "y", "--limit", "3", "--format", "json")
    told = json.loads(done.stdout)
    assert len(told["sets"]) == 3
    assert told["complete"] is False
    assert "Stopped at --limit 3" in done.stderr


def test_judge_says_what_is_wrong_with_a_set(run: Run) -> None:
    done = run("judge", "g.edges", *QUESTION, "age", "sick_leave", "--format", "json")
    assert done.returncode == 1
    told = json.loads(done.stdout)
    assert told["sufficient"] is False
    assert told["adjust"] == ["age", "sick_leave"]
    assert told["harmful"] == ["sick_leave"]
    assert told["redundant"] == []
    assert "night_work <- site -> diabetes" in [path["path"] for path in told["open_paths"]]


def test_judge_passes_a_sufficient_set(run: Run) -> None:
    done = run("judge", "g.edges", *QUESTION, "age", "site")
    assert done.returncode == 0
    assert "is sufficient" in done.stdout


def test_roles_gives_every_variable_a_role_and_advice(run: Run) -> None:
    told = json.loads(run("roles", "g.edges", *QUESTION, "--format", "json").stdout)
    by_name = {variable["name"]: variable for variable in told["variables"]}
    assert by_name["age"]["advice"] == "needed"
    assert "confounder" in by_name["age"]["roles"]
    assert by_name["sleep_debt"]["advice"] == "never"
    assert "sleep_debt" in by_name["sleep_debt"]["reason"]
    assert "collider" in by_name["sick_leave"]["roles"]


def test_trace_shows_each_path_and_its_state(run: Run) -> None:
    told = json.loads(run("trace", "g.edges", *QUESTION, "age", "--format", "json").stdout)
    state = {path["path"]: path["open"] for path in told["paths"]}
    assert state["night_work <- age -> diabetes"] is False
    assert state["night_work <- site -> diabetes"] is True
    assert state["night_work -> sick_leave <- diabetes"] is False
    assert told["complete"] is True


def test_trace_stops_at_its_limit_and_says_so(run: Run) -> None:
    done = run("trace", "g.edges", *QUESTION, "--limit", "2", "--format", "json")
    told = json.loads(done.stdout)
    assert len(told["paths"]) == 2
    assert told["complete"] is False
    assert "Stopped at --limit 2" in done.stderr


def test_draw_writes_a_picture_and_keeps_an_existing_one(run: Run, folder: Path) -> None:
    assert run("draw", "g.edges", *QUESTION, "age", "-o", "g.svg").returncode == 0
    assert (folder / "g.svg").read_text().startswith("<?xml")
    again = run("draw", "g.edges", "-o", "g.svg")
    assert again.returncode == 2
    assert "--force" in again.stderr
    assert "digraph" in run("draw", "g.edges").stdout


def test_what_is_written_is_told_to_programs_as_json(run: Run) -> None:
    done = run("convert", "g.edges", "g.dot", "--format", "json")
    assert (json.loads(done.stdout), done.stderr) == ({"written": ["g.dot"]}, "")
    done = run("draw", "g.edges", "-o", "g.png", "--format", "json")
    assert json.loads(done.stdout) == {"written": ["g.png"]}
    assert json.loads(run("draw", "g.edges", "--format", "json").stdout)["dot"].startswith("digraph")


def test_convert_goes_there_and_back(run: Run) -> None:
    assert run("convert", "g.edges", "g.graphml").returncode == 0
    assert run("convert", "g.graphml", "back.edges").returncode == 0
    first = json.loads(run("roles", "g.edges", *QUESTION, "--format", "json").stdout)
    second = json.loads(run("roles", "back.edges", *QUESTION, "--format", "json").stdout)
    assert {v["name"]: v["roles"] for v in first["variables"]} == {v["name"]: v["roles"] for v in second["variables"]}


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("sets", "g.edges", "-x", "nightwork", "-y", "diabetes"), "Did you mean “night_work”?"),
        (("sets", "g.edge", *QUESTION), "Did you mean “.edges”?"),
        (("sets", "h.edges", *QUESTION), "No such file"),
        (("sets", "g.edges"), "-x EXPOSURE -y OUTCOME"),
        (("sets", "g.edges", "-x", "age", "-y", "age"), "both “age”"),
        (("judge", "g.edges", *QUESTION, "agee"), "Did you mean “age”?"),
        (("judge", "g.edges", *QUESTION, "night_work"), "is the exposure"),
        (("sets", "g.edges", *QUESTION, "--wich", "one"), "--wich"),
        (("sets", "g.edges", *QUESTION, "--which", "best"), "best"),
        (("sets", "g.edges", *QUESTION, "--limit", "0"), "--limit"),
        (("setts", "g.edges"), "setts"),
        (("draw", "g.edges", "-o", "g.gif"), ".svg, .png or .dot"),
        (("convert", "g.edges", "g.txt"), "names no graph format"),
        (("sets", ".", *QUESTION), "ending"),
        (("sets", "missing.toml"), "No such file"),
    ],
)
def test_a_mistake_gets_one_clear_line_and_exit_code_2(run: Run, arguments: tuple[str, ...], words: str) -> None:
    done = run(*arguments)
    assert done.returncode == 2
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""


@pytest.mark.parametrize(
    "command", [(), ("sets",), ("judge",), ("roles",), ("trace",), ("draw",), ("convert",), ("fit",), ("write",)]
)
def test_every_command_has_help(run: Run, command: tuple[str, ...]) -> None:
    done = run(*command, "--help")
    assert done.returncode == 0
    assert len(done.stdout.splitlines()) > 8


def test_asking_a_graph_loads_no_library_that_fits_models(folder: Path) -> None:
    import subprocess

    code = (
        "import sys; sys.argv = ['adjustplan', 'sets', 'g.edges', '-x', 'night_work', '-y', 'diabetes']\n"
        "from adjustplan.cli import main\n"
        "try: main()\n"
        "except SystemExit: pass\n"
        "print(sorted({'pandas', 'statsmodels', 'ibis', 'duckdb', 'networkx', 'numpy'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=folder, capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


def test_colour_is_left_out_in_a_pipe(run: Run) -> None:
    assert "\x1b" not in run("roles", "g.edges", *QUESTION).stdout
