"""Expressions: the small language in which a plan says who is eligible and what a column is worked out from.

An expression is read in stages, each a file: its characters become marks (``words``), the marks a tree (``parsing``,
whose nodes are in ``tree``), the tree is held against the kinds of the columns (``kinds``), and only a tree that
passes is handed to the engine that holds the rows, as ibis expressions (``compiling``). Nothing of the text is passed
on: a value stays a value, and a name is only ever looked up.
"""

from adjustplan.data.expressions.faults import Fault, Place, Problem, in_plan
from adjustplan.data.expressions.kinds import Checked, ValueKind, check
from adjustplan.data.expressions.parsing import parse
from adjustplan.data.expressions.tree import Node, columns_of

__all__ = ["Checked", "Fault", "Node", "Place", "Problem", "ValueKind", "check", "columns_of", "in_plan", "parse"]
