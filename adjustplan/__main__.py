"""``python -m adjustplan``."""

from adjustplan.cli import main

main()
