"""``gmid new``: commented starter files."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

RECIPE = """\
# How to read a process sweep into a table.  Import it with
#     gmid import THIS_FILE -o TABLE.h5
format = 1

[table]
process = "my_process"

# One [[sweep]] for each device in each condition.
[[sweep]]
files = "nmos_*.csv"            # name, glob or list, relative to this file; .gz is fine
layout = "auto"                 # or force one: {layouts}
device = "nmos"                 # the name you will query
polarity = "n"                  # n or p; p-channel data may have any sign, flips are reported
width = "2 um"                  # total width simulated: this is the unit transistor
fingers = 1
corner = "tt"                   # or {{ from = "name", pattern = '_(tt|ss|ff)_' }}
temperature = "27 C"
nominal = true                  # queries take this condition by default (one for each device)
# netlist = "M{{name}} {{d}} {{g}} {{s}} {{b}} my_model w={{width}} l={{length}} m={{count}}"
# columns = ["vgs", "id"]       # names of the columns of a file without header
# rows = {{ device = "nmos" }}    # keep only rows whose column of words holds this word

# Axes: an expression in the file's column names (+ - * / ( ) abs; back quotes force a name).
# An axis or quantity whose column bears the standard name needs no line here.
[sweep.axes]
length = {{ column = "L", unit = "um" }}
vgs = "v(g)"
vds = "v(d)"
vsb = {{ value = "0 V" }}
# length = {{ from = "name", pattern = 'l([\\d.p]+)u', unit = "um" }}
#     from: name (of the file) title header comment step; the first group is the value
# vsb = {{ restart = "0:1.2:0.4", unit = "V", outside = "vds" }}
#     an axis that no column holds: it moves on each time vds begins anew

# Quantities of the simulated device: {quantities}
[sweep.quantities]
id = "-i(vd)"
gm = {{ column = "gm", unit = "uS" }}
gds = "1/ro"
# gmb = {{ derived = true }}      # take the slope of id instead of the file's column
"""
"""Text of a starter recipe; braces doubled for formatting."""


def build_group() -> typer.Typer:
    """Assemble ``gmid new``.

    Returns
    -------
    Typer
        Its commands.

    Examples
    --------
    >>> build_group().info.no_args_is_help
    True
    """
    group = typer.Typer(
        help="Write a commented starter file.", rich_markup_mode=None, no_args_is_help=True
    )
    group.command("recipe")(recipe_command)
    group.command("request")(request_command)
    return group


def request_command(
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", metavar="FILE", help="File to write; stdout by default."),
    ] = None,
    force: Annotated[bool, typer.Option("--force", help="Replace an existing file.")] = False,
) -> None:
    """Write a commented request to start from.

    Example: gmid new request -o my_filter.toml
    """
    from gmid.cli.starters import request_text

    write_starter(request_text(), output, force=force)


def recipe_command(
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", metavar="FILE", help="File to write; stdout by default."),
    ] = None,
    force: Annotated[bool, typer.Option("--force", help="Replace an existing file.")] = False,
) -> None:
    """Write a commented recipe to start from.

    Example: gmid new recipe -o my_process.toml
    """
    write_starter(recipe_text(), output, force=force)


def recipe_text() -> str:
    """Fill the starter recipe with the names this version knows.

    Returns
    -------
    str
        TOML.

    Examples
    --------
    >>> recipe_text().splitlines()[2]
    'format = 1'
    """
    from gmid.nomenclature import SWEEP_QUANTITIES
    from gmid.sweep.readers import LAYOUTS

    return RECIPE.format(layouts=" ".join(LAYOUTS), quantities=" ".join(SWEEP_QUANTITIES))


def write_starter(text: str, output: Path | None, *, force: bool) -> None:
    """Write a starter file, or print it.

    Parameters
    ----------
    text : str
        Its content.
    output : Path or None
        Target; None prints.
    force : bool
        Replace an existing file.

    Examples
    --------
    >>> write_starter("format = 1", None, force=False)
    format = 1
    """
    if output is None:
        typer.echo(text, nl=not text.endswith("\n"))
        return
    from gmid.files import write_text

    write_text(output, text, force=force)
    typer.echo(f"{output} written.", err=True)
