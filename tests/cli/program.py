"""The type of the fixture ``run``: it runs the program with arguments, in the test's folder."""

from __future__ import annotations

import subprocess
from collections.abc import Callable

Run = Callable[..., subprocess.CompletedProcess[str]]
