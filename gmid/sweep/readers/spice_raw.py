"""Layout ``spice-raw``: SPICE3 raw files, text or binary, several plots in one file."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.sweep.bytestream import ByteStream
from gmid.sweep.readers.common import drop_repeats
from gmid.sweep.readers.raw_binary import read_binary
from gmid.sweep.readers.raw_body import read_body
from gmid.sweep.readers.raw_header import Plot, Variable, read_header
from gmid.sweep.readers.raw_tokens import Body
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import Column, TextTable

LAYOUT = "spice-raw"


def recognise(head: str) -> float:
    r"""Judge whether a text is a SPICE3 raw file.

    Parameters
    ----------
    head : str
        The start of the text.

    Returns
    -------
    float
        Confidence from 0 to 1.

    Examples
    --------
    >>> recognise("Title: a\nPlotname: dc\nFlags: real\nVariables:\n"), recognise("0 1\n")
    (0.99, 0.0)
    """
    keys = ("Title", "Plotname", "Flags", "Variables", "Values", "No. Variables")
    found = {key for key in keys if re.search(rf"^{re.escape(key)}:", head, re.M | re.I)}
    if "Variables" not in found or len(found) < 3:
        return 0.0
    return 0.99 if len(found) >= 4 else 0.7


def read(source: TextSource, *, suffixes: str = "spice") -> list[TextTable]:
    r"""Read every plot of a raw file.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of suffixes, should there be any.

    Returns
    -------
    list of TextTable
        One a plot, in order.  Complex plots give complex columns; the unit is a hint from the
        type word.  ``meta`` has ``title``, ``plot``, ``flags``, ``step`` (number of the plot),
        further header lines by their key in lower case, and ``dropped`` and ``note``.

    Raises
    ------
    DataFault or Faults
        If a header is incomplete, or points are missing, damaged or more than announced.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = (b"Title: t\nPlotname: dc\nFlags: real\nNo. Variables: 1\nNo. Points: 1\n"
    ...         b"Variables:\n\t0\tv(d)\tvoltage\nValues:\n 0\t0.5\n")
    >>> source = open_bytes(text, name="a.raw")
    >>> table = read(source)[0]
    >>> table.names, table.meta["plot"]
    (['v(d)'], 'dc')
    """
    tables: list[TextTable] = []
    with source.stream() as stream:
        while (plot := read_header(source, stream, len(tables) + 1)) is not None:
            if plot.is_binary:
                body = read_binary(source, stream, plot)
            else:
                body = read_body(source, stream, plot, suffixes=suffixes)
                _check_points(source, stream, plot, body)
            tables.append(_make_table(source, plot, body))
    if not tables:
        raise DataFault(
            "there is no plot in this raw file.", where=source.name,
            hint="Did the simulation run to its end?",
        )  # fmt: skip
    return tables


def _check_points(source: TextSource, stream: ByteStream, plot: Plot, body: Body) -> None:
    """Compare the points found with those announced."""
    if body.points == 0:
        raise DataFault(
            f"plot {plot.number} ({plot.meta.get('plot', 'without a name')}) has no points.",
            where=source.where(plot.values_line), hint="Did the simulation run to its end?",
        )  # fmt: skip
    if plot.announced is None or plot.announced in (0, body.points):
        return
    fewer = body.points < plot.announced
    raise DataFault(
        f"the header announces {plot.announced} points (line {plot.points_line}), "
        f"found {body.points}{' before the end of the plot' if fewer else ''}.",
        where=source.where(stream.line if fewer else int(body.lines[plot.announced])),
        hint="The run was stopped or the file cut off: simulate again, or correct "
        "'No. Points:' if these points are what you want.",
    )


def _make_table(source: TextSource, plot: Plot, body: Body) -> TextTable:
    """Name the columns, spread constants and leave repeated ones out."""
    made = [
        Column(variable.name, variable.unit, _spread(source, plot, variable, values))
        for variable, values in zip(plot.variables, body.columns, strict=True)
    ]
    kept, dropped = drop_repeats(made)
    meta = dict(plot.meta)
    meta["step"] = str(plot.number)
    if dropped:
        meta["dropped"] = ", ".join(dropped)
    notes = list(body.notes)
    if not plot.announced:
        notes.append(f"the header announces no points; {body.points} were found and taken.")
    if plot.skipped:
        notes.append(f"{plot.skipped} lines of a log before the header were left out.")
    if notes:
        meta["note"] = "\n".join(notes)
    steps = np.diff(body.lines)
    uniform = steps.size == 0 or bool((steps == steps[0]).all())
    return TextTable(
        source.name, [made[position] for position in kept], first_line=int(body.lines[0]),
        lines_per_row=int(steps[0]) if uniform and steps.size else len(made),
        lines=None if uniform else body.lines, meta=meta, layout=LAYOUT,
        counts_points=plot.is_binary,
    )  # fmt: skip


def _spread(
    source: TextSource, plot: Plot, variable: Variable, values: NDArray[Any]
) -> NDArray[Any]:
    """Take the first point of a constant for all, and refuse other short vectors."""
    size = variable.size
    points = plot.found_points
    if size is None or size >= points:
        return values
    if size == 1:
        return np.full(points, values[0])
    raise DataFault(
        f"the vector {variable.name!r} has {size} points where the plot has {points}.",
        where=source.where(variable.line), hint="Write vectors of different length to files "
        "of their own.",
    )  # fmt: skip


def plot_names(tables: Sequence[TextTable]) -> list[str]:
    """List the plots of a file.

    Parameters
    ----------
    tables : sequence of TextTable
        From `read`.

    Returns
    -------
    list of str
        The ``Plotname:`` of each.

    Examples
    --------
    >>> plot_names([TextTable("a.raw", [], meta={"plot": "DC transfer characteristic"})])
    ['DC transfer characteristic']
    """
    return [table.meta.get("plot", "") for table in tables]
