"""Advice on every variable: adjust for it or not, and why, in one sentence that names a path.

Roles say where a variable stands; advice says what adjusting for it does to the sufficient sets. The first line that
applies is given:

* *needed*: in every minimal sufficient set;
* *useful*: in some of them;
* *never*: in no sufficient set at all;
* *risky*: added to some minimal sufficient set it makes it insufficient, to others perhaps not;
* *costly*: breaks no set, but costs precision and amplifies what confounding is left (Myers et al. 2011, Am J Epidemiol
  174:1213);
* *optional*: breaks no set, and may gain precision (causes of the outcome) or does nothing.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Literal

from adjustplan.graph import CausalGraph
from adjustplan.identify.paths import directed_path
from adjustplan.identify.query import Effect, query
from adjustplan.identify.reasons import why_forbidden
from adjustplan.identify.roles import Standing, path_left_open, roles_of
from adjustplan.identify.sets import one_minimal_set
from adjustplan.identify.showing import Tabular, set_text
from adjustplan.identify.tracing import open_paths

Advice = Literal["needed", "useful", "never", "risky", "costly", "optional"]


@dataclass(frozen=True, slots=True)
class VariableRole:
    """The roles of one variable and the advice on it.

    ``evidence`` holds, for each of ``roles`` in order, a path that shows it. ``advice`` is None for the exposure, the
    outcome and what is restricted, on which there is nothing to decide.
    """

    name: str
    title: str
    roles: tuple[str, ...]
    evidence: tuple[str, ...]
    advice: Advice | None
    reason: str
    unmeasured: bool = False
    restricted: bool = False

    @property
    def role_words(self) -> tuple[str, ...]:
        """The roles, and unmeasured or restricted where it is that."""
        flags = [word for word, said in (("unmeasured", self.unmeasured), ("restricted", self.restricted)) if said]
        return (*self.roles, *flags)


@dataclass(frozen=True)
class Roles(Tabular):
    """The roles of all variables of a graph towards an exposure and an outcome.

    ``complete`` is False where there were too many minimal sets to look at them all; then a variable that is called no
    confounder, or not risky, may still be one.
    """

    exposure: str
    outcome: str
    effect: Effect
    variables: tuple[VariableRole, ...]
    complete: bool

    def __getitem__(self, name: str) -> VariableRole:
        return next(variable for variable in self.variables if variable.name == name)

    def __str__(self) -> str:
        lines = [f"{v.name}: {', '.join(v.role_words)}. {v.advice or ''} {v.reason}".rstrip() for v in self.variables]
        return "\n".join([self.caption(), *lines])

    def caption(self) -> str:
        return f"Roles for the {self.effect} effect of {self.exposure} on {self.outcome}."

    def records(self) -> Iterator[dict[str, Any]]:
        for variable in self.variables:
            yield {
                "variable": variable.name,
                "roles": ", ".join(variable.role_words),
                "advice": variable.advice,
                "reason": variable.reason,
            }

    def to_dict(self) -> dict[str, Any]:
        """The roles as JSON has them."""
        return {
            "exposure": self.exposure,
            "outcome": self.outcome,
            "effect": self.effect,
            "complete": self.complete,
            "variables": [
                {
                    "name": v.name,
                    "label": v.title,
                    "roles": list(v.roles),
                    "evidence": dict(zip(v.roles, v.evidence, strict=True)),
                    "advice": v.advice,
                    "reason": v.reason,
                    "unmeasured": v.unmeasured,
                    "restricted": v.restricted,
                }
                for v in self.variables
            ],
        }


def roles(graph: CausalGraph, exposure: str, outcome: str, effect: Effect = "total") -> Roles:
    """The roles of every variable, with evidence, and advice with a reason, in the order of the graph.

    Raises
    ------
    QuestionError
        If a variable is not in the graph, or the question cannot be asked.
    """
    asked = query(graph, exposure, outcome, effect)
    standing = Standing(asked)
    found = []
    for place, variable in enumerate(graph.variables):
        shown = roles_of(standing, place)
        advice, reason = _advice(standing, place, shown)
        found.append(
            VariableRole(
                variable.name, variable.title, tuple(shown), tuple(shown.values()), advice, reason,
                variable.unmeasured, variable.restricted,
            )
        )  # fmt: skip
    return Roles(exposure, outcome, effect, tuple(found), standing.complete)


def _advice(standing: Standing, place: int, shown: dict[str, str]) -> tuple[Advice | None, str]:
    asked = standing.asked
    kernel, variable = asked.kernel, asked.graph.variables[place]
    one = kernel.set_of((place,))
    if kernel.holds(asked.ends, place):
        return None, "It is what the question is about."
    if variable.restricted:
        if kernel.holds(asked.forbidden, place):
            return None, f"It is restricted, whatever is adjusted for. {why_forbidden(asked, variable.name)}"
        return None, "It is held fixed by how people came into the data."
    if not standing.sets:
        if kernel.holds(asked.forbidden | asked.unmeasured, place):
            return "never", why_forbidden(asked, variable.name)
        return "never", "No set is sufficient, with it or without it."
    if place in standing.set_with:
        if one_minimal_set(asked, without=one) is None:
            path = path_left_open(asked, asked.candidates & asked.ancestry, place)
            return "needed", f"Without it nothing measured blocks {path}."
        members = standing.set_with[place]
        path = path_left_open(asked, members, place)
        return "useful", f"In {set_text(asked.names(members))} it blocks {path}; other sets do without it."
    if kernel.holds(asked.forbidden | asked.unmeasured, place):
        return "never", why_forbidden(asked, variable.name)
    return _advice_on_outsider(standing, place, shown)


def _advice_on_outsider(standing: Standing, place: int, shown: dict[str, str]) -> tuple[Advice, str]:
    """The advice on a candidate that is in no minimal set."""
    asked, graph = standing.asked, standing.graph
    one = asked.kernel.set_of((place,))
    ancestry = asked.kernel.ancestors(asked.ends | asked.restricted | one)
    with_all = (asked.candidates & ancestry) | one
    if not asked.blocks(with_all):
        return "never", f"Held fixed with anything else, it leaves {next(open_paths(asked, with_all))} open."
    if not asked.kernel.holds(asked.ancestry, place):
        for members in standing.sets:
            if not asked.blocks(members | one):
                path = next(open_paths(asked, members | one))
                return "risky", f"Added to {set_text(asked.names(members))} it opens {path}."
    exposure, outcome = (graph.variables[end].name for end in (asked.exposure, asked.outcome))
    if "instrument" in shown:
        relation = f"related to {exposure} ({shown['instrument']}) and through it alone to {outcome}"
        return "costly", f"It is {relation}; adjusting costs precision."
    causes_exposure = asked.kernel.holds(standing.causes_of_exposure, place)
    if causes_exposure and not asked.kernel.holds(standing.causes_of_outcome_beside, place):
        cause = f"a cause of {exposure} ({directed_path(graph, place, asked.exposure)}) but not of {outcome} beside it"
        return "costly", f"It is {cause}; adjusting costs precision."
    if "outcome predictor" in shown:
        return (
            "optional",
            f"It explains part of {outcome} ({shown['outcome predictor']}); adjusting may gain precision.",
        )
    if "affected by exposure" in shown:
        return (
            "optional",
            f"It is affected by {exposure} alone ({shown['affected by exposure']}); adjusting gains nothing.",
        )
    return "optional", "Adjusting for it opens and blocks nothing that matters."
