"""``gmid check``: judge a plan, edited by hand perhaps, in every condition."""

from __future__ import annotations

import shutil
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from gmid.cli.output import choose_form, make_progress, write_csv, write_json

if TYPE_CHECKING:
    from gmid.sheet.data import Sheet


def check_command(
    plan: Annotated[Path, typer.Argument(metavar="PLAN", help="A plan file, such as size writes.")],
    full: Annotated[
        bool, typer.Option("--full", help="Everything: all conditions, noise shares, elements.")
    ] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the sheet as JSON, SI.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print the checks as CSV, SI.")] = False,
) -> None:
    """Judge a plan in every condition.

    Solves each amplifier at low, nominal and high supply in every condition and compares it with
    its demands. Ends with exit code 3 where one is missed; without demands it reports.

    Example: gmid check out/plan.toml
    """
    from gmid.tasks.checking import check

    choose_form(as_json=as_json, as_csv=as_csv)
    found = check(plan, progress=make_progress())
    write_checked(found.sheet, full=full, as_json=as_json, as_csv=as_csv)
    if not found.is_met:
        sys.exit(3)


def write_checked(sheet: Sheet, *, full: bool, as_json: bool, as_csv: bool) -> None:
    """Print a sheet as it was asked for.

    Parameters
    ----------
    sheet : Sheet
        What to print.
    full : bool
        On a screen, the whole of it.
    as_json, as_csv : bool
        All of it as JSON, or its checks as CSV.

    Examples
    --------
    >>> from gmid.sheet.data import Sheet
    >>> sheet = Sheet(title="T", amplifiers=())
    >>> write_checked(sheet, full=False, as_json=False, as_csv=True)
    """
    from gmid.sheet.data import to_plain

    if as_json:
        write_json(sheet.to_json())
    elif as_csv:
        write_csv([{"of": part, **to_plain(one)} for part, one in sheet.checks])
    else:
        write_screen(sheet, full=full)


def write_screen(sheet: Sheet, *, full: bool) -> None:
    """Print the verdict, the transistors and the loops, or everything.

    Parameters
    ----------
    sheet : Sheet
        What to print.
    full : bool
        The whole sheet.

    Examples
    --------
    >>> from gmid.sheet.data import Sheet
    >>> write_screen(Sheet(title="T", amplifiers=()), full=False)
    T
    =
    <BLANKLINE>
    MET: every check holds.
    """
    from gmid.sheet.outline import lay_out
    from gmid.sheet.screen import lay_out_screen
    from gmid.sheet.terminal import write_terminal

    width = shutil.get_terminal_size((120, 40)).columns
    blocks = lay_out(sheet) if full else lay_out_screen(sheet)
    sys.stdout.write(write_terminal(blocks, width=width))
