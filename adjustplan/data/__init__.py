"""Data: from rows, wherever they are, to covariate patterns, the only thing the models ever see.

``source`` opens whatever holds the rows (``sources`` and ``spark`` have a file for each kind), ``eligibility`` keeps
those that the plan means and derives columns, ``reduction`` has the engine count the rows of each covariate pattern,
``patterns`` and ``moments`` hold the counts, and ``checks`` says what is wrong with the columns.
"""

from adjustplan.data.checks import check_columns, check_values
from adjustplan.data.moments import Floats, Moments
from adjustplan.data.patterns import Kind, Outcome, Patterns
from adjustplan.data.reduction import Wanted, reduce_to_patterns
from adjustplan.data.source import Source, open_data

__all__ = [
    "Floats",
    "Kind",
    "Moments",
    "Outcome",
    "Patterns",
    "Source",
    "Wanted",
    "check_columns",
    "check_values",
    "open_data",
    "reduce_to_patterns",
]
