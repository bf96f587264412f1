"""Fragility: how strong what nobody measured would have to be, and what stated biases would leave of the estimate.

``evalues``, ``bounding``, ``binary``, ``bias``, ``robustness`` and ``yardstick`` are one method each, from numbers to
numbers; ``scales`` holds the bridges from every measure to a risk ratio. ``stressing`` asks all of them what the plan's
``[stress]`` asks, of an :class:`Observed` estimate.
"""

from adjustplan.estimate.stress.observed import Observed, Yardstick
from adjustplan.estimate.stress.results import Fragility
from adjustplan.estimate.stress.stressing import stress
from adjustplan.estimate.stress.tables import TwoByTwo

__all__ = ["Fragility", "Observed", "TwoByTwo", "Yardstick", "stress"]
