"""The command ``gmid``: assembles the commands, turns errors into words and exit codes."""

from __future__ import annotations

import os
import sys
from importlib import import_module

import typer

from gmid.errors import GmidError, UsageFault

HELP = """Size on-chip filter amplifiers from gm/Id tables.

Import a process sweep once, ask the table daily, size an amplifier for a filter.
"""


_COMMANDS = {
    "inspect": ("inspecting", "inspect_command"),
    "import": ("importing", "import_command"),
    "show": ("showing", "show_command"),
    "query": ("querying", "query_command"),
    "chart": ("charting", "chart_command"),
    "filter": ("filtering", "filter_command"),
    "size": ("sizing", "size_command"),
    "check": ("checking", "check_command"),
    "netlist": ("netlisting", "netlist_command"),
    "simulate": ("simulating", "simulate_command"),
}
"""Module and function of each command, in the order in which they are listed."""


def build_app(first: str = "") -> typer.Typer:
    """Assemble the command line.

    Parameters
    ----------
    first : str
        First word of the command line: where it names a command, the others, which take time
        to describe, are left out.

    Returns
    -------
    Typer
        With every command, or the one named.

    Examples
    --------
    >>> build_app().info.no_args_is_help
    True
    >>> [command.name for command in build_app("query").registered_commands]
    ['query']
    """
    app = typer.Typer(
        help=HELP, rich_markup_mode=None, pretty_exceptions_enable=False, no_args_is_help=True
    )
    for name in [first] if first in _COMMANDS else _COMMANDS:
        module, function = _COMMANDS[name]
        app.command(name)(getattr(import_module(f"gmid.cli.{module}"), function))
    if first in _COMMANDS:
        app.callback()(_keep_group)
    else:
        from gmid.cli.starting import build_group

        app.add_typer(build_group(), name="new")
    return app


def _keep_group() -> None:
    """Make a command that stands alone still one of a group."""


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
        build_app(*sys.argv[1:2])(standalone_mode=True)
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
