"""Which plans are meant: from what a user names (plans, folders, patterns) to plan files.

A file that is named is meant, whatever it holds. In a folder, or behind a pattern, most TOML files are something else;
a plan is told by its ``[question]`` and its ``graph``. A file too broken to be read as TOML counts as a plan where a
line of it starts like one, for a plan that nobody can read must not vanish from a check.
"""

from __future__ import annotations

import glob
import os
import re
import tomllib
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path

from adjustplan.errors import Finding

_LOOKS_LIKE = re.compile(r"^\s*(\[\s*question\s*\]|graph\s*=)", re.MULTILINE)


@dataclass(frozen=True, slots=True)
class PlanFiles:
    """The plan files found, each once, and a finding for everything named in which there are none."""

    paths: tuple[Path, ...]
    missing: tuple[Finding, ...]


def find_plans(named: Iterable[str | Path]) -> PlanFiles:
    """The plans that are meant.

    Parameters
    ----------
    named : iterable of str or Path
        Plan files; folders, in which plans are sought at any depth but not in hidden folders or virtual environments;
        patterns with ``*``, ``?``, ``[…]`` or ``**``. A file that is not there is kept, for reading it says so best.
    """
    found: dict[Path, Path] = {}
    missing = []
    for name in map(str, named):
        paths = list(_meant(name))
        for path in paths:
            found.setdefault(Path(os.path.realpath(path)), path)
        if not paths:
            where = "below this folder" if Path(name).is_dir() else "by this pattern"
            remedy = "A plan is a .toml file with a graph and a [question]."
            missing.append(Finding("check-no-plans", f"No plan is found {where}.", remedy, file=name))
    return PlanFiles(tuple(found.values()), tuple(missing))


def is_plan(path: Path) -> bool:
    """Whether a TOML file is a plan, or was meant to be one."""
    try:
        text = path.read_bytes().decode("utf-8-sig", errors="replace")
    except OSError:
        return False
    try:
        values = tomllib.loads(text)
    except (ValueError, RecursionError):  # TOMLDecodeError is a ValueError; so is what a number of 5,000 digits raises
        return _LOOKS_LIKE.search(text) is not None
    question = values.get("question")
    return isinstance(question, dict) and ("graph" in values or not question.keys().isdisjoint(("exposure", "outcome")))


def _meant(name: str) -> Iterator[Path]:
    path = Path(name)
    if path.is_dir():
        yield from _plans_below(path)
    elif path.exists() or not glob.has_magic(name):
        yield path
    else:
        for match in map(Path, sorted(glob.glob(name, recursive=True))):  # noqa: PTH207 (Path.glob takes no absolute pattern)
            if match.is_dir():
                if "**" not in name:  # which goes into folders by itself
                    yield from _plans_below(match)
            elif match.suffix.lower() == ".toml" and is_plan(match):
                yield match


def _plans_below(folder: Path) -> Iterator[Path]:
    for place, folders, files in os.walk(folder):
        folders[:] = sorted(name for name in folders if not _passed_over(Path(place, name)))
        for name in sorted(files):
            path = Path(place, name)
            if path.suffix.lower() == ".toml" and is_plan(path):
                yield path


def _passed_over(folder: Path) -> bool:
    """Whether a folder is hidden or holds a virtual environment (PEP 405)."""
    return folder.name.startswith(".") or (folder / "pyvenv.cfg").exists()
