"""The plan file: its tables and keys, as models that reading, the JSON Schema and the documents share.

A plan is one TOML file. Its tables follow the order of the thinking: the question, the study, the adjustment, the
analysis. Only the title, the graph and the question must be there; a plan grows as decisions are made.
"""

from __future__ import annotations

import datetime
import json
from typing import Any, Literal

from pydantic import Field, PositiveInt

from adjustplan.plan.analysis_schema import Analysis
from adjustplan.plan.data_schema import Data
from adjustplan.plan.stress_schema import Stress
from adjustplan.plan.table import Name, Share, Table
from adjustplan.study import DesignName, Sampling

Level = str | bool | int | float
Moment = datetime.date | int


class Contrast(Table):
    """The two exposure levels that are compared."""

    exposed: Level = Field(description="The level whose effect is asked for.")
    reference: Level = Field(description="The level it is compared with.")


class Question(Table):
    """What is asked."""

    other_exposures: list[Name] = Field(
        [], description="Further exposures whose effects are to be read off the same model (each needs its own set)."
    )

    exposure: Name = Field(description="A variable of the graph.")
    outcome: Name = Field(description="A variable of the graph.")
    effect: Literal["total", "direct"] = Field("total", description="Through all paths, or not through any mediator.")
    population: str = Field("", description="Whose effect it is.")
    contrast: Contrast | None = Field(None, description="The exposure levels compared.")


class Study(Table):
    """How the data come about."""

    design: DesignName = Field(description="The study design.")
    timing: Literal["prospective", "retrospective"] | None = Field(
        None, description="Cohort: whether people are followed from now on, or from records of the past."
    )
    sampling: Sampling | None = Field(None, description="Case-control: how controls are drawn.")
    sampled: Name | None = Field(
        None, description="Case-control: the variable of the graph that stands for being sampled, where it is drawn."
    )
    matched: list[Name] = Field([], description="Case-control or cohort: variables that people are matched for.")
    matching: Literal["individual", "frequency"] | None = Field(None, description="How they are matched.")
    lost: Name | None = Field(
        None, description="Cohort or trial: the restricted variable of the graph that stands for still being followed."
    )
    adherence: bool = Field(False, description="Trial: whether the question is about adhering, not about assignment.")
    exposure_begins: Moment | None = Field(None, description="When the exposure can begin: a date or a wave.")
    exposure_known: Moment | None = Field(None, description="When it is settled who counts as exposed.")
    follow_up_begins: Moment | None = Field(None, description="When the outcome begins to count.")
    size: PositiveInt | None = Field(None, le=10**10, description="Planned number of people (case-control: of cases).")
    assumed_risk: Share | None = Field(None, description="Assumed risk of the outcome in the reference group.")
    exposed_share: Share | None = Field(None, description="Assumed share of the exposed (case-control: of controls).")
    controls_per_case: float | None = Field(None, gt=0, le=1000, description="Case-control: controls for each case.")


class ChosenSet(Table):
    """Variables to adjust for, and why these."""

    members: list[Name] = Field(alias="set", description="Variables of the graph.")
    rationale: str = Field("", description="Why this set.")


class Adjustment(ChosenSet):
    """The planned set and its alternatives."""

    alternative: list[ChosenSet] = Field([], description="Other sets, each with its own rationale.")


class Waiver(Table):
    """A rule of ``adjustplan check`` that the team knowingly does not follow."""

    rule: Name = Field(description="The rule's code.")
    reason: Name = Field(description="Why it is waived; the document prints it.")


class PlanFile(Table):
    """The whole file."""

    title: Name = Field(description="The study's title.")
    graph: Name = Field(description="The causal graph, relative to the plan.")
    question: Question
    study: Study | None = None
    adjustment: Adjustment | None = None
    data: Data | None = Field(None, description="What becomes of the rows before any model sees them.")
    analysis: Analysis | None = None
    stress: Stress | None = Field(None, description="How fragile the estimate is, under stated assumptions.")
    waiver: list[Waiver] = Field([], description="Rules that are waived, each with a reason.")


def json_schema() -> dict[str, Any]:
    """The JSON Schema of the plan file, for editors that complete and check TOML."""
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **PlanFile.model_json_schema(by_alias=True)}


if __name__ == "__main__":
    print(json.dumps(json_schema(), indent=2))
