"""The example's data are what its script makes from its stated model."""

from __future__ import annotations

import runpy
from pathlib import Path

EXAMPLE = Path(__file__).resolve().parents[2] / "examples" / "night_work"


def test_the_script_makes_the_committed_data(tmp_path: Path) -> None:
    runpy.run_path(str(EXAMPLE / "make_data.py"))["write_csv"](tmp_path / "night_work.csv")
    assert (tmp_path / "night_work.csv").read_bytes() == (EXAMPLE / "night_work.csv").read_bytes()
