"""What a causal graph implies: sufficient sets, verdicts, roles and paths."""

from adjustplan.identify.advice import Roles, VariableRole, roles
from adjustplan.identify.best import (
    PreciseSet,
    cheapest_sufficient_set,
    most_precise_set,
    smallest_sufficient_set,
)
from adjustplan.identify.choice import SetList, list_sets
from adjustplan.identify.judging import Verdict, judge
from adjustplan.identify.paths import Path
from adjustplan.identify.query import Effect
from adjustplan.identify.reasons import why_no_set
from adjustplan.identify.sets import (
    is_sufficient,
    iterate_sufficient_sets,
    one_sufficient_set,
    sufficient_sets,
)
from adjustplan.identify.tracing import TracedPath, trace

__all__ = [
    "Effect",
    "Path",
    "PreciseSet",
    "Roles",
    "SetList",
    "TracedPath",
    "VariableRole",
    "Verdict",
    "cheapest_sufficient_set",
    "is_sufficient",
    "iterate_sufficient_sets",
    "judge",
    "list_sets",
    "most_precise_set",
    "one_sufficient_set",
    "roles",
    "smallest_sufficient_set",
    "sufficient_sets",
    "trace",
    "why_no_set",
]
