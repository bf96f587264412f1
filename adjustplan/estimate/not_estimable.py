"""What is raised inside this floor where a model has no estimate."""

from __future__ import annotations

from adjustplan.errors import Finding, Severity


class NotEstimableError(Exception):
    """A model that cannot be estimated; ``finding`` says why. It never leaves this floor."""

    def __init__(self, code: str, message: str, remedy: str, severity: Severity = "error") -> None:
        super().__init__(message)
        self.finding = Finding(code, message, remedy, severity)
