"""A study in a folder, and the program run in it as a user runs it: in a process of its own."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from program import Run

GRAPH = """\
age, site -> night_work
age       -> diabetes : incidence rises with age
site      -> diabetes
night_work -> sleep_debt -> diabetes
night_work, diabetes -> sick_leave
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "g.edges").write_text(GRAPH)
    return tmp_path


@pytest.fixture
def run(folder: Path) -> Run:
    """Run ``adjustplan`` with these arguments in ``folder``."""

    def run(*arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [sys.executable, "-m", "adjustplan", *arguments],
            cwd=folder,
            capture_output=True,
            text=True,
            encoding="utf-8",
            env=os.environ | environment,
            check=False,
        )

    return run
