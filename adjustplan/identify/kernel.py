"""Three sweeps over a graph, on which everything that a graph implies rests.

*Ancestors* and *descendants* follow the arrows. The third sweep, *spread*, says whether two variables are separated.
It rests on a theorem of Lauritzen, Dawid, Larsen and Leimer (1990, Networks 20:491): take the variables of interest and
their ancestors, call every variable together with its direct causes a *family*, and let influence pass from a
variable to every family it is in, and from a family to all its members, except through what is conditioned on. Two
variables are d-separated exactly when influence does not get from one to the other. Families take the place of the
marriages of the moral graph, whose number can be quadratic; with them a sweep takes time linear in the arrows
(Shachter 1998, UAI 14:480, has another linear one).

A kernel does the three sweeps on sets of one kind: a Python integer read as a row of bits for small graphs, a numpy
array of booleans for large ones. Both kinds understand ``&``, ``|`` and ``~``, so every algorithm above this file is
written once.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Literal, Protocol, TypeVar, cast

from adjustplan.graph import CausalGraph

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

S = TypeVar("S", "int", "NDArray[np.bool_]")
Engine = Literal["small", "large"]

LARGEST_SMALL = 1_000
"""Graphs of up to this many variables are handled with bit sets, where those are the faster kernel."""


class Kernel(Protocol[S]):
    """The sweeps, and the little that sets need beside ``&``, ``|`` and ``~``. Variables are known by place."""

    def set_of(self, places: Iterable[int]) -> S:
        """The set of these variables."""

    def members(self, variables: S) -> list[int]:
        """The variables of a set, ascending."""

    def is_empty(self, variables: S) -> bool:
        """Whether a set has no members."""

    def holds(self, variables: S, place: int) -> bool:
        """Whether a variable is in a set."""

    def ancestors(self, variables: S) -> S:
        """The variables and everything from which arrows lead to them."""

    def descendants(self, variables: S) -> S:
        """The variables and everything to which arrows lead from them."""

    def spread(self, families: S, stops: S, within: S) -> S:
        """All variables that influence gets to, the stops it gets to included.

        Parameters
        ----------
        families : set
            The families it starts in, each named by the variable whose family it is.
        stops : set
            Variables it gets to but does not pass.
        within : set
            Variables whose families it may use; with every variable, all its causes must be in it.
        """


def kernel_of(graph: CausalGraph, engine: Engine | None = None) -> Kernel[int]:
    """The kernel for a graph, made once and kept with it; ``engine`` overrides the choice by size.

    The return type names one of the two kinds of set; which it is makes no difference to its users.
    """
    chosen = engine or ("small" if len(graph) <= LARGEST_SMALL else "large")
    key = f"kernel.{chosen}"
    if key not in graph.derived:
        if chosen == "small":
            from adjustplan.identify.bitsets import BitKernel

            graph.derived[key] = BitKernel(graph)
        else:
            from adjustplan.identify.arrays import ArrayKernel

            graph.derived[key] = ArrayKernel(graph)
    return cast("Kernel[int]", graph.derived[key])
