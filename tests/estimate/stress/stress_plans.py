"""A plan with a ``[stress]`` for the tests, and an estimate to put under it."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

from adjustplan.estimate.stress import Observed, TwoByTwo, Yardstick
from adjustplan.plan import Plan, read_plan

GRAPH = """\
age, depot -> night_work -> sleep_debt -> diabetes
age, depot -> diabetes
chronotype -> night_work
chronotype -> diabetes
genes -> diabetes
night_work -> mood -> diabetes
chronotype, genes, mood: unmeasured
"""
PLAN = """\
title = "Night work and diabetes"
graph = "g.edges"
[question]
exposure = "night_work"
outcome = "diabetes"
[study]
design = "{design}"
{study}
[adjustment]
set = {members}
[analysis]
measure = "{measure}"
"""
TABLE = TwoByTwo(120.0, 880.0, 200.0, 2800.0)
OBSERVED = Observed(
    "risk ratio",
    1.62,
    1.30,
    2.02,
    0.1124,
    crude=1.8,
    table=TABLE,
    yardsticks={"age": Yardstick(without=1.75), "depot": Yardstick(without=1.66)},
)


def plan_with(
    folder: Path,
    stress: str = "",
    *,
    graph: str = GRAPH,
    members: tuple[str, ...] = ("age", "depot"),
    measure: str = "risk ratio",
    design: str = "cohort",
    study: str = "",
) -> Plan:
    """The plan, written into a folder and read, with these lines as its ``[stress]``."""
    (folder / "g.edges").write_text(graph, encoding="utf-8")
    text = PLAN.format(design=design, study=study, members=list(members), measure=measure)
    path = folder / "plan.toml"
    path.write_text(text + stress, encoding="utf-8")
    return read_plan(path)


def observed(**changes: Any) -> Observed:
    """The estimate, with changes."""
    return replace(OBSERVED, **changes)
