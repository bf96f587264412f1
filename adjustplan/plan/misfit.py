"""Something in a plan that does not go together with the rest of it or with its graph."""

from __future__ import annotations

from dataclasses import dataclass

from adjustplan.plan.places import Key


@dataclass(frozen=True, slots=True)
class Misfit:
    """What is wrong, how to mend it, and the key of the plan where it stands."""

    code: str
    message: str
    remedy: str
    key: Key
