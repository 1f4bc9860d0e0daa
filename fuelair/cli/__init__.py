"""The command line: verbs, exit codes, printing. The only room that prints.

`app` holds the program, `console` what verbs print with, `options` what several verbs take; every other
module is a verb, or a few that belong together.
"""

from fuelair.cli.app import main

__all__ = ["main"]
