"""Sharing out the people of a cell, and predictive mean matching.

All people of a cell have the same chances, so how many of them get each value is one multinomial draw, however
many they are.

*Predictive mean matching* (Little 1988, J Bus Econ Stat 6:287) gives a person without a value the value of a
donor: one of the five people whose predicted mean is nearest to theirs, drawn at random. Imputed values are then
values that occur: no negative ages, no half children. The donors' means are predicted with the estimated
coefficients and the recipients' with the drawn ones ("type 1" matching; van Buuren 2018, Flexible Imputation of
Missing Data, section 3.4).

On cells the five nearest are five *people*: a cell with many people can supply all five. Donors with the same
predicted mean are equally near; where not all of them are wanted, which ones is chance, separately for each
recipient. So each of the five places is shared by the tied donors in proportion to how many people they are.

Where donors are rare, at the ends of a variable's range, the nearest can be far and all on one side; values are then
drawn towards the middle. So the distance between recipients and their donors is told.
"""

from __future__ import annotations

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.missing.coding import Whole

DONORS = 5
_EQUAL = 1e-9

Shares = tuple[Whole, Whole, Whole]
"""Row, level, and how many people of the row get the level; rows and levels may repeat."""


def share_alike(counts: Whole, people: Floats, random: np.random.Generator) -> Shares:
    """Draw levels for the people of each row from one common distribution.

    Parameters
    ----------
    counts : array of int, shape (rows,)
        People to be given a level.
    people : array of float, shape (levels,)
        Weight of each level.
    random : numpy.random.Generator
    """
    rows = np.arange(len(counts))
    large = counts > len(people)
    shared = random.multinomial(counts[large], people / people.sum())
    row, level = np.nonzero(shared)
    single = np.repeat(rows[~large], counts[~large])
    ends = np.cumsum(people)
    drawn = np.searchsorted(ends, random.random(len(single)) * ends[-1], side="right")
    return (
        np.concatenate([rows[large][row], single]),
        np.concatenate([level, np.minimum(drawn, len(people) - 1)]),
        np.concatenate([shared[row, level], np.ones(len(single), dtype=np.int64)]),
    )


def share_by(counts: Whole, probabilities: Floats, random: np.random.Generator) -> Shares:
    """Draw levels for the people of each row, each row with probabilities of its own, shape (rows, levels)."""
    shared = random.multinomial(counts, probabilities)
    row, level = np.nonzero(shared)
    return row, level, shared[row, level]


def share_matched(
    counts: Whole, wanted: Floats, levels: Whole, donors: Floats, predicted: Floats, random: np.random.Generator
) -> tuple[Shares, Floats]:
    """Give the people of each row levels of donors whose predicted means are nearest.

    Parameters
    ----------
    counts : array of int, shape (rows,)
        Recipients in each row.
    wanted : array of float, shape (rows,)
        Their predicted mean, with drawn coefficients.
    levels : array of int, shape (donor rows,)
        The level that the donors of a row have.
    donors, predicted : array of float, shape (donor rows,)
        How many they are, and their predicted mean with estimated coefficients.
    random : numpy.random.Generator

    Returns
    -------
    shares : tuple of arrays
    gaps : array of float, shape (rows,)
        How far the predicted mean of a row is from the mean of its donors' ones.
    """
    order = np.lexsort((levels, predicted))
    levels, donors, predicted = levels[order], donors[order], predicted[order]
    nearly = _EQUAL * max(float(np.abs(predicted).max()), float(np.ptp(predicted)), 1e-300)
    starts = np.flatnonzero(np.concatenate([[True], np.diff(predicted) > nearly]))
    means, sizes = predicted[starts], np.add.reduceat(donors, starts)
    (row, tie, share), gaps = _share_ties(counts, wanted, means, sizes, random)
    # within a tie: one level decides; few people are drawn singly, many by one multinomial draw
    ends = np.append(starts[1:], len(levels))
    width = ends[tie] - starts[tie]
    alone = width == 1
    few = ~alone & (share <= width)
    found = [(row[alone], levels[starts[tie[alone]]], share[alone])]
    single = np.repeat(np.flatnonzero(few), share[few])
    before = np.cumsum(donors)
    place = (before[starts] - donors[starts])[tie[single]] + random.random(len(single)) * sizes[tie[single]]
    donor = np.clip(np.searchsorted(before, place, side="right"), starts[tie[single]], ends[tie[single]] - 1)
    found.append((row[single], levels[donor], np.ones(len(single), dtype=np.int64)))
    many = np.flatnonzero(~alone & ~few)
    many = many[np.argsort(tie[many], kind="stable")]
    for group in np.split(many, np.flatnonzero(np.diff(tie[many])) + 1) if len(many) else []:
        inside = slice(starts[tie[group[0]]], ends[tie[group[0]]])
        shared = random.multinomial(share[group], donors[inside] / donors[inside].sum())
        which, level = np.nonzero(shared)
        found.append((row[group[which]], levels[inside][level], shared[which, level]))
    rows_found, levels_found, shares_found = zip(*found, strict=True)
    shares = np.concatenate(rows_found), np.concatenate(levels_found), np.concatenate(shares_found)
    return shares, gaps


def _share_ties(
    counts: Whole, wanted: Floats, means: Floats, sizes: Floats, random: np.random.Generator
) -> tuple[Shares, Floats]:
    """How many people of each row take their donor from each tie, a tie being donors with one predicted mean."""
    near = np.searchsorted(means, wanted)[:, None] + np.arange(-DONORS, DONORS)
    inside = (near >= 0) & (near < len(means))
    near = np.clip(near, 0, len(means) - 1)
    distance = np.where(inside, np.abs(means[near] - wanted[:, None]), np.inf)
    nearest = np.argsort(distance, axis=1, kind="stable")
    near = np.take_along_axis(near, nearest, axis=1)
    available = np.where(np.take_along_axis(inside, nearest, axis=1), sizes[near], 0.0)
    before = np.cumsum(available, axis=1) - available
    places = np.clip(DONORS - before, 0.0, available)
    chances = places / places.sum(axis=1, keepdims=True)
    gaps = np.abs((chances * means[near]).sum(axis=1) - wanted)
    row, column, share = share_by(counts, chances, random)
    return (row, near[row, column], share), gaps
