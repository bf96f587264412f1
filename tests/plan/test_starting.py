"""Starting a study: its files read back as what was told, whatever the names, and pass the checks."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjustplan.check import check_plan
from adjustplan.errors import Finding, OutputError, PlanError
from adjustplan.plan import read_plan, starting
from adjustplan.plan.starting import NewStudy, start
from adjustplan.study import DESIGNS

STUDY = NewStudy("Damp homes and asthma", "damp", "asthma", "cohort", "", ("income", "district"))
LEFT_OPEN = {"case-control": {"study-sampling"}, "cross-sectional": {"study-reverse-causation"}}
"""What a study of this design is warned of until the team decides it; nothing can be put there that is not made up."""


@pytest.mark.parametrize("design", DESIGNS)
@pytest.mark.parametrize("covariates", [(), ("income",), ("income", "district")])
def test_a_new_study_passes_its_checks(tmp_path: Path, design: str, covariates: tuple[str, ...]) -> None:
    start(tmp_path / "new", NewStudy("Damp homes and asthma", "damp", "asthma", design, "", covariates))
    report = check_plan(tmp_path / "new" / "plan.toml")
    assert report.read
    above_a_note = {finding.code for finding in report.findings if finding.severity != "note"}
    assert above_a_note == LEFT_OPEN.get(design, set())
    plan = read_plan(tmp_path / "new" / "plan.toml")
    assert plan.study is not None
    assert plan.study.design == design
    assert plan.adjustment.members == list(covariates)


def test_a_measure_that_was_given_is_planned_and_asks_for_forms(tmp_path: Path) -> None:
    start(tmp_path, NewStudy("Damp homes and asthma", "damp", "asthma", "cohort", "risk ratio", ("income",)))
    plan = read_plan(tmp_path / "plan.toml")
    assert plan.analysis.measure == "risk ratio"
    report = check_plan(tmp_path / "plan.toml")
    assert {finding.code for finding in report.findings if finding.severity != "note"} == {"model-form"}


def test_commented_lines_of_the_plan_are_right_once_they_are_freed(tmp_path: Path) -> None:
    _, path = start(tmp_path, STUDY)
    text = path.read_text(encoding="utf-8")
    for line in ("[analysis]", 'measure = "mean difference"', 'data    = "data.csv"', "[analysis.forms]"):
        assert f"# {line}" in text
        text = text.replace(f"# {line}", line)
    path.write_text(text.replace('# "income" = "…"', '"income" = "linear"'), encoding="utf-8")
    plan = read_plan(path)
    assert plan.analysis.data == "data.csv"
    assert plan.analysis.forms == {"income": "linear"}


WORDS = st.text(st.characters(codec="utf-8"), min_size=1, max_size=12) | st.sampled_from(
    ['"', "\\", "a -> b", "a\nb", "a\r\nb", "# no", '"""', "'", "a, b: c", "\x00", "a\x85b", "\u202eabc", "[x]", "é"]
)
NAMES = WORDS.filter(lambda words: bool(words.strip()))


@settings(max_examples=150, deadline=None)
@given(
    title=NAMES,
    names=st.lists(NAMES, min_size=2, max_size=4, unique=True),
    design=st.sampled_from(sorted(DESIGNS)),
)
def test_any_name_comes_back_as_it_was_given(
    tmp_path_factory: pytest.TempPathFactory, title: str, names: list[str], design: str
) -> None:
    folder = tmp_path_factory.mktemp("started")
    exposure, outcome, *covariates = names
    _, path = start(folder, NewStudy(title, exposure, outcome, design, "", tuple(covariates)))
    plan = read_plan(path)
    assert plan.title == " ".join(title.split())
    assert (plan.question.exposure, plan.question.outcome) == (exposure, outcome)
    assert plan.adjustment.members == covariates
    ends = {(arrow.cause, arrow.effect) for arrow in plan.graph.arrows}
    into_exposure = set() if design == "trial" else {(name, exposure) for name in covariates}
    assert ends == {(exposure, outcome)} | {(name, outcome) for name in covariates} | into_exposure
    found = {finding.code for finding in check_plan(path).findings if finding.severity == "error"}
    assert found == set()


@pytest.mark.parametrize(
    ("study", "words"),
    [
        (NewStudy("t", "damp", "damp", "cohort"), "named twice"),
        (NewStudy("t", "damp", "asthma", "cohort", "", ("a", "a")), "“a” is named twice"),
        (NewStudy(" ", "damp", "asthma", "cohort"), "The title is empty"),
        (NewStudy("t", "damp", "asthma", "cohort", "", ("",)), "The covariate is empty"),
        (NewStudy("t", "damp", "asthma", "kohort"), "Did you mean “cohort”"),
        (NewStudy("t", "damp", "asthma", "cohort", "risk ration"), "Did you mean “risk ratio”"),
        (NewStudy("t", "damp", "asthma", "case-control", "risk ratio"), "cannot estimate a risk ratio"),
        (NewStudy("t", "damp", "asthma", "case-series", "risk ratio"), "nothing to compare with"),
        (NewStudy("t", "d\udce9mp", "asthma", "cohort"), "not UTF-8"),
    ],
)
def test_what_does_not_fit_together_is_refused_and_nothing_written(tmp_path: Path, study: NewStudy, words: str) -> None:
    with pytest.raises(PlanError, match=words):
        start(tmp_path / "new", study)
    assert not (tmp_path / "new").exists()


@pytest.mark.parametrize("name", ["plan.toml", "graph.edges"])
def test_an_existing_file_is_kept_and_the_other_not_written(tmp_path: Path, name: str) -> None:
    (tmp_path / name).write_text("mine")
    with pytest.raises(OutputError, match="exists already"):
        start(tmp_path, STUDY)
    assert [path.read_text() for path in tmp_path.iterdir()] == ["mine"]


def test_a_plan_that_cannot_be_written_leaves_no_graph_behind(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write = starting.write_whole

    def no_room_for_plans(path: Path, content: str) -> None:
        if path.name == "plan.toml":
            raise OutputError(Finding("output-unwritable", "No space left."))
        write(path, content)

    monkeypatch.setattr(starting, "write_whole", no_room_for_plans)
    with pytest.raises(OutputError, match="No space left"):
        start(tmp_path / "new", STUDY)
    assert list((tmp_path / "new").iterdir()) == []
