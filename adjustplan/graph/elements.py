"""What a causal graph is made of: variables, and arrows from causes to their effects.

An arrow from A to B says: were A set to another value, with everything else that causes B held where it is, B could
change. Just as much is said by every arrow that is *not* drawn. A variable may be

* ``unmeasured``: it is part of the story but not of the data, so it can never be adjusted for;
* ``restricted``: how people came into the data holds it fixed (selection, restriction, loss to follow-up), so it is
  conditioned on whether one likes it or not.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Variable:
    """One variable of a causal graph.

    Attributes
    ----------
    name : str
        The word the graph, the plan and the commands know it by.
    label : str
        How documents and pictures call it; empty: by its name.
    unmeasured, restricted : bool
        See the head of this module; not both.
    wave : int, optional
        When it is measured; an arrow never points to an earlier wave.
    cost : float
        What measuring it costs, in any unit that is the same for all; finite, 0 or more.
    proxy_of : str
        The variable that it is an imperfect measurement of; empty where it is none.
    """

    name: str
    label: str = ""
    unmeasured: bool = False
    restricted: bool = False
    wave: int | None = None
    cost: float = 1.0
    proxy_of: str = ""

    @property
    def title(self) -> str:
        """The label, or the name where there is none."""
        return self.label or self.name


@dataclass(frozen=True, slots=True)
class Arrow:
    """A direct cause and its effect, with the reason the team gives for it (empty: none given)."""

    cause: str
    effect: str
    reason: str = ""

    def __str__(self) -> str:
        return f"{self.cause} -> {self.effect}"


def attributes(variable: Variable) -> dict[str, str | bool | int | float]:
    """What is said of a variable beyond its name, by attribute, defaults left out."""
    told: dict[str, str | bool | int | float] = {}
    if variable.label:
        told["label"] = variable.label
    if variable.unmeasured:
        told["unmeasured"] = True
    if variable.restricted:
        told["restricted"] = True
    if variable.wave is not None:
        told["wave"] = variable.wave
    if variable.cost != 1.0:
        told["cost"] = variable.cost
    if variable.proxy_of:
        told["proxy_of"] = variable.proxy_of
    return told
