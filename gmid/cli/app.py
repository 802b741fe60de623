"""The command ``gmid``: assembles the commands, turns errors into words and exit codes."""

from __future__ import annotations

import os
import sys

import typer

from gmid.cli import (
    charting,
    checking,
    filtering,
    importing,
    inspecting,
    netlisting,
    querying,
    showing,
    simulating,
    starting,
)
from gmid.errors import GmidError, UsageFault

HELP = """Size on-chip filter amplifiers from gm/Id tables.

Import a process sweep once, ask the table daily, size an amplifier for a filter.
"""


def build_app() -> typer.Typer:
    """Assemble the command line.

    Returns
    -------
    Typer
        With every command.

    Examples
    --------
    >>> build_app().info.no_args_is_help
    True
    """
    app = typer.Typer(
        help=HELP, rich_markup_mode=None, pretty_exceptions_enable=False, no_args_is_help=True
    )
    app.command("inspect")(inspecting.inspect_command)
    app.command("import")(importing.import_command)
    app.command("show")(showing.show_command)
    app.command("query")(querying.query_command)
    app.command("chart")(charting.chart_command)
    app.command("filter")(filtering.filter_command)
    app.command("check")(checking.check_command)
    app.command("netlist")(netlisting.netlist_command)
    app.command("simulate")(simulating.simulate_command)
    app.add_typer(starting.build_group(), name="new")
    return app


def main() -> None:
    """Run the command line; exit codes 0 done, 1 bad data, 2 usage, 3 missed, 130 interrupted.

    Examples
    --------
    >>> import sys
    >>> sys.argv = ["gmid", "show", "missing.h5"]
    >>> main()
    Traceback (most recent call last):
    ...
    SystemExit: 1
    """
    try:
        build_app()(standalone_mode=True)
    except GmidError as fault:
        print_fault(fault)
        sys.exit(2 if isinstance(fault, UsageFault) else 1)
    except KeyboardInterrupt:
        sys.stderr.write("\nInterrupted; nothing was written.\n")
        sys.exit(130)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(0)


def print_fault(fault: GmidError) -> None:
    """Say on stderr what went wrong.

    Parameters
    ----------
    fault : GmidError
        One fault or several.

    Examples
    --------
    >>> print_fault(GmidError("nothing there."))
    """
    sys.stderr.write(f"gmid: {str(fault).strip()}\n")
