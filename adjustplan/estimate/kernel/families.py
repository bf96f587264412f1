"""How the mean outcome depends on the linear predictor, and how outcomes vary around it.

A *family* is a link and a variance (McCullagh and Nelder 1989, Generalized Linear Models). The estimating equations
need three functions of the linear predictor η only: the mean μ(η), its slope μ'(η), and the variance V(μ) that decides
how much weight each observation gets. A mean that is modelled rightly is estimated rightly whatever V is (Gourieroux,
Monfort and Trognon 1984, Econometrica 52:681), which is why a Poisson family serves for a risk (Zou 2004).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from scipy.special import expit, xlog1py, xlogy

from adjustplan.data import Floats

Function = Callable[[Floats], Floats]


@dataclass(frozen=True, slots=True)
class Family:
    """A link and a variance.

    Attributes
    ----------
    name : str
    mean, slope : function of the linear predictor
        The mean outcome, and its derivative.
    variance : function of the mean
        Up to a constant factor.
    link : function of the mean
        The linear predictor that gives it.
    likelihood : function of (mean outcome, fitted mean)
        The quasi-likelihood of an observation, up to what does not depend on the fit; what the iterations may not
        lower.
    highest : float
        No fitted mean may reach it.
    log_scale : bool
        Whether a coefficient is the logarithm of a ratio.
    """

    name: str
    mean: Function
    slope: Function
    variance: Function
    link: Function
    likelihood: Callable[[Floats, Floats], Floats]
    highest: float = np.inf
    log_scale: bool = True


def _bernoulli(outcome: Floats, fitted: Floats) -> Floats:
    return np.asarray(xlogy(outcome, fitted) + xlog1py(1 - outcome, -fitted))


def _logistic_slope(predictor: Floats) -> Floats:
    fitted = expit(predictor)
    return np.asarray(fitted * expit(-predictor))


_ALL = (
    Family(
        "linear",
        mean=lambda predictor: predictor,
        slope=np.ones_like,
        variance=np.ones_like,
        link=lambda mean: mean,
        likelihood=lambda outcome, fitted: -((outcome - fitted) ** 2),
        log_scale=False,
    ),
    Family(
        "logistic",
        mean=lambda predictor: np.asarray(expit(predictor)),
        slope=_logistic_slope,
        variance=lambda mean: mean * (1 - mean),
        link=lambda mean: np.log(mean) - np.log1p(-mean),
        likelihood=_bernoulli,
    ),
    Family(
        "poisson",
        mean=np.exp,
        slope=np.exp,
        variance=lambda mean: mean,
        link=np.log,
        likelihood=lambda outcome, fitted: np.asarray(xlogy(outcome, fitted) - fitted),
    ),
    Family(
        "log-binomial",
        mean=np.exp,
        slope=np.exp,
        variance=lambda mean: mean * (1 - mean),
        link=np.log,
        likelihood=_bernoulli,
        highest=1.0,
    ),
)
FAMILIES: Mapping[str, Family] = MappingProxyType({family.name: family for family in _ALL})
"""The families, by the name that a plan gives the model."""
