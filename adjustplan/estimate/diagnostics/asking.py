"""Asking one diagnostic after the other, so that one that fails takes nothing else with it.

What fails is None, stands in the list of what is absent with its reason, and is a finding; what does not apply is
absent with its reason only.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import TypeVar

import numpy as np

from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.section import Absent
from adjustplan.estimate.not_estimable import NotEstimableError

Found = TypeVar("Found")


class AbsentError(Exception):
    """A diagnostic that does not apply; the message says why."""


@dataclass(eq=False)
class Desk:
    """Collects what is absent and what is said, and keeps a failure where it arises."""

    absent: list[Absent] = field(default_factory=list)
    said: list[tuple[Finding, ...]] = field(default_factory=list)

    def ask(
        self, name: str, question: Callable[[], Found], speaks: Callable[[Found], tuple[Finding, ...]]
    ) -> Found | None:
        """The answer to a question, or None with the reason."""
        try:
            with np.errstate(all="ignore"):
                found = question()
                self.said.append(speaks(found))
        except AbsentError as error:
            self.absent.append(Absent(name, str(error)))
            return None
        except NotEstimableError as error:
            finding = error.finding
            severity = "warning" if finding.severity == "error" else finding.severity
            self.said.append((replace(finding, message=f"{name}: {finding.message}", severity=severity),))
            self.absent.append(Absent(name, f"this reason: {finding.message}"))
            return None
        except np.linalg.LinAlgError:
            message = f"{name}: the arithmetic broke down, so it could not be computed."
            remedy = "Look for rare levels and extreme values."
            self.said.append((Finding("estimate-diagnostic", message, remedy, "warning"),))
            self.absent.append(Absent(name, "the arithmetic broke down."))
            return None
        return found
