"""The sufficient sets somebody asked to see: all minimal ones up to a limit, or one that is best in some way."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import islice
from typing import Any, Literal, get_args

from adjustplan.errors import Finding, QuestionError, did_you_mean
from adjustplan.graph import CausalGraph
from adjustplan.identify.best import cheapest_sufficient_set, most_precise_set, smallest_sufficient_set
from adjustplan.identify.query import Effect, query
from adjustplan.identify.reasons import why_no_set
from adjustplan.identify.sets import by_size_then_names, iterate_sufficient_sets, one_sufficient_set
from adjustplan.identify.showing import Tabular, set_text

Which = Literal["all", "one", "smallest", "cheapest", "precise"]
MOST_LISTED = 1_000


@dataclass(frozen=True)
class SetList(Tabular):
    """Sufficient sets of a question.

    Attributes
    ----------
    exposure, outcome, effect : str
    which : {"all", "one", "smallest", "cheapest", "precise"}
        What was asked for.
    sets : tuple of tuple of str
        The sets, each sorted; the list by size, then names.
    complete : bool
        Whether there are no others of the kind asked for.
    restricted : tuple of str
        What is conditioned on besides, whichever set is chosen.
    note : str
        Why there is no set, or why this one; empty where there is nothing to say.
    """

    exposure: str
    outcome: str
    effect: Effect
    which: Which
    sets: tuple[tuple[str, ...], ...]
    complete: bool
    restricted: tuple[str, ...] = ()
    note: str = ""

    def __str__(self) -> str:
        lines = [self.caption(), *(f"  {set_text(members)}" for members in self.sets)]
        if () in self.sets:
            lines.append("Nothing has to be adjusted for.")
        return "\n".join([*lines, self.note] if self.note else lines)

    def caption(self) -> str:
        question = f"the {self.effect} effect of {self.exposure} on {self.outcome}"
        if not self.sets:
            return f"No {'known ' * (self.which == 'precise')}sufficient set for {question}."
        if self.which == "all":
            count = "" if self.complete else "The first "
            return f"{count}{len(self.sets)} minimal sufficient set{'s' * (len(self.sets) != 1)} for {question}:"
        kind = {"one": "One minimal", "smallest": "A smallest", "cheapest": "A cheapest", "precise": "The most precise"}
        return f"{kind[self.which]} sufficient set for {question}:"

    def records(self) -> Iterator[dict[str, Any]]:
        for members in self.sets:
            yield {"size": len(members), "set": ", ".join(members)}

    def to_dict(self) -> dict[str, Any]:
        """The sets as JSON has them."""
        return {
            "exposure": self.exposure,
            "outcome": self.outcome,
            "effect": self.effect,
            "which": self.which,
            "sets": [list(members) for members in self.sets],
            "complete": self.complete,
            "restricted": list(self.restricted),
            "note": self.note,
        }


def list_sets(
    graph: CausalGraph,
    exposure: str,
    outcome: str,
    effect: Effect = "total",
    which: Which = "all",
    limit: int = MOST_LISTED,
) -> SetList:
    """The sufficient sets of a question, of one kind, at most ``limit`` of them.

    Raises
    ------
    QuestionError
        If a variable is not in the graph, or the question or the kind is unknown.
    """
    if which not in get_args(Which):
        remedy = did_you_mean(which, get_args(Which), f"Known are {', '.join(get_args(Which))}.")
        raise QuestionError(Finding("question-which", f"There is no kind of set “{which}”.", remedy))
    asked = query(graph, exposure, outcome, effect)
    restricted = tuple(sorted(asked.names(asked.restricted)))
    complete, note = True, ""
    found: list[frozenset[str] | None]
    if which == "all":
        found = list(islice(iterate_sufficient_sets(graph, exposure, outcome, effect), limit + 1))
        complete = len(found) <= limit
        found = found[:limit]
    elif which == "precise":
        precise = most_precise_set(graph, exposure, outcome, effect)
        found, note = [precise.members], precise.reason
    else:
        finder = {"one": one_sufficient_set, "smallest": smallest_sufficient_set, "cheapest": cheapest_sufficient_set}
        found = [finder[which](graph, exposure, outcome, effect)]
        complete = found == [None]
    sets = [tuple(sorted(members)) for members in found if members is not None]
    if not sets:
        note = why_no_set(graph, exposure, outcome, effect) or note
    return SetList(
        exposure, outcome, effect, which, tuple(sorted(sets, key=by_size_then_names)), complete, restricted, note
    )
