"""Kinds of source, one file for each: how to see its rows as one table without reading them into Python.

Every file here has one opener: a context manager from a place to an :class:`~adjustplan.data.sources.opened.Opened`.
It knows what can be wrong with its kind, turns the engine's errors into findings that show nobody's data, and leaves
nothing behind. Above them nobody asks which kind it was.
"""
