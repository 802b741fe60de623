"""The command ``gmid``: assembles the commands, turns errors into words and exit codes."""

from __future__ import annotations

import errno
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


WIDEST = 100
"""Columns that a help text takes at most."""


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
        help=HELP, rich_markup_mode=None, pretty_exceptions_enable=False, no_args_is_help=True,
        context_settings={"max_content_width": WIDEST},
    )  # fmt: skip
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

    A reader of the output that leaves early, such as ``head``, ends it silently with 141, as the
    shell reports it of any command.

    Examples
    --------
    >>> import sys
    >>> sys.argv = ["gmid", "show", "missing.h5"]
    >>> main()
    Traceback (most recent call last):
    ...
    SystemExit: 1
    """
    _open_closed_streams()
    try:
        code = _run()
        sys.stdout.flush()
        sys.stderr.flush()
    except BrokenPipeError:
        _drop_output()
        code = LEFT
    except OSError as trouble:
        if trouble.filename is not None or trouble.errno not in _UNWRITTEN:
            raise
        _drop_output()
        reason = os.strerror(trouble.errno).lower()
        print_fault(GmidError(f"the output cannot be written: {reason}.", hint="Make room."))
        code = 1
    sys.exit(code)


LEFT = 128 + 13
"""Exit code where the reader of the output has left: that of a command ended by SIGPIPE."""

_UNWRITTEN = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EIO)


def _run() -> int:
    """Run the command; return its exit code."""
    try:
        build_app(*sys.argv[1:2])(standalone_mode=True)
    except GmidError as fault:
        print_fault(fault)
        return 2 if isinstance(fault, UsageFault) else 1
    except KeyboardInterrupt:
        return _tell_interruption()
    except SystemExit as stop:
        if isinstance(stop.__context__, BrokenPipeError):  # which typer turns into code 1
            raise stop.__context__ from None
        return _tell_interruption() if stop.code == INTERRUPTED else int(stop.code or 0)
    return 0


INTERRUPTED = 130
"""Exit code after Ctrl-C."""


def _tell_interruption() -> int:
    sys.stderr.write("\nInterrupted.\n")
    return INTERRUPTED


def _open_closed_streams() -> None:
    """Give streams that the caller has closed a place where nobody reads them."""
    for name in ("stdout", "stderr"):
        if getattr(sys, name) is None:
            setattr(sys, name, open(os.devnull, "w", encoding="utf-8"))  # noqa: SIM115


def _drop_output() -> None:
    """Let what is still to be flushed to stdout go nowhere, so that the end is silent."""
    nowhere = os.open(os.devnull, os.O_WRONLY)
    for stream in (sys.stdout, sys.stderr):
        try:
            stream.flush()
        except OSError:
            os.dup2(nowhere, stream.fileno())
    os.close(nowhere)


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
