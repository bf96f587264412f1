"""The two-by-two table of exposure and outcome, and what misclassification and selection did to it.

If those with the outcome are n, of whom a are recorded as exposed, and the exposure is recorded with sensitivity Se and
specificity Sp among them, then a = Se A + (1 − Sp)(n − A), so A = (a − (1 − Sp) n) / (Se + Sp − 1) are truly exposed.
The same goes for those without the outcome, and, with the roles changed, for the outcome among the exposed and in the
reference group (Lash, Fox and Fink 2009, Applying Quantitative Bias Analysis to Epidemiologic Data, chapter 6). If
people came into the data with four different probabilities, each cell divided by its own is the table before selection
(same, chapter 4). A cell that comes out negative says that the table could not have arisen so.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.study import Measure

Number = float | Floats
TABLE_RATIOS: frozenset[Measure] = frozenset({"risk ratio", "prevalence ratio", "odds ratio"})
TABLE_DIFFERENCES: frozenset[Measure] = frozenset({"risk difference", "prevalence difference"})
TABLE_MEASURES = TABLE_RATIOS | TABLE_DIFFERENCES


@dataclass(frozen=True, slots=True)
class TwoByTwo:
    """People by exposure and outcome; numbers, or arrays of one shape with a table for each place.

    Attributes
    ----------
    exposed_with, exposed_without, reference_with, reference_without
        With and without the outcome.
    """

    exposed_with: Number
    exposed_without: Number
    reference_with: Number
    reference_without: Number

    @property
    def cells(self) -> tuple[Number, Number, Number, Number]:
        """The four, in the order of the attributes."""
        return self.exposed_with, self.exposed_without, self.reference_with, self.reference_without

    def measured(self, measure: Measure) -> Number:
        """An odds ratio, or a ratio or difference of risks (or prevalences), from the table; nan where undefined."""
        a, b, c, d = (np.asarray(cell, dtype=np.float64) for cell in self.cells)
        with np.errstate(divide="ignore", invalid="ignore"):
            if measure == "odds ratio":
                return np.asarray(a * d / (b * c))
            exposed, reference = a / (a + b), c / (c + d)
            return np.asarray(exposed / reference if measure in TABLE_RATIOS else exposed - reference)

    def possible(self, measure: Measure) -> Floats:
        """Which tables have no cell below 0, and for a ratio none that makes it 0 or infinite."""
        value = np.asarray(self.measured(measure))
        good = np.isfinite(value)
        for cell in self.cells:
            good = good & (np.asarray(cell) >= 0)
        return np.asarray(good & (value > 0) if measure in TABLE_RATIOS else good)


def before_exposure_errors(
    table: TwoByTwo,
    sensitivity: tuple[Number, Number],
    specificity: tuple[Number, Number],
) -> TwoByTwo:
    """The table with the true exposure; each pair is of those with, and of those without, the outcome."""
    a, b, c, d = table.cells
    with_outcome = _truly(a, a + c, sensitivity[0], specificity[0])
    without_outcome = _truly(b, b + d, sensitivity[1], specificity[1])
    return TwoByTwo(with_outcome, without_outcome, a + c - with_outcome, b + d - without_outcome)


def before_outcome_errors(
    table: TwoByTwo,
    sensitivity: tuple[Number, Number],
    specificity: tuple[Number, Number],
) -> TwoByTwo:
    """The table with the true outcome; each pair is of the exposed, and of the reference group."""
    a, b, c, d = table.cells
    exposed = _truly(a, a + b, sensitivity[0], specificity[0])
    reference = _truly(c, c + d, sensitivity[1], specificity[1])
    return TwoByTwo(exposed, a + b - exposed, reference, c + d - reference)


def before_selection(table: TwoByTwo, probabilities: tuple[Number, Number, Number, Number]) -> TwoByTwo:
    """The table before people were selected, with a probability for each cell in the order of the cells."""
    with np.errstate(divide="ignore", invalid="ignore"):
        cells = [np.asarray(cell) / np.asarray(p) for cell, p in zip(table.cells, probabilities, strict=True)]
    return TwoByTwo(*cells)


def _truly(recorded: Number, everybody: Number, sensitivity: Number, specificity: Number) -> Floats:
    """How many truly have it; nan where the record is no better than chance, which nothing can be read off."""
    better = np.asarray(sensitivity + specificity - 1, dtype=np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        truly = (recorded - (1 - specificity) * everybody) / better
    return np.asarray(np.where(better > 0, truly, np.nan))
