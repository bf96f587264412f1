"""Checks: the rules a plan is held to, and running them."""

from adjustplan.check import (  # noqa: F401 (importing them registers their rules)
    adjustment_rules,
    course_rules,
    data_rules,
    feasibility_rules,
    graph_rules,
    model_rules,
    registration_rules,
    reporting_rules,
    study_rules,
)
from adjustplan.check.registry import RULES, Rule, rule_named
from adjustplan.check.running import CheckReport, PlanReport, Waived, check, check_plan

__all__ = ["RULES", "CheckReport", "PlanReport", "Rule", "Waived", "check", "check_plan", "rule_named"]
