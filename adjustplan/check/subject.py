"""What a rule looks at: the plan, and what its graph and design imply, worked out once for all rules."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

from adjustplan.errors import Finding
from adjustplan.graph import CausalGraph
from adjustplan.identify import Roles, Verdict, judge, roles
from adjustplan.plan import Plan
from adjustplan.plan.places import Key
from adjustplan.study import DESIGNS, Design


@dataclass(frozen=True)
class Subject:
    """A plan under check. Rules ask it, and make their findings with :meth:`finding`."""

    plan: Plan

    @property
    def exposure(self) -> str:
        """The exposure."""
        return self.plan.question.exposure

    @property
    def outcome(self) -> str:
        """The outcome."""
        return self.plan.question.outcome

    @property
    def design(self) -> Design | None:
        """The study's design, where the plan states one."""
        return DESIGNS[self.plan.study.design] if self.plan.study else None

    @property
    def members(self) -> tuple[str, ...]:
        """The planned set; empty where there is none yet."""
        return tuple(self.plan.file.adjustment.members) if self.plan.file.adjustment else ()

    @property
    def graph(self) -> CausalGraph:
        """The graph under the design: what sampling holds fixed is taken care of by the design's own rules."""
        return self.plan.judged_graph

    @cached_property
    def roles(self) -> Roles:
        """The roles of all variables."""
        return roles(self.graph, self.exposure, self.outcome, self.plan.question.effect)

    @cached_property
    def verdict(self) -> Verdict:
        """The verdict on the planned set."""
        return self.judge(self.members)

    def judge(self, members: Sequence[str]) -> Verdict:
        """The verdict on a set."""
        return judge(self.graph, self.exposure, self.outcome, members, self.plan.question.effect)

    def finding(self, message: str, remedy: str, *key: str | int, excerpt: str | None = None) -> Finding:
        """A finding at a key of the plan file; the rule that runs gives it its code and severity."""
        place: Key = key
        return Finding("", message, remedy, file=str(self.plan.path), line=self.plan.line(*place), excerpt=excerpt)

    def in_graph(self, message: str, remedy: str) -> Finding:
        """A finding in the graph's file."""
        return Finding("", message, remedy, file=str(self.plan.graph_path))
