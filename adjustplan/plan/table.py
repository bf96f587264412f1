"""What all tables of the plan file share."""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field, StringConstraints

Name = Annotated[str, StringConstraints(min_length=1)]
Share = Annotated[float, Field(gt=0, lt=1)]


class Table(BaseModel):
    """A table of the plan: unknown keys are errors, and nothing changes after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)
