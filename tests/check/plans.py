"""Plans for the tests of the rules: one of every kind that passes, and how to change it."""

from __future__ import annotations

from pathlib import Path

from adjustplan.check import PlanReport, check_plan

GRAPH = """\
age, site -> quiet_room : older staff asked for it first
age       -> cough      : lungs age
site      -> cough      : dust differs
quiet_room -> mood -> cough : less strain
quiet_room, cough -> visits : both bring people to the nurse
draw      -> quiet_room : the first rooms were drawn by lot
family    -> cough      : shared genes
mood, family -> stays   : who stays in post
stays     -> leaves     : sign of leaving
hidden    -> family     : unknown
hidden: unmeasured
age, site, family, draw: wave=0
quiet_room: wave=1
mood: wave=2
cough: wave=3
visits: wave=4
"""

PLAN = """\
title = "Quiet rooms and cough on wards"
graph = "g.edges"

[question]
exposure = "quiet_room"
outcome = "cough"
population = "Ward staff in 2020"
contrast = { exposed = "yes", reference = "no" }

[study]
design = "cohort"
lost = "followed"
exposure_begins = 2020-01-01
exposure_known = 2020-01-01
follow_up_begins = 2020-01-01

[adjustment]
set = ["age", "site"]
rationale = "Known from the personnel file."

[[adjustment.alternative]]
set = ["age", "site", "family"]
rationale = "Family explains part of the outcome."

[analysis]
measure = "risk ratio"
outcome_type = "binary"
data = "rows.csv"

[analysis.forms]
age = "spline(4)"
site = "category"
"""
GRAPH += "site -> followed : some wards keep better records\nfollowed: restricted\n"

DESIGNS = {
    "cohort": {},
    "case-control": {
        'design = "cohort"\nlost = "followed"\nexposure_begins = 2020-01-01\n': (
            'design = "case-control"\nsampling = "cumulative"\nmatched = ["age"]\nmatching = "frequency"\n'
        ),
        '"risk ratio"': '"odds ratio"',
    },
    "cross-sectional": {
        'design = "cohort"\nlost = "followed"\nexposure_begins = 2020-01-01\n': 'design = "cross-sectional"\n',
        '"risk ratio"': '"prevalence ratio"',
    },
    "trial": {
        'design = "cohort"': 'design = "trial"',
        'set = ["age", "site"]': 'set = ["age"]',
    },
    "ecological": {
        'design = "cohort"\nlost = "followed"\nexposure_begins = 2020-01-01\n': 'design = "ecological"\n',
        "Ward staff in 2020": "Wards in 2020",
        "Known from the personnel file.": "Known for each ward.",
    },
    "case-series": {
        'design = "cohort"\nlost = "followed"\nexposure_begins = 2020-01-01\n': 'design = "case-series"\n',
    },
}
TRIAL_GRAPH = GRAPH.replace("age, site -> quiet_room : older staff asked for it first\n", "").replace(
    "draw      -> quiet_room : the first rooms were drawn by lot\n",
    "draw -> site : the first rooms were drawn by lot\n",
)


def changed(text: str, changes: dict[str, str]) -> str:
    """The text with each of these pieces, which must be in it, replaced."""
    for old, new in changes.items():
        assert old in text, old
        text = text.replace(old, new, 1)
    return text


def checked(
    folder: Path, design: str = "cohort", plan: dict[str, str] | None = None, graph: dict[str, str] | None = None
) -> PlanReport:
    """What the rules find in the plan of a design, with these changes to plan and graph."""
    base = TRIAL_GRAPH if design == "trial" else GRAPH
    (folder / "g.edges").write_text(changed(base, graph or {}), encoding="utf-8")
    (folder / "plan.toml").write_text(changed(changed(PLAN, DESIGNS[design]), plan or {}), encoding="utf-8")
    return check_plan(folder / "plan.toml")


def codes(report: PlanReport, *severities: str) -> list[str]:
    """The codes of a report's findings, of these severities or of all."""
    return [finding.code for finding in report.findings if not severities or finding.severity in severities]
