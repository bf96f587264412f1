"""Who is at risk when somebody falls ill.

A *cell* is one moment in one stratum at which at least one person has the event. Each row is at risk in an
unbroken run of the cells of its stratum: those after its entry, up to and including its own time. (Somebody who
enters at the moment of an event is not yet at risk then.) All that a Cox model asks of the data are sums over the
people at risk in each cell, and, the other way round, sums over the cells in which a person was at risk.

Adding the people of each cell anew would take rows × cells steps. Adding those who come in and taking away those who
leave would be fast, but where the hazards of people differ much, little is left right of a sum after a large number
has been taken away from it. So cells are joined in *blocks* of 2, 4, 8, … of them, as in a tournament. Any run of cells
is made of a few blocks, at most two of each size; a row is added to these, and a cell's sum is that of the blocks it is
in. Nothing is ever subtracted, and all sums take rows × log(cells) steps.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows.result import Labels

Ties = Literal["efron", "breslow"]
Places = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class RiskSets:
    """Rows and the cells in which they are at risk.

    Attributes
    ----------
    first, last : array of int, shape (rows,)
        The cells at risk are first, …, last - 1; none where first = last.
    event : array of bool, shape (rows,)
        Whether the row has the event, which is then in its last cell.
    stratum : array of int, shape (rows,)
        Number of the stratum in ``labels``.
    labels : array, shape (strata,)
    times, cell_stratum : arrays, shape (cells,)
        Moment and stratum of each cell, in the order of strata and moments.
    blocks : sparse matrix of 0 and 1, shape (blocks, rows)
        The blocks that make up each row's run of cells; those of one cell first, then those of 2, 4, 8, ….
    failing : sparse matrix of 0 and 1, shape (cells, rows)
        The cell of the event.
    """

    first: Places
    last: Places
    event: NDArray[np.bool_]
    stratum: Places
    labels: Labels
    times: Floats
    cell_stratum: Places
    blocks: Any
    failing: Any

    def at_risk(self, values: Floats) -> Floats:
        """Sum of a value over the rows at risk in each cell."""
        sums = self.blocks @ values
        sizes = _level_sizes(len(self.times))
        ends = np.cumsum(sizes)
        total = sums[ends[-1] - 1 :]
        for size, end in zip(sizes[-2::-1], ends[-2::-1], strict=True):
            total = np.repeat(total, 2, axis=0) + sums[end - size : end]
        return np.asarray(total[: len(self.times)])

    def over_time(self, values: Floats) -> Floats:
        """Sum of a value over the cells in which each row is at risk."""
        sizes = _level_sizes(len(self.times))
        level = np.zeros((sizes[0], *values.shape[1:]))
        level[: len(values)] = values
        levels = [level]
        for _ in sizes[1:]:
            level = level[0::2] + level[1::2]
            levels.append(level)
        return np.asarray(self.blocks.T @ np.concatenate(levels))

    def lowest_over_time(self, values: Floats) -> Floats:
        """Lowest value over the cells in which each row is at risk; infinite where there are none."""
        levels = [values]
        while 2 ** len(levels) <= len(values):
            half = 2 ** (len(levels) - 1)
            levels.append(np.minimum(levels[-1][:-half], levels[-1][half:]))
        lowest = np.full(len(self.first), np.inf)
        length = self.last - self.first
        for level, low in enumerate(levels):
            here = np.flatnonzero((length >= 2**level) & (length < 2 ** (level + 1)))
            lowest[here] = np.minimum(low[self.first[here]], low[self.last[here] - 2**level])
        return lowest

    def comparable(self) -> Places:
        """A number for each row, the same for rows that are compared, directly or through others; -1 for none.

        Without late entry the rows of a stratum are compared if they live to see its first event. With late
        entry, follow-up may have gaps that nobody bridges.
        """
        bridges = np.zeros(len(self.times) + 1)
        long = np.flatnonzero(self.last - self.first > 1)
        np.add.at(bridges, self.first[long] + 1, 1.0)
        np.add.at(bridges, self.last[long], -1.0)
        part = np.cumsum(np.cumsum(bridges)[:-1] == 0)
        seen = self.first < self.last
        return np.where(seen, part[np.where(seen, self.first, 0)], -1)


def _level_sizes(cells: int) -> list[int]:
    """How many blocks of 1, 2, 4, … cells there are."""
    levels = max(cells - 1, 0).bit_length()
    return [2**level for level in range(levels, -1, -1)]


def _blocks_of(first: Places, last: Places, cells: int) -> tuple[Places, Places]:
    """The blocks that make up the runs first, …, last - 1: numbers of blocks, and the rows they belong to."""
    blocks, rows = [], []
    row, low, high, offset = np.arange(len(first)), first, last, 0
    for size in _level_sizes(cells):
        left, right = (low < high) & (low % 2 == 1), (low < high) & (high % 2 == 1)
        if size == 1:
            left, right = low < high, np.zeros(len(low), dtype=bool)
        blocks += [low[left] + offset, high[right] - 1 + offset]
        rows += [row[left], row[right]]
        low, high, offset = (low + left) // 2, (high - right) // 2, offset + size
        going = low < high
        row, low, high = row[going], low[going], high[going]
    return np.concatenate(blocks), np.concatenate(rows)


def risk_sets(
    time: Floats, event: NDArray[Any], entry: Floats | None = None, stratum: Labels | None = None
) -> RiskSets:
    """Find the cells and who is at risk in them.

    Parameters
    ----------
    time : array of float, shape (rows,)
        When follow-up ended.
    event : array of bool or 0/1, shape (rows,)
        Whether it ended with the event.
    entry : array of float, shape (rows,), optional
        When follow-up began; by default before the first event.
    stratum : array, shape (rows,), optional
        Each stratum has a baseline hazard of its own.

    Raises
    ------
    NotEstimableError
        If nobody has the event, or a row enters at or after its end.
    """
    from scipy.sparse import csr_matrix

    happened = np.asarray(event).astype(bool)
    if not happened.any():
        message = "Nobody in the complete rows has the event."
        raise NotEstimableError("estimate-one-outcome", message, "Choose a set that loses fewer rows.")
    if entry is not None and (entry >= time).any():
        wrong = int(np.sum(entry >= time))
        message = (
            f"{wrong} {'row has' if wrong == 1 else 'rows have'} an entry that is not before the end of follow-up."
        )
        raise NotEstimableError("estimate-entry-after-end", message, "Correct entry or end, or leave these rows out.")
    rows = len(time)
    labels, code = (
        np.unique(stratum, return_inverse=True) if stratum is not None else (np.zeros(1), np.zeros(rows, dtype=np.intp))
    )
    moments = np.unique(time[happened])
    base = code.astype(np.intp) * len(moments)
    cells = np.unique(base[happened] + np.searchsorted(moments, time[happened]))
    last = np.searchsorted(cells, base + np.searchsorted(moments, time, side="right"))
    begun = 0 if entry is None else np.searchsorted(moments, entry, side="right")
    first = np.searchsorted(cells, base + begun)
    block, row = _blocks_of(first, np.maximum(first, last), len(cells))
    blocks = csr_matrix((np.ones(len(row)), (block, row)), shape=(sum(_level_sizes(len(cells))), rows))
    ill = np.flatnonzero(happened)
    failing = csr_matrix((np.ones(len(ill)), (last[ill] - 1, ill)), shape=(len(cells), rows))
    return RiskSets(
        first,
        np.maximum(first, last),
        happened,
        code.astype(np.intp),
        labels,
        moments[cells % len(moments)],
        cells // len(moments),
        blocks,
        failing,
    )
