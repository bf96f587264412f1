"""The effect in each level of a modifier, and interaction on both scales.

With an outcome regression one model is fitted with products of exposure and modifier, so the strata share what the
other covariates do. With any other way to adjust each level is a study of its own. A modifier that enters as a number
is looked at in three places: at the values nearest to its 25th, 50th and 75th percentile.
"""

from __future__ import annotations

from collections.abc import Sequence

from adjustplan.data import Patterns
from adjustplan.estimate.comparing.modification_by_products import by_products
from adjustplan.estimate.comparing.modification_by_strata import by_strata
from adjustplan.estimate.comparing.stratum_effects import EffectModification
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Setting


def modify(patterns: Patterns, setting: Setting, members: Sequence[str]) -> EffectModification | None:
    """Estimate the effect by level of the planned modifier; None where the plan names none that is in the set.

    Parameters
    ----------
    patterns : Patterns
        Of the rows complete for the exposure and ``members``.
    setting : Setting
    members : sequence of str
    """
    modifier = setting.modifier
    if modifier is None or modifier not in members:
        return None
    try:
        if len(patterns.levels(modifier)) < 2:
            message = f"“{modifier}” has one value in all complete rows, so nothing can differ between its levels."
            raise NotEstimableError("estimate-modification", message, "Choose another modifier.", "warning")
        if setting.way == "regression":
            return by_products(patterns, setting, members, modifier)
        return by_strata(patterns, setting, members, modifier)
    except NotEstimableError as error:
        return EffectModification(modifier, (), None, (error.finding,))
