"""The kernel for large graphs: a set of variables is an array of booleans, and sweeps run in compiled code.

Every sweep is one breadth-first search by scipy over a graph that is laid out once. A search cannot be told where to
stop, so the layout lets it be: each variable and each family owns a run of arcs and *two* consecutive rows of the
sparse matrix, and moving the border between the two rows gives the run to the first (open) or to the second, which no
arc points to (closed). Opening and closing is thus one vectorised write, and the arcs themselves never move.
"""

from __future__ import annotations

from collections.abc import Iterable
from itertools import chain
from typing import cast

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import breadth_first_order

from adjustplan.graph import CausalGraph

Places = NDArray[np.int32]
Members = NDArray[np.bool_]


class ArrayKernel:
    """The three sweeps on boolean arrays; see :class:`adjustplan.identify.kernel.Kernel`."""

    def __init__(self, graph: CausalGraph) -> None:
        self.size = len(graph)
        self.causes = _Runs.of(graph.causes)
        self.effects = _Runs.of(graph.effects)
        own = np.arange(self.size, dtype=np.int32)
        families = self.effects.with_first(own).shifted(self.size)
        members = self.causes.with_first(own)
        incidence = families.followed_by(members)
        self.first_rows = np.int32(2) * incidence.targets  # of the two rows that each target owns
        self.starts, self.ends = incidence.borders[:-1], incidence.borders[1:]
        self.weights = np.ones(len(incidence.targets) + self.size)

    def set_of(self, places: Iterable[int]) -> Members:
        variables = np.zeros(self.size, dtype=np.bool_)
        variables[list(places)] = True
        return variables

    def members(self, variables: Members) -> list[int]:
        return np.flatnonzero(variables).tolist()

    def is_empty(self, variables: Members) -> bool:
        return not variables.any()

    def holds(self, variables: Members, place: int) -> bool:
        return bool(variables[place])

    def ancestors(self, variables: Members) -> Members:
        return self._closure(variables, self.causes)

    def descendants(self, variables: Members) -> Members:
        return self._closure(variables, self.effects)

    def spread(self, families: Members, stops: Members, within: Members) -> Members:
        is_open = np.concatenate([~stops, within])
        borders = np.empty(4 * self.size + 2, dtype=np.int32)
        borders[0:-2:2] = self.starts
        borders[1:-2:2] = np.where(is_open, self.ends, self.starts)
        borders[-2] = self.ends[-1]
        entries = np.flatnonzero(families & within).astype(np.int32) + np.int32(self.size)
        visited = self._search(self.first_rows, borders, 2 * entries)
        visited = visited[(visited < 2 * self.size)] >> 1
        return self._marked(visited)

    def _closure(self, variables: Members, steps: _Runs) -> Members:
        borders = np.append(steps.borders, np.int32(0))
        visited = self._search(steps.targets, borders, np.flatnonzero(variables).astype(np.int32))
        return self._marked(visited[1:])

    def _search(self, targets: Places, borders: Places, entries: Places) -> Places:
        """Everything met from a source that is put in as the last row and points to ``entries``; the source first."""
        borders[-1] = borders[-2] + len(entries)
        count = len(borders) - 1
        arcs = np.concatenate([targets, entries])
        matrix = csr_array((self.weights[: len(arcs)], arcs, borders), shape=(count, count))
        order = breadth_first_order(matrix, count - 1, directed=True, return_predecessors=False)
        return cast("Places", order)

    def _marked(self, places: Places) -> Members:
        variables = np.zeros(self.size, dtype=np.bool_)
        variables[places] = True
        return variables


class _Runs:
    """For each row a run of targets: those from ``borders[row]`` up to ``borders[row + 1]``."""

    def __init__(self, targets: Places, borders: Places) -> None:
        self.targets = targets
        self.borders = borders

    @classmethod
    def of(cls, lists: list[list[int]]) -> _Runs:
        lengths = np.fromiter(map(len, lists), dtype=np.int32, count=len(lists))
        borders = np.zeros(len(lists) + 1, dtype=np.int32)
        borders[1:] = np.cumsum(lengths)
        return cls(np.fromiter(chain.from_iterable(lists), dtype=np.int32, count=int(borders[-1])), borders)

    def with_first(self, first: Places) -> _Runs:
        """The same runs, each with one more target at its start."""
        targets = np.insert(self.targets, self.borders[:-1], first)
        return _Runs(targets, self.borders + np.arange(len(self.borders)).astype(np.int32))

    def shifted(self, by: int) -> _Runs:
        """The same runs with every target moved on."""
        return _Runs(self.targets + np.int32(by), self.borders)

    def followed_by(self, other: _Runs) -> _Runs:
        """The rows of this, then those of the other."""
        borders = np.concatenate([self.borders[:-1], other.borders + self.borders[-1]])
        return _Runs(np.concatenate([self.targets, other.targets]), borders)
