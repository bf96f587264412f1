"""The plan file: schema and reading, seal and amendments."""

from adjustplan.plan.reading import Plan, read_plan
from adjustplan.plan.schema import PlanFile, json_schema
from adjustplan.plan.seal_file import read_history
from adjustplan.plan.sealing import amend, seal

__all__ = ["Plan", "PlanFile", "amend", "json_schema", "read_history", "read_plan", "seal"]
