"""What a regression would find in endless data, worked out exactly.

Let every arrow carry a coefficient and every variable be the sum of (coefficient times cause) over its
causes, plus noise of its own. Then everything a regression can say in endless data follows from the
covariances, and those follow from coefficients and noise by algebra:

* the *total effect* of exposure on outcome is the sum, over the directed paths between them, of the product
  of the coefficients along the path (Wright 1934, Annals of Mathematical Statistics 5:161-215); the *direct
  effect* is the coefficient of the arrow;
* the *adjusted coefficient* is that of the exposure when the outcome is regressed on it and the covariates.

A set is sufficient exactly when the two agree for *generic* coefficients, that is for all but a vanishing
share of them. With coefficients drawn at random from a million whole numbers an accident is next to
impossible, and in exact fractions "agree" means equal, not close. So graphs are judged here without
d-separation, paths or colliders.

The variance of the adjusted coefficient, times the number of rows, tends to var(outcome | exposure, set) /
var(exposure | set) (Henckel, Perković and Maathuis 2022, Journal of the Royal Statistical Society B
84:579-599), which says which sufficient set is most precise.
"""

from __future__ import annotations

import random
from collections.abc import Iterable, Sequence
from fractions import Fraction
from itertools import pairwise
from math import prod

from truth.brute_force import Question
from truth.walks import Name

Matrix = list[list[Fraction]]


class LinearModel:
    """A linear Gaussian model of a question's graph, with coefficients and noise drawn at random."""

    def __init__(self, question: Question, seed: int, largest: int = 10**6) -> None:
        draw = random.Random(seed)
        self.question = question
        arrows = question.arrows
        self.coefficient = {
            arrow: Fraction(draw.choice((-1, 1)) * draw.randint(1, largest), largest) for arrow in sorted(arrows.arrows)
        }
        self.noise = {name: Fraction(draw.randint(1, largest), largest) for name in sorted(arrows.variables)}
        loading = {name: self._loadings(name) for name in arrows.variables}
        self.covariance = {
            (a, b): sum((loading[a][s] * loading[b][s] * self.noise[s] for s in arrows.variables), Fraction(0))
            for a in arrows.variables
            for b in arrows.variables
        }

    def _loadings(self, name: Name) -> dict[Name, Fraction]:
        """How much of each variable's own noise arrives in ``name``."""
        return {source: self.effect_of(source, name) for source in self.question.arrows.variables}

    def effect_of(self, cause: Name, effect: Name) -> Fraction:
        """The total effect of one variable on another, path by path."""
        paths = self.question.arrows.directed_paths(cause, effect)
        steps = (pairwise(path) for path in paths)
        return sum(
            (prod((self.coefficient[step] for step in path), start=Fraction(1)) for path in steps),
            Fraction(0),
        )

    @property
    def effect(self) -> Fraction:
        """The effect that the question asks for."""
        exposure, outcome = self.question.exposure, self.question.outcome
        if self.question.effect == "direct":
            return self.coefficient.get((exposure, outcome), Fraction(0))
        return self.effect_of(exposure, outcome)

    def adjusted_coefficient(self, members: Iterable[Name]) -> Fraction:
        """The exposure's coefficient, adjusted for ``members`` and for what is restricted."""
        given = sorted(self.question.conditioned(members))
        exposure, outcome = self.question.exposure, self.question.outcome
        return self._partial(exposure, outcome, given) / self._partial(exposure, exposure, given)

    def asymptotic_variance(self, members: Iterable[Name]) -> Fraction:
        """The limit of (number of rows) times (variance of the adjusted coefficient)."""
        given = sorted(self.question.conditioned(members))
        exposure, outcome = self.question.exposure, self.question.outcome
        residual = self._partial(outcome, outcome, [exposure, *given])
        return residual / self._partial(exposure, exposure, given)

    def _partial(self, one: Name, other: Name, given: Sequence[Name]) -> Fraction:
        """The covariance of two variables once ``given`` has been regressed out of both."""
        if not given:
            return self.covariance[one, other]
        system = [[self.covariance[a, b] for b in given] + [self.covariance[a, other]] for a in given]
        weights = solve(system)
        explained = sum((self.covariance[one, a] * w for a, w in zip(given, weights, strict=True)), Fraction(0))
        return self.covariance[one, other] - explained


def solve(system: Matrix) -> list[Fraction]:
    """The solution of linear equations, each a row with its right-hand side last, by elimination."""
    rows = [row[:] for row in system]
    for pivot, row in enumerate(rows):
        scale = row[pivot]  # a covariance matrix of variables with noise is positive definite: never zero
        rows[pivot] = row = [value / scale for value in row]
        for place, other in enumerate(rows):
            if place != pivot and other[pivot]:
                rows[place] = [a - other[pivot] * b for a, b in zip(other, row, strict=True)]
    return [row[-1] for row in rows]
