"""seal, amend and start, as a user meets them."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from program import Run

STUDY = ("--title", "Damp homes and asthma", "-x", "damp", "-y", "asthma", "--design", "cohort")
NEW = ("start", "new", *STUDY, "--covariate", "income", "--covariate", "district")


@pytest.fixture
def plan(run: Run, folder: Path) -> Path:
    """The plan of a study that was just started."""
    assert run(*NEW).returncode == 0
    return folder / "new" / "plan.toml"


def edit(path: Path, old: str, new: str) -> None:
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")


def test_the_life_of_a_plan_from_start_to_document(run: Run, plan: Path, folder: Path) -> None:
    assert run("check", "new/plan.toml").returncode == 0
    sealed = run("seal", "new/plan.toml", "--by", "Ines Roth", "--date", "2024-03-04")
    assert sealed.returncode == 0
    assert "Sealed on 2024-03-04, before the data were seen, by Ines Roth." in sealed.stdout
    assert "wrote new/plan.seal" in sealed.stderr
    edit(plan, '["income", "district"]', '["income"]')
    checked = run("check", "new/plan.toml")
    assert checked.returncode == 1
    assert "district removed from the set" in checked.stdout
    arguments = ("--reason", "Districts | were merged", "--data-seen", "--date", "2024-05-06", "--format", "json")
    told = json.loads(run("amend", "new/plan.toml", *arguments).stdout)
    assert [entry["kind"] for entry in told["entries"]] == ["seal", "amendment"]
    assert told["entries"][1]["changes"] == ["district removed from the set"]
    assert told["entries"][1]["before"] == told["entries"][0]["fingerprint"]
    assert run("write", "new/plan.toml", "-o", "doc").returncode == 0
    document = (folder / "doc" / "plan.md").read_text(encoding="utf-8")
    assert "| 1 | 2024-03-04 | before the data were seen | First sealed version | – | Ines Roth |" in document
    assert (
        "| 2 | 2024-05-06 | after the data had been seen | district removed from the set | Districts \\| were merged |"
        " not stated |"
    ) in document
    assert told["entries"][1]["fingerprint"] in document


def test_a_plan_with_an_error_is_not_sealed(run: Run, plan: Path) -> None:
    edit(plan, '["income", "district"]', '["income"]')
    done = run("seal", "new/plan.toml")
    assert done.returncode == 1
    assert "error: " in done.stderr
    assert "district" in done.stderr
    assert "was not sealed" in done.stderr
    assert done.stdout == ""
    assert not plan.with_suffix(".seal").exists()
    waiver = '[[waiver]]\nrule = "{}"\nreason = "Districts are alike."\n'
    edit(
        plan,
        "[adjustment]",
        waiver.format("adjustment-insufficient") + waiver.format("adjustment-needed") + "[adjustment]",
    )
    assert run("seal", "new/plan.toml").returncode == 0


def test_a_plan_is_sealed_once(run: Run, plan: Path) -> None:
    assert run("seal", "new/plan.toml").returncode == 0
    before = plan.with_suffix(".seal").read_bytes()
    again = run("seal", "new/plan.toml", "--data-seen")
    assert again.returncode == 2
    assert "sealed already" in again.stderr
    assert "amend" in again.stderr
    assert plan.with_suffix(".seal").read_bytes() == before


def test_text_and_json_of_a_seal_say_the_same(run: Run, plan: Path) -> None:
    told = json.loads(run("seal", "new/plan.toml", "--data-seen", "--format", "json").stdout)
    assert told["seal"] == "new/plan.seal"
    (entry,) = told["entries"]
    assert (entry["kind"], entry["data_seen"]) == ("seal", True)
    edit(plan, "Damp homes", "Damp flats")
    text = run("amend", "new/plan.toml", "--reason", "flats only", "--data-seen").stdout
    assert "the title changed from “Damp homes and asthma” to “Damp flats and asthma”" in text
    assert "Amendment 1" in text


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--reason", "why"), "--data-seen or --data-not-seen"),
        (("--data-seen",), "--reason"),
        (("--reason", "why", "--data-not-seen"), "Nothing has changed"),
        (("--reason", "why", "--data-not-seen", "--date", "yesterday"), "yesterday"),
        (("--reason", "why", "--data-not-seen", "--date", "2024-02-30"), "2024-02-30"),
    ],
)
def test_a_mistake_in_an_amendment_gets_one_clear_line_and_exit_code_2(
    run: Run, plan: Path, arguments: tuple[str, ...], words: str
) -> None:
    assert run("seal", "new/plan.toml").returncode == 0
    before = plan.with_suffix(".seal").read_bytes()
    done = run("amend", "new/plan.toml", *arguments)
    assert done.returncode == 2
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""
    assert plan.with_suffix(".seal").read_bytes() == before


def test_an_amendment_needs_a_seal_that_holds(run: Run, plan: Path) -> None:
    arguments = ("amend", "new/plan.toml", "--reason", "why", "--data-not-seen")
    unsealed = run(*arguments)
    assert unsealed.returncode == 2
    assert "not sealed yet" in unsealed.stderr
    assert run("seal", "new/plan.toml", "--by", "Ines").returncode == 0
    edit(plan.with_suffix(".seal"), "Ines", "Otto")
    edit(plan, "Damp homes", "Damp flats")
    tampered = run(*arguments)
    assert tampered.returncode == 2
    assert "was edited after it was written" in tampered.stderr
    assert "Traceback" not in tampered.stderr


def test_the_document_says_what_the_seal_file_does_not_show(run: Run, plan: Path, folder: Path) -> None:
    def document() -> str:
        assert run("write", "new/plan.toml", "-o", "doc", "--force").returncode == 0
        return (folder / "doc" / "plan.md").read_text(encoding="utf-8")

    assert "**not sealed**" in document()
    assert "Rules waived" not in document()
    edit(plan, "[adjustment]", '[[waiver]]\nrule = "study-losses"\nreason = "Nobody | moves."\n[adjustment]')
    assert run("seal", "new/plan.toml", "--by", "Ines").returncode == 0
    assert "## Rules waived" in document()
    assert "| `study-losses` | Nobody \\| moves. |" in document()
    edit(plan, "Damp homes", "Damp flats")
    assert "no amendment says why:**\n\n- the title changed from" in document()
    edit(plan.with_suffix(".seal"), "Ines", "Otto")
    assert "**The seal file does not hold**" in document()
    plan.with_suffix(".seal").write_bytes(b"\xff")
    assert "**The seal file does not hold**" in document()


def test_start_replaces_nothing(run: Run, plan: Path) -> None:
    before = plan.read_bytes()
    again = run(*NEW)
    assert again.returncode == 2
    assert "exists already" in again.stderr
    assert plan.read_bytes() == before
    assert "This is a file" in run("start", "g.edges", *STUDY).stderr


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((), "--title, --exposure, --outcome, --design"),
        (STUDY[:6], "--design"),
        ((*STUDY[:-1], "kohort"), "Did you mean “cohort”"),
        ((*STUDY, "--measure", "prevalence ratio"), "cannot estimate a prevalence ratio"),
        ((*STUDY, "--covariate", "damp"), "named twice"),
        ((*STUDY, "--covariate", ""), "covariate is empty"),
    ],
)
def test_start_without_a_terminal_says_what_is_missing_or_wrong(
    folder: Path, arguments: tuple[str, ...], words: str
) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "adjustplan", "start", "new", *arguments],
        cwd=folder,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=False,
    )
    assert done.returncode == 2
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert not (folder / "new").exists()


@pytest.mark.skipif(sys.platform == "win32", reason="needs a pseudo-terminal")
def test_start_asks_on_a_terminal_for_what_is_not_given(folder: Path) -> None:
    ours, theirs = os.openpty()
    command = [sys.executable, "-m", "adjustplan", "start", "new", "-x", "damp"]
    with subprocess.Popen(command, cwd=folder, stdin=theirs, stdout=theirs, stderr=theirs) as running:
        os.close(theirs)
        os.write(ours, b"Damp homes\nasthma\nkohort\ncohort\nincome\nair quality\n\n")
        said = b""
        try:
            while part := os.read(ours, 4096):
                said += part
        except OSError:  # the terminal's other end is closed
            pass
    os.close(ours)
    assert running.returncode == 0, said
    assert "Did you mean “cohort”".encode() in said
    text = (folder / "new" / "plan.toml").read_text(encoding="utf-8")
    assert 'exposure = "damp"' in text
    assert 'set       = ["income", "air quality"]' in text
    assert '"air quality" -> damp, asthma' in (folder / "new" / "graph.edges").read_text(encoding="utf-8")


@pytest.mark.skipif(sys.platform == "win32", reason="needs a pseudo-terminal")
def test_an_aborted_start_leaves_nothing(folder: Path) -> None:
    ours, theirs = os.openpty()
    command = [sys.executable, "-m", "adjustplan", "start", "new"]
    with subprocess.Popen(
        command, cwd=folder, stdin=theirs, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE
    ) as running:
        os.close(theirs)
        os.write(ours, b"Damp homes\n\x04")
        assert running.stderr is not None
        said = running.stderr.read()
    os.close(ours)
    assert running.returncode != 0
    assert b"Traceback" not in said
    assert not (folder / "new").exists()


@pytest.mark.parametrize("command", ["seal", "amend", "start"])
def test_the_new_commands_have_help(run: Run, command: str) -> None:
    done = run(command, "--help")
    assert done.returncode == 0
    assert f"adjustplan {command} " in done.stdout
    assert len(done.stdout.splitlines()) > 8


@pytest.mark.parametrize("command", [("check", "new/plan.toml"), ("seal", "new/plan.toml"), ("start", "other", *STUDY)])
def test_these_commands_load_no_library_that_fits_models(folder: Path, plan: Path, command: tuple[str, ...]) -> None:
    assert plan.exists()
    code = (
        "import sys; from adjustplan.cli import main\n"
        "try: main()\n"
        "except SystemExit as end: print(end.code)\n"
        "print(sorted({'pandas', 'statsmodels', 'ibis', 'duckdb'} & set(sys.modules)))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, *command], cwd=folder, capture_output=True, text=True, encoding="utf-8", check=True
    )
    assert done.stdout.splitlines()[-2:] == ["0", "[]"]
