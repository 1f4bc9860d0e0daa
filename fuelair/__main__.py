"""``python -m fuelair`` is the command line."""

from fuelair.cli import main

main()
