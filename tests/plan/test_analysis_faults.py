"""What does not go together in [analysis] is said from the plan alone, and what does is left in peace."""

from __future__ import annotations

from pathlib import Path

import pytest

from adjustplan.plan import read_plan
from adjustplan.plan.analysis_faults import MODELS, PREDICTING, analysis_faults, model_for
from adjustplan.study import MEASURES

PLAN = """\
title = "A study"
graph = "g.edges"
[question]
exposure = "x"
outcome = "y"
[adjustment]
set = ["a"]
[analysis]
data = "rows.csv"
"""


def faults(folder: Path, analysis: str) -> list[tuple[str, str]]:
    (folder / "g.edges").write_text("a -> x\na -> y\nb -> y\nx -> y\n")
    (folder / "plan.toml").write_text(PLAN + analysis)
    return [(fault.code, fault.message) for fault in analysis_faults(read_plan(folder / "plan.toml").file)]


@pytest.mark.parametrize(
    ("analysis", "code", "word"),
    [
        ('measure = "risk ratio"\nmodel = "cox"', "model-choice", "cox"),
        ('measure = "risk ratio"\nmodel = "logistic"', "model-choice", "logistic"),
        ('measure = "hazard ratio"\ntime = "t"\nway = "weighting"', "model-choice", "weighting"),
        ('measure = "mean ratio"\nother_ways = ["stratification"]', "model-choice", "stratification"),
        ('measure = "rate ratio"\nperson_time = "t"\nway = "doubly robust"', "model-choice", "doubly robust"),
        ('measure = "rate ratio"', "model-needs", "time at risk"),
        ('measure = "hazard ratio"', "model-needs", "follow-up ended"),
        ('measure = "odds ratio"\nmodel = "conditional logistic"', "model-needs", "matched sets"),
        ('measure = "risk ratio"\nmissing = "imputation"', "model-needs", "seed"),
        ('measure = "odds ratio"\nvariance = "model"\nweights = "w"', "model-choice", "weights"),
        ('measure = "odds ratio"\nvariance = "model"\ncluster = "c"', "model-choice", "clusters"),
        ('measure = "risk ratio"\nway = "weighting"\nvariance = "model"', "model-choice", "no variance of a model"),
        ('measure = "hazard ratio"\ntime = "t"\nweights = "w"', "model-choice", "not built for weights"),
        ('measure = "odds ratio"\nmodel = "penalised logistic"\ncluster = "c"', "model-choice", "clusters"),
        ('measure = "risk ratio"\nmodifier = "b"', "model-choice", "modifier"),
        ('measure = "risk ratio"\nforms = { a = "stratum" }', "model-choice", "stratum"),
        ('measure = "risk ratio"\ntime = "t"', "model-unused", "time"),
        ('measure = "risk ratio"\n[analysis.weighting]\ntruncate = 0.01', "model-unused", "weighting"),
        (
            'measure = "risk ratio"\nmissing = "inverse probability"\n[analysis.bootstrap]\nseed = 1',
            "model-choice",
            "Resampling",
        ),
    ],
)
def test_what_does_not_go_together_is_said(tmp_path, analysis, code, word):
    found = faults(tmp_path, analysis)
    assert [fault for fault, _ in found] == [code]
    assert word in found[0][1]


@pytest.mark.parametrize(
    "analysis",
    [
        'measure = "risk ratio"\nmodel = "log-binomial"\nvariance = "model"',
        'measure = "risk difference"\nway = "standardisation"\nmodel = "logistic"',
        'measure = "risk ratio"\nmodel = "logistic"\nother_ways = ["standardisation"]',
        'measure = "hazard ratio"\ntime = "t"\nentry = "e"\nforms = { a = "stratum" }',
        'measure = "odds ratio"\nmatched_set = "m"',
        'measure = "rate ratio"\nmodel = "negative binomial"\nperson_time = "t"\ncluster = "c"',
        'measure = "risk ratio"\nmodifier = "a"\nweights = "w"\ncluster = "c"',
        'measure = "risk ratio"\nmissing = "imputation"\n[analysis.imputation]\nseed = 1\nnormal = ["a"]',
    ],
)
def test_what_goes_together_is_left_in_peace(tmp_path, analysis):
    assert faults(tmp_path, analysis) == []


@pytest.mark.parametrize("measure", MEASURES)
def test_every_measure_has_a_usual_model(tmp_path, measure):
    time = (
        {"r": 'person_time = "t"\n', "h": 'time = "t"\n'}.get(measure[0], "") if measure[:4] in ("rate", "haza") else ""
    )
    assert faults(tmp_path, f'measure = "{measure}"\n{time}') == []
    analysis = read_plan(tmp_path / "plan.toml").analysis
    assert model_for(analysis, "regression") == MODELS[measure][0]
    if PREDICTING[measure]:
        assert model_for(analysis, "standardisation") == PREDICTING[measure][0]
