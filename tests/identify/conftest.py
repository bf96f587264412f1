"""Makes ``tests/truth`` importable as ``truth``, from wherever the tests are run."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))
