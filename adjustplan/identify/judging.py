"""Judge: hold one proposed set against the graph, and say what it leaves open, what does harm, what is not needed."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from itertools import islice
from typing import Any

from adjustplan.graph import CausalGraph
from adjustplan.identify.query import Effect, Query, query
from adjustplan.identify.reasons import why_forbidden
from adjustplan.identify.showing import Tabular, set_text
from adjustplan.identify.tracing import PathReader, TracedPath, open_paths

MOST_OPEN_PATHS = 20


@dataclass(frozen=True)
class Verdict(Tabular):
    """What a graph says of a proposed set.

    Attributes
    ----------
    exposure, outcome, effect : str
    sufficient : bool
        Whether adjusting for the set identifies the effect, if the graph is right.
    adjust : tuple of str
        The set, sorted.
    restricted : tuple of str
        What is conditioned on besides.
    open_paths : tuple of TracedPath
        Paths that should be blocked and are open, the shortest first.
    complete : bool
        Whether ``open_paths`` holds them all.
    harmful : tuple of str
        Members that change the effect itself, cannot be measured, or open a path of ``open_paths``.
    redundant : tuple of str
        Members of a sufficient set without any one of which it is sufficient still.
    distorting : tuple of str
        Restricted variables that distort the effect whatever is adjusted for.
    reasons : mapping of str to str
        For every harmful, redundant or distorting variable, why, in one sentence.
    """

    exposure: str
    outcome: str
    effect: Effect
    sufficient: bool
    adjust: tuple[str, ...]
    restricted: tuple[str, ...]
    open_paths: tuple[TracedPath, ...]
    complete: bool
    harmful: tuple[str, ...]
    redundant: tuple[str, ...]
    distorting: tuple[str, ...]
    reasons: Mapping[str, str]

    def __bool__(self) -> bool:
        return self.sufficient

    def __str__(self) -> str:
        lines = [self.caption()]
        lines += [f"  {name}: {reason}" for name, reason in self.reasons.items()]
        lines += [f"  open: {path.text}  {path.reason}" for path in self.open_paths]
        if not self.complete:
            lines.append(f"  … and more open paths than the {len(self.open_paths)} shown.")
        return "\n".join(lines)

    def caption(self) -> str:
        word = "sufficient" if self.sufficient else "not sufficient"
        question = f"the {self.effect} effect of {self.exposure} on {self.outcome}"
        return f"{set_text(self.adjust)} is {word} for {question}."

    def records(self) -> Iterator[dict[str, Any]]:
        for name in (*self.adjust, *self.distorting):
            verdict = (
                "distorting" if name in self.distorting
                else "harmful" if name in self.harmful
                else "redundant" if name in self.redundant
                else ""
            )  # fmt: skip
            yield {"variable": name, "verdict": verdict, "reason": self.reasons.get(name, "")}

    def to_dict(self) -> dict[str, Any]:
        """The verdict as JSON has it."""
        return {
            "exposure": self.exposure,
            "outcome": self.outcome,
            "effect": self.effect,
            "sufficient": self.sufficient,
            "adjust": list(self.adjust),
            "restricted": list(self.restricted),
            "open_paths": [
                {"path": p.text, "variables": list(p.variables), "opened_by": list(p.opened_by), "reason": p.reason}
                for p in self.open_paths
            ],
            "complete": self.complete,
            "harmful": list(self.harmful),
            "redundant": list(self.redundant),
            "distorting": list(self.distorting),
            "reasons": dict(self.reasons),
        }


def judge(
    graph: CausalGraph,
    exposure: str,
    outcome: str,
    members: Iterable[str],
    effect: Effect = "total",
    *,
    most_open_paths: int = MOST_OPEN_PATHS,
) -> Verdict:
    """Hold a proposed set against the graph.

    Parameters
    ----------
    graph : CausalGraph
    exposure, outcome : str
    members : iterable of str
        The proposed set.
    effect : {"total", "direct"}
    most_open_paths : int
        How many open paths to list at most.

    Raises
    ------
    QuestionError
        If a variable is not in the graph, or the set holds the exposure or the outcome.
    """
    proposed = frozenset(members)
    asked = query(graph, exposure, outcome, effect)
    chosen = asked.set_of(proposed)
    sufficient = asked.is_sufficient(chosen)
    found = [] if sufficient else list(islice(open_paths(asked, chosen), most_open_paths + 1))
    reader = PathReader(graph, set(asked.kernel.members(chosen | asked.restricted)), effect)
    shown = tuple(map(reader.read, found[:most_open_paths]))
    distorting = sorted(asked.names(asked.distorting))
    harmful = _harmful(asked, chosen, shown, reader)
    redundant = _redundant(asked, chosen) if sufficient else {}
    reasons = {name: why_forbidden(asked, name) for name in distorting}
    return Verdict(
        exposure,
        outcome,
        effect,
        sufficient,
        tuple(sorted(proposed)),
        tuple(sorted(asked.names(asked.restricted))),
        shown,
        len(found) <= most_open_paths,
        tuple(harmful),
        tuple(redundant),
        tuple(distorting),
        reasons | harmful | redundant,
    )


def _harmful(asked: Query[int], chosen: int, open_paths: tuple[TracedPath, ...], reader: PathReader) -> dict[str, str]:
    """Members that are forbidden or unmeasured, or that open a collider which nothing restricted opens anyway."""
    found = {name: why_forbidden(asked, name) for name in asked.names(chosen & (asked.forbidden | asked.unmeasured))}
    for path in open_paths:
        for openers in reader.openers(path.path).values():
            if not any(asked.graph[name].restricted for name in openers):
                for name in openers:
                    found.setdefault(name, f"Adjusting for it opens {path.text}.")
    return dict(sorted(found.items()))


def _redundant(asked: Query[int], chosen: int) -> dict[str, str]:
    kernel, variables = asked.kernel, asked.graph.variables
    members = kernel.members(chosen)
    free = [place for place in members if asked.is_sufficient(chosen & ~kernel.set_of((place,)))]
    return dict.fromkeys(sorted(variables[place].name for place in free), "The set is sufficient without it.")
