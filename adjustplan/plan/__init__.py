"""The plan file: schema and reading."""

from adjustplan.plan.reading import Plan, read_plan
from adjustplan.plan.schema import PlanFile, json_schema

__all__ = ["Plan", "PlanFile", "json_schema", "read_plan"]
