"""The Wald test: are several coefficients, or combinations of them, all zero?"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.results import chi_square_text

_RANK_TOLERANCE = 1e-10


@dataclass(frozen=True, slots=True)
class WaldTest:
    """Chi-square of a joint test, its degrees of freedom, and the probability of a larger one by chance."""

    statistic: float
    degrees: int
    p: float

    @property
    def text(self) -> str:
        """``χ² = 5.2, 3 degrees of freedom, p = 0.16``."""
        return f"{chi_square_text(self.statistic, self.degrees)}, p = {self.p:.2g}"


def wald_test(values: Floats, covariance: Floats) -> WaldTest:
    """Test that all ``values`` are zero: v' V⁻¹ v against chi-square (Wald 1943, Trans Am Math Soc 54:426).

    Parameters
    ----------
    values : array of float, shape (k,)
    covariance : array of float, shape (k, k)

    Raises
    ------
    NotEstimableError
        If the covariance is not that of k separate numbers (singular, negative, or not finite).
    """
    from scipy.special import chdtrc

    lengths = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    usable = bool(np.isfinite(values).all() and np.isfinite(covariance).all() and (lengths > 0).all())
    if usable:
        sizes, directions = np.linalg.eigh(covariance / np.outer(lengths, lengths))
        usable = bool(sizes[0] > _RANK_TOLERANCE * sizes[-1])
    if not usable:
        message = f"The {len(values)} numbers of a joint test have no usable covariance, so it has no result."
        remedy = "Look for rare levels, or for terms that determine each other."
        raise NotEstimableError("estimate-joint-test", message, remedy, "warning")
    statistic = float(np.sum((directions.T @ (values / lengths)) ** 2 / sizes))
    return WaldTest(statistic, len(values), float(chdtrc(len(values), statistic)))
