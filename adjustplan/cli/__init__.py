"""The command line. Each command reads its arguments, calls one function and prints; there is no other logic here."""

from adjustplan.cli.app import main

__all__ = ["main"]
