"""Layout ``csv``: columns between commas, semicolons, TABs or vertical bars."""

from __future__ import annotations

import re
from collections.abc import Sequence

from gmid.errors import DataFault
from gmid.sweep.numbers import is_number
from gmid.sweep.readers.cells import is_comment, split_cells
from gmid.sweep.readers.common import read_shape
from gmid.sweep.readers.scan import Shape, scan_lines
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "csv"
SEPARATORS = (";", "\t", "|", ",")
"""In the order in which they are tried; with all but the last a comma may be decimal."""

_BLANK_PAIR = re.compile(r"([+-]?[\d.]\S*)\s+([+-]?[\d.]\S*)")


def recognise(head: str) -> float:
    r"""Judge whether a text is a CSV or TSV file.

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
    >>> recognise("vgs;id\n0;1e-12\n"), recognise("0 1e-12\n")
    (0.8, 0.0)
    """
    found = _find_shape(head.split("\n")[:400])
    if found is None:
        return 0.0
    return 0.8 if found[1] > 0.9 else 0.6


def read(
    source: TextSource, *, columns: Sequence[str] | None = None, suffixes: str = "si"
) -> list[TextTable]:
    r"""Read a CSV or TSV file.

    Parameters
    ----------
    source : TextSource
        The file.
    columns : sequence of str, optional
        Names of the columns from left to right, with units in any spelling that a header may
        have; they replace the file's own.
    suffixes : {'si', 'spice'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of TextTable
        One table.  Columns of words are kept as such.

    Raises
    ------
    DataFault or Faults
        If the file is no such table, has no header though `columns` is not given, or any row is
        at fault.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> table = read(open_bytes(b"vgs [V];id (uA)\n0,5;1,25\n", name="a.csv"))[0]
    >>> [(column.name, column.unit, column.values.tolist()) for column in table.columns]
    [('vgs', 'V', [0.5]), ('id', 'uA', [1.25])]
    """
    found = _find_shape(source.head_lines(), suffixes=suffixes)
    if found is None:
        raise DataFault(
            "no rows of numbers between commas, semicolons, TABs or bars were "
            "found in the first 64 kB.", where=source.name,
            hint="Check the layout, or remove what stands before the table.",
        )  # fmt: skip
    shape = found[0]
    if columns is not None and len(columns) != shape.width:
        raise DataFault(
            f"{len(columns)} names are listed for {shape.width} columns.",
            where=source.where(shape.first_line), hint="List one name for each column.",
        )  # fmt: skip
    return [read_shape(source, shape, layout=LAYOUT, columns=columns, suffixes=suffixes)]


def _find_shape(lines: Sequence[str], *, suffixes: str = "si") -> tuple[Shape, float] | None:
    """Find the separator whose count of fields is the steadiest, and the table with it."""
    best: tuple[Shape, float] | None = None
    for separator in SEPARATORS:
        if not any(separator in line for line in lines):
            continue
        shape = scan_lines(lines, separator, suffixes=suffixes)
        if shape is None or shape.fields < 2 or len(shape.text) == shape.fields:
            continue
        steady = _judge(lines[shape.first_line - 1 :], shape)
        if steady > 0.5 and (best is None or steady > best[1] + 0.05):
            best = shape, steady
    return best


def _judge(lines: Sequence[str], shape: Shape) -> float:
    """Share of the rows that have the usual number of fields, none of them two numbers."""
    rows = [line for line in lines if line.strip() and not is_comment(line, shape.separator)]
    cells = [split_cells(line, shape.separator) for line in rows[:200]]
    good = [
        row for row in cells
        if len(row) == shape.fields and not any(map(_is_pair, row))
    ]  # fmt: skip
    return len(good) / max(len(cells), 1)


def _is_pair(cell: str) -> bool:
    """Tell whether a cell is two numbers, which a date with a time is not."""
    match = _BLANK_PAIR.fullmatch(cell)
    return match is not None and all(map(is_number, match.groups()))
