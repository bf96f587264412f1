"""The plan file: its tables and keys, as models that reading, the JSON Schema and the documents share.

A plan is one TOML file. Its tables follow the order of the thinking: the question, the study, the adjustment, the
analysis. Only the title, the graph and the question must be there; a plan grows as decisions are made.
"""

from __future__ import annotations

import json
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, StringConstraints

from adjustplan.study import DesignName, Measure

Name = Annotated[str, StringConstraints(min_length=1)]
Form = Annotated[str, StringConstraints(pattern=r"^(category|linear|spline\([2-9]\))$")]
Level = str | bool | int | float


class Table(BaseModel):
    """A table of the plan: unknown keys are errors, and nothing changes after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class Contrast(Table):
    """The two exposure levels that are compared."""

    exposed: Level = Field(description="The level whose effect is asked for.")
    reference: Level = Field(description="The level it is compared with.")


class Question(Table):
    """What is asked."""

    exposure: Name = Field(description="A variable of the graph.")
    outcome: Name = Field(description="A variable of the graph.")
    effect: Literal["total", "direct"] = Field("total", description="Through all paths, or not through any mediator.")
    population: str = Field("", description="Whose effect it is.")
    contrast: Contrast | None = Field(None, description="The exposure levels compared.")


class Study(Table):
    """How the data come about."""

    design: DesignName = Field(description="The study design.")


class ChosenSet(Table):
    """Variables to adjust for, and why these."""

    members: list[Name] = Field(alias="set", description="Variables of the graph.")
    rationale: str = Field("", description="Why this set.")


class Adjustment(ChosenSet):
    """The planned set and its alternatives."""

    alternative: list[ChosenSet] = Field([], description="Other sets, each with its own rationale.")


class Analysis(Table):
    """The model to be fitted and the data it is fitted to."""

    measure: Measure = Field(description="The measure of effect that is estimated.")
    data: Name | None = Field(None, description="A CSV or Parquet file, relative to the plan.")
    columns: dict[str, Name] = Field({}, description="variable = column, where the two differ.")
    forms: dict[str, Form] = Field({}, description='variable = "category" | "linear" | "spline(4)".')
    variance: Literal["model", "robust"] | None = Field(
        None, description="Which standard error; by default robust for a risk ratio, of the model otherwise."
    )


class PlanFile(Table):
    """The whole file."""

    title: Name = Field(description="The study's title.")
    graph: Name = Field(description="The causal graph, relative to the plan.")
    question: Question
    study: Study | None = None
    adjustment: Adjustment | None = None
    analysis: Analysis | None = None


def json_schema() -> dict[str, Any]:
    """The JSON Schema of the plan file, for editors that complete and check TOML."""
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **PlanFile.model_json_schema(by_alias=True)}


if __name__ == "__main__":
    print(json.dumps(json_schema(), indent=2))
