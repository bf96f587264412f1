"""From two means to a measure: what the marginal ways to adjust share.

Standardisation, weighting and their doubly robust combination all estimate two numbers, the mean outcome had everybody
been exposed and had everybody been at the reference level. A difference, a ratio or an odds ratio of the two is then a
*marginal* measure: it compares two states of the whole population, not two people who are otherwise alike. The standard
error follows by the delta method: on its scale, the influence on the measure is the slope times the influence on each
mean.
"""

from __future__ import annotations

import math

from adjustplan.estimate.kernel import Influence
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting
from adjustplan.study import Scale


def compare(means: tuple[float, float], setting: Setting) -> float:
    """The measure of two means: a difference, or the logarithm of a ratio.

    Raises
    ------
    NotEstimableError
        If a mean is none that the measure can compare, such as a risk of 0 in a ratio.
    """
    scale: Scale = setting.scale
    exposed, reference = means
    if not (math.isfinite(exposed) and math.isfinite(reference)):
        message = "A mean that the estimate compares is no finite number."
        raise NotEstimableError("estimate-overflow", message, "Look for rare levels and extreme weights.")
    if setting.kind == "risk" and not (0 <= exposed <= 1 and 0 <= reference <= 1):
        worst = exposed if not 0 <= exposed <= 1 else reference
        message = f"An estimated risk of {worst:.3g} is outside 0 to 1."
        remedy = (
            "Adjust another way, or with another model: some people are much more likely to be exposed than others."
        )
        raise NotEstimableError("estimate-impossible-risk", message, remedy)
    if scale == "difference":
        return exposed - reference
    if exposed <= 0 or reference <= 0 or (scale == "odds ratio" and (exposed >= 1 or reference >= 1)):
        message = (
            f"The two {_NOUNS[setting.kind]} are {exposed:.3g} and {reference:.3g}, which have no {setting.measure}."
        )
        raise NotEstimableError("estimate-no-ratio", message, "Estimate a difference, or get more data.")
    if scale == "odds ratio":
        return math.log(exposed) - math.log1p(-exposed) - math.log(reference) + math.log1p(-reference)
    return math.log(exposed) - math.log(reference)


def influence_on(means: tuple[float, float], parts: tuple[Influence, Influence], scale: Scale) -> Influence:
    """The influence on the measure, from those on the two means."""
    exposed, reference = means
    if scale == "difference":
        return parts[0] - parts[1]
    if scale == "odds ratio":
        return parts[0].scaled(1 / (exposed * (1 - exposed))) - parts[1].scaled(1 / (reference * (1 - reference)))
    return parts[0].scaled(1 / exposed) - parts[1].scaled(1 / reference)


_NOUNS = {"mean": "means", "risk": "risks", "rate": "rates", "hazard": "hazards"}
