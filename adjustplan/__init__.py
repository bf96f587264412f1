"""adjustplan: plan, defend, run and audit the covariate adjustment of an observational health study.

::

    import adjustplan as ap

    graph = ap.read_graph("night_work.edges")
    ap.sufficient_sets(graph, "night_work", "diabetes")
    ap.judge(graph, "night_work", "diabetes", {"age"}).sufficient
    plan = ap.read_plan("plan.toml")
    ap.fit(plan).adjusted[0].estimate

Names are loaded when they are first used, so that asking a graph does not wait for the libraries that fit models.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from adjustplan.errors import AdjustplanError as AdjustplanError
    from adjustplan.errors import AdjustplanWarning as AdjustplanWarning
    from adjustplan.errors import Finding as Finding
    from adjustplan.estimate import fit as fit
    from adjustplan.estimate import stress_plan as stress_plan
    from adjustplan.graph import Arrow as Arrow
    from adjustplan.graph import CausalGraph as CausalGraph
    from adjustplan.graph import Variable as Variable
    from adjustplan.graph import parse_edge_list as parse_edge_list
    from adjustplan.graph import read_graph as read_graph
    from adjustplan.graph import write_graph as write_graph
    from adjustplan.identify import cheapest_sufficient_set as cheapest_sufficient_set
    from adjustplan.identify import is_sufficient as is_sufficient
    from adjustplan.identify import iterate_sufficient_sets as iterate_sufficient_sets
    from adjustplan.identify import judge as judge
    from adjustplan.identify import most_precise_set as most_precise_set
    from adjustplan.identify import one_sufficient_set as one_sufficient_set
    from adjustplan.identify import roles as roles
    from adjustplan.identify import smallest_sufficient_set as smallest_sufficient_set
    from adjustplan.identify import sufficient_sets as sufficient_sets
    from adjustplan.identify import trace as trace
    from adjustplan.identify import why_no_set as why_no_set
    from adjustplan.plan import Plan as Plan
    from adjustplan.plan import read_plan as read_plan
    from adjustplan.report import write_document as write_document

_HOMES = {
    "adjustplan.errors": ("AdjustplanError", "AdjustplanWarning", "Finding"),
    "adjustplan.graph": ("Arrow", "CausalGraph", "Variable", "parse_edge_list", "read_graph", "write_graph"),
    "adjustplan.identify": (
        "cheapest_sufficient_set",
        "is_sufficient",
        "iterate_sufficient_sets",
        "judge",
        "most_precise_set",
        "one_sufficient_set",
        "roles",
        "smallest_sufficient_set",
        "sufficient_sets",
        "trace",
        "why_no_set",
    ),
    "adjustplan.plan": ("Plan", "read_plan"),
    "adjustplan.estimate": ("fit", "stress_plan"),
    "adjustplan.report": ("write_document",),
}
_HOME = {name: home for home, names in _HOMES.items() for name in names}

__version__ = "0.1.0"
__all__ = ["__version__", *_HOME]


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(import_module(_HOME[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
