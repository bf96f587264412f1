"""What could be wrong with an estimate: each file asks one question of the data or of a fit, and answers in numbers.

Every question is a pure function on arrays, one entry per covariate pattern, and gives a frozen dataclass; beside it
stands a function that turns the numbers into findings. A threshold is a constant with its source. It is a custom, not
a law, so the number itself always stands in the message.
"""
