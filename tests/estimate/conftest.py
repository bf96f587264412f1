"""A small study on disk: graph, plan and data, written where a test wants them."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from adjustplan.plan import Plan, read_plan

PlanFactory = Callable[..., Plan]

EDGES = """age, site, bmi -> night_work
age, site, bmi -> diabetes
night_work -> diabetes
"""


@pytest.fixture
def write_plan(tmp_path: Path) -> PlanFactory:
    """Write graph, plan and data into a folder and read the plan.

    ``analysis`` holds further lines of [analysis], ``tables`` further tables.
    """

    def write(
        rows: pd.DataFrame | None = None,
        *,
        measure: str = "odds ratio",
        members: tuple[str, ...] = ("age", "site"),
        edges: str = EDGES,
        forms: dict[str, str] | None = None,
        columns: dict[str, str] | None = None,
        variance: str | None = None,
        contrast: str | None = None,
        design: str = "cohort",
        effect: str = "total",
        alternatives: tuple[tuple[str, ...], ...] = (),
        data: str = "rows.csv",
        analysis: str = "",
        tables: str = "",
    ) -> Plan:
        tmp_path.joinpath("study.edges").write_text(edges, encoding="utf-8")
        lines = ['title = "A study"', 'graph = "study.edges"', "[question]", 'exposure = "night_work"']
        lines += ['outcome = "diabetes"', f'effect = "{effect}"']
        lines += [f"contrast = {contrast}"] if contrast else []
        lines += ["[study]", f'design = "{design}"', "[adjustment]", f"set = {list(members)}"]
        for alternative in alternatives:
            lines += ["[[adjustment.alternative]]", f"set = {list(alternative)}", 'rationale = "Why not."']
        lines += ["[analysis]", f'measure = "{measure}"', f'data = "{data}"']
        lines += [f'variance = "{variance}"'] if variance else []
        lines += [analysis]
        lines += ["[analysis.columns]", *(f'{name} = "{column}"' for name, column in (columns or {}).items())]
        lines += ["[analysis.forms]", *(f'{name} = "{form}"' for name, form in (forms or {}).items())]
        lines += [tables]
        path = tmp_path / "plan.toml"
        path.write_text("\n".join(lines), encoding="utf-8")
        if rows is not None:
            target = tmp_path / data
            if target.suffix == ".parquet":
                rows.to_parquet(target, index=False)
            else:
                rows.to_csv(target, index=False)
        return read_plan(path)

    return write
