"""The program: `main` runs a verb and turns every expected error into one message and its exit code.

Exit codes: 0 done, 1 some rows failed, 2 the input is wrong, 3 could not be solved, 4 unexpected,
130 interrupted.
"""

from __future__ import annotations

import os
import sys
import traceback
from typing import Annotated

import typer

from fuelair.cli import assess, band, cases, find, sweep, validate, warmup
from fuelair.cli.console import complain
from fuelair.errors import FuelairError
from fuelair.version import __version__

INTERRUPTED = 130
TRACEBACK_VARIABLE = "FUELAIR_TRACEBACK"

app = typer.Typer(
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode="rich",
    help="The fuel-air engine cycle beside the air-standard cycles: peak temperature and pressure to expect, and which "
    "assumption costs how many kelvin, bar and percent.",
    epilog="Exit codes: 0 done, 1 some rows failed, 2 the input is wrong, 3 could not be solved, 4 unexpected, 130 interrupted.",
)


def main() -> None:
    """Entry point: run a verb, turn every expected error into one clear message and its exit code."""
    try:
        app(standalone_mode=True)
    except FuelairError as error:
        complain(str(error))
        raise SystemExit(error.exit_code) from None
    except (KeyboardInterrupt, SystemExit) as end:
        if isinstance(end, SystemExit) and end.code != INTERRUPTED:
            raise
        complain("interrupted; nothing half written")
        raise SystemExit(INTERRUPTED) from None
    except OSError as error:
        if not isinstance(error, BrokenPipeError):
            complain(f"cannot write standard output: {error.strerror or error}")
            raise SystemExit(2) from None
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise SystemExit(0) from None
    except Exception as error:
        if os.environ.get(TRACEBACK_VARIABLE):
            traceback.print_exc()
        complain(
            f"unexpected {type(error).__name__}: {error}\nPlease report it with the case file. "
            f"{TRACEBACK_VARIABLE}=1 shows where it happened."
        )
        raise SystemExit(4) from None


@app.callback(invoke_without_command=True)
def _version(
    version: Annotated[bool, typer.Option("--version", help="Print the version and stop.")] = False,
) -> None:
    if version:
        print(f"fuelair {__version__}")
        raise typer.Exit


_VERBS = (
    assess.assess, sweep.sweep, find.find, band.band, cases.check, cases.new, cases.fuels, validate.validate, warmup.warmup,
)  # fmt: skip
for _verb in _VERBS:
    app.command()(_verb)  # in the order in which the help lists them
