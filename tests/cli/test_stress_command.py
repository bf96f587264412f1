"""The command ``stress``: it prints what the fragile estimate says, and its exit code is that of the findings."""

from __future__ import annotations

import json
from pathlib import Path
from types import SimpleNamespace

import pytest
from typer.testing import CliRunner

import adjustplan.cli.stressing  # noqa: F401 (registers the command)
from adjustplan.cli.app import app
from adjustplan.estimate.stress import Observed, TwoByTwo, Yardstick, running
from adjustplan.plan import Plan

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
[analysis]
measure = "risk ratio"
data = "rows.csv"
"""
CHRONOTYPE = "chronotype -> night_work\nchronotype -> diabetes\nchronotype: unmeasured\n"


@pytest.fixture
def plan(folder: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A plan whose estimate is given, so that the command is tested and not the fit."""

    def given(_done: object) -> Observed:
        return Observed(
            "risk ratio",
            3.9,
            1.8,
            8.7,
            0.402,
            crude=4.4,
            table=TwoByTwo(60.0, 440.0, 50.0, 1450.0),
            yardsticks={"age": Yardstick(without=4.2), "site": Yardstick(without=3.9)},
        )

    def nothing_fitted(plan: Plan, limit: int, progress: object) -> SimpleNamespace:  # noqa: ARG001 — the real one's signature
        return SimpleNamespace(loaded=SimpleNamespace(plan=plan))

    monkeypatch.setattr(running, "analyse", nothing_fitted)
    monkeypatch.setattr(running, "observe", given)
    with (folder / "g.edges").open("a") as graph:
        graph.write(CHRONOTYPE)
    path = folder / "plan.toml"
    path.write_text(PLAN)
    return path


def run(*arguments: str) -> tuple[int, str]:
    done = CliRunner().invoke(app, ["stress", *arguments])
    if done.exception is not None and not isinstance(done.exception, SystemExit):
        raise done.exception
    return done.exit_code, done.stdout


def test_the_evalues_of_the_paper_are_printed_as_text_and_as_json(plan: Path) -> None:
    # VanderWeele and Ding 2017: a risk ratio of 3.9 (1.8 to 8.7) has the E-values 7.26 and 3.0
    code, text = run(str(plan))
    assert code == 0
    assert "at least 7.26 with both night_work and diabetes" in text
    assert "To move the lower limit of 1.8 there, 3 would be enough." in text
    assert "“chronotype” is unmeasured" in text
    code, told = run(str(plan), "--format", "json")
    assert code == 0
    values = json.loads(told)["confounding"]["evalue"]
    assert values["estimate"] == pytest.approx(7.26, abs=0.005)
    assert values["limit"] == pytest.approx(3.0)


def test_assumptions_of_the_plan_are_answered(plan: Path) -> None:
    stress = '[[stress.confounder]]\nname = "chronotype"\nwith_exposure = 2\nwith_outcome = 2\n'
    plan.write_text(PLAN + stress)
    code, text = run(str(plan))
    assert code == 0
    assert "it could leave 2.92 (1.35 to 6.52)" in text  # divided by 4/3


def test_a_finding_above_a_note_gives_exit_code_1(plan: Path) -> None:
    stress = '[[stress.misclassified_exposure]]\nname = "rota"\nsensitivity = 0.9\nspecificity = 0.2\n'
    plan.write_text(PLAN + stress)
    code, text = run(str(plan))
    assert code == 1
    assert "no draw of it could have made these data" in text


@pytest.mark.parametrize(
    ("stress", "words"),
    [
        ('[[stress.confounder]]\nname = "u"\nwith_exposure = 0.5\nwith_outcome = 2\n', "greater than or equal to 1"),
        ('[[stress.confounder]]\nname = "u"\nwith_exposur = 2\nwith_outcome = 2\n', "Did you mean “with_exposure”?"),
        ('[stress]\nyardsticks = ["sites"]\n', "Did you mean “site”?"),
        (
            '[[stress.misclassified_exposure]]\nname = "r"\nsensitivity = { low = 0.9, high = 0.8 }\nspecificity = 1\n',
            "must rise in the order low, high",
        ),
        (
            '[[stress.misclassified_exposure]]\nname = "r"\nsensitivity = { lo = 0.9, high = 0.95 }\nspecificity = 1\n',
            "Did you mean “low”?",
        ),
        ('[[stress.selection]]\nname = "reply"\n', "Give either factor or all four probabilities"),
    ],
)
def test_a_wrong_assumption_is_refused_in_a_sentence(plan: Path, stress: str, words: str) -> None:
    from adjustplan.errors import PlanError

    plan.write_text(PLAN + stress)
    with pytest.raises(PlanError) as caught:
        run(str(plan))
    assert any(words in str(finding) for finding in caught.value.findings)
    assert all(finding.line is not None for finding in caught.value.findings)
