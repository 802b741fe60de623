"""What the shell may complete: devices and conditions of a table, names of quantities."""

from __future__ import annotations

import typer


def complete_device(context: typer.Context, incomplete: str) -> list[str]:
    """List the devices of the table on the command line.

    Parameters
    ----------
    context : Context
        With the arguments so far.
    incomplete : str
        What has been typed.

    Returns
    -------
    list of str
        None where there is no such table yet: the shell is no place for messages.

    Examples
    --------
    >>> from gmid.cli.app import build_app
    >>> command = typer.main.get_command(build_app("query"))
    >>> complete_device(typer.Context(command), "n")
    []
    """
    from gmid.errors import GmidError
    from gmid.table.table import open_grid_data

    path = context.params.get("table")
    if path is None:
        return []
    try:
        names = open_grid_data(path).devices
    except GmidError:
        return []
    return [name for name in names if name.startswith(incomplete)]


def complete_quantities(incomplete: str) -> list[str]:
    """List quantities that end a list of them.

    Parameters
    ----------
    incomplete : str
        What has been typed, such as ``gm,cg``.

    Returns
    -------
    list of str
        The whole list each time, as the shell replaces what has been typed.

    Examples
    --------
    >>> complete_quantities("gm,cgg")
    ['gm,cgg']
    """
    from gmid.nomenclature import QUANTITIES

    before, comma, last = incomplete.rpartition(",")
    return [f"{before}{comma}{name}" for name in QUANTITIES if name.startswith(last)]


def complete_axis(incomplete: str) -> list[str]:
    """List what may lie on the horizontal axis of a chart.

    Parameters
    ----------
    incomplete : str
        What has been typed.

    Returns
    -------
    list of str
        As typed on the command line.

    Examples
    --------
    >>> complete_axis("g")
    ['gm-over-id']
    """
    from gmid.sheet.charts import AGAINST

    names = [name.replace("_", "-") for name in AGAINST]
    return [name for name in names if name.startswith(incomplete)]
