"""Set up adjustplan in ``.venv`` beside this file, then run the example study or the tests.

    python3 run.py example
    python3 run.py tests [pytest arguments]

Needs Python 3.11 or later with pip, and nothing else. The environment is made once and updated when pyproject.toml or
constraints.txt change.
"""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import venv
from pathlib import Path

HERE = Path(__file__).resolve().parent
ENVIRONMENT = HERE / ".venv"
PYTHON = ENVIRONMENT / ("Scripts/python.exe" if os.name == "nt" else "bin/python")
EXAMPLE = Path("examples") / "night_work"


def main() -> int:
    """Do what the first argument says."""
    if sys.version_info < (3, 11):  # noqa: UP036 (whoever starts this may have an older one)
        return _refuse(f"Python 3.11 or later is needed; this is {sys.version.split()[0]}.")
    match sys.argv[1:]:
        case ["example"]:
            return example()
        case ["tests", *arguments]:
            set_up("dev")
            return subprocess.call([PYTHON, "-m", "pytest", *arguments], cwd=HERE)
        case _:
            return _refuse("Say what to run: python3 run.py example, or python3 run.py tests.")


def example() -> int:
    """Run the main job on the example study and say where its document is."""
    set_up("dev")
    plan, folder = EXAMPLE / "plan.toml", EXAMPLE / "document"
    steps = [["sets"], ["judge"], ["fit"], ["write", "-o", str(folder), "--force"]]
    for command, *options in steps:
        arguments = [command, str(plan), *options]
        print(f"\n$ adjustplan {' '.join(arguments)}", flush=True)
        if code := subprocess.call([str(PYTHON), "-m", "adjustplan", *arguments], cwd=HERE):
            return code
    print(f"\nThe document is {folder / 'plan.md'}; the picture in it is {folder / 'plan-graph.svg'}.")
    return 0


def set_up(extra: str) -> None:
    """Make the environment with the pinned versions, unless it is up to date."""
    wanted = hashlib.sha256((HERE / "pyproject.toml").read_bytes() + (HERE / "constraints.txt").read_bytes())
    stamp = ENVIRONMENT / "set-up-for"
    if stamp.exists() and stamp.read_text() == wanted.hexdigest():
        return
    print("Setting up .venv (some minutes the first time) ...", flush=True)
    venv.create(ENVIRONMENT, with_pip=True)
    install = [str(PYTHON), "-m", "pip", "install", "--quiet", "--disable-pip-version-check"]
    subprocess.check_call([*install, "--constraint", "constraints.txt", "--editable", f".[{extra}]"], cwd=HERE)
    stamp.write_text(wanted.hexdigest())


def _refuse(why: str) -> int:
    print(why, file=sys.stderr)
    return 2


if __name__ == "__main__":
    sys.exit(main())
