"""Layout ``columns``: numbers between blanks, with or without a header."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gmid.errors import DataFault
from gmid.sweep.numbers import parse_number
from gmid.sweep.readers.cells import normalise_number
from gmid.sweep.readers.common import read_shape
from gmid.sweep.readers.scan import HeaderMissing, Shape, scan_lines
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "columns"


def recognise(head: str) -> float:
    r"""Judge whether a text is a column file.

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
    >>> recognise(" v-sweep  i(vd)\n 0.0  1e-12\n 0.1  1e-11\n"), recognise("a;b\n1;2\n")
    (0.7, 0.0)
    """
    lines = head.split("\n")[:400]
    shape = scan_lines(lines, None, suffixes="spice")
    if shape is None or len(shape.text) * 2 >= shape.fields:
        return 0.0
    rows = [line.split() for line in lines[shape.first_line - 1 :] if line.strip()][:200]
    steady = sum(len(row) == shape.fields for row in rows) / len(rows)
    if steady < 0.5:
        return 0.0
    if shape.fields == 1:
        return 0.3
    return round(0.7 if steady > 0.9 and not shape.text else 0.5, 2)


def read(
    source: TextSource, *, columns: Sequence[str] | None = None, suffixes: str = "spice"
) -> list[TextTable]:
    r"""Read a column file.

    Parameters
    ----------
    source : TextSource
        The file.
    columns : sequence of str, optional
        Names of the columns from left to right.  Where the writer repeats the scale before each
        vector, either all names may be given or the scale once and then the vectors.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of TextTable
        One table.  Columns that repeat an earlier one of the same name on every row are left
        out, which ``meta["dropped"]`` tells.

    Raises
    ------
    DataFault or Faults
        If there are no rows, no header though `columns` is not given, or a row is at fault.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> table = read(open_bytes(b" v-sweep  i(vd)\n 0.5 -1e-6\n", name="a.txt"))[0]
    >>> table.names, table.column("i(vd)").values.tolist()
    (['v-sweep', 'i(vd)'], [-1e-06])
    """
    shape = scan_lines(source.head_lines(), None, suffixes=suffixes)
    if shape is None:
        raise DataFault(
            "no rows of numbers were found in the first 64 kB.", where=source.name,
            hint="Check the layout, or remove what stands before the table.",
        )  # fmt: skip
    spread = columns is not None and len(columns) != shape.width
    if columns is not None:
        columns = _spread(source, shape, list(columns))
    elif shape.header is None and _has_repeated_scale(source, shape, suffixes):
        raise HeaderMissing(
            f"the {shape.width} columns have no header; columns 1, 3, 5 ... look like one scale "
            "that is repeated.", where=source.where(shape.first_line),
            hint="List the scale and then the vectors in the recipe: columns = [...].",
            width=shape.width,
        )  # fmt: skip
    table = read_shape(source, shape, layout=LAYOUT, columns=columns, suffixes=suffixes)
    if spread and columns is not None:
        _check_scale(table, columns[0])
    return [table]


def _spread(source: TextSource, shape: Shape, columns: list[str]) -> list[str]:
    """Repeat the name of the scale where the user listed it once."""
    if len(columns) == shape.width:
        return columns
    if shape.width == 2 * (len(columns) - 1) and len(columns) > 1:
        return [name for vector in columns[1:] for name in (columns[0], vector)]
    raise DataFault(
        f"{len(columns)} names are listed for {shape.width} columns.",
        where=source.where(shape.first_line), hint="List one name for each column.",
    )  # fmt: skip


def _check_scale(table: TextTable, scale: str) -> None:
    """Refuse a repeated scale that is not the same on every row."""
    found = [column for column in table.columns if column.name == scale]
    for other in found[1:]:
        row = int(np.flatnonzero(other.values != found[0].values)[0])
        raise DataFault(
            f"the scale {scale!r} is {found[0].values[row]:g} in one column and "
            f"{other.values[row]:g} in another.", where=table.where(row),
            hint="List the name of every column, from left to right.",
        )  # fmt: skip


def _has_repeated_scale(source: TextSource, shape: Shape, suffixes: str) -> bool:
    """Tell whether columns 1, 3, 5 ... are equal in the head."""
    if shape.width < 4 or shape.width % 2 or shape.text:
        return False
    for line in source.head_lines()[shape.first_line - 1 :]:
        words = [normalise_number(w, decimal_comma=shape.decimal_comma) for w in line.split()]
        if len(words) != shape.width:
            continue
        try:
            scales = {parse_number(word, suffixes=suffixes) for word in words[::2]}
        except DataFault:
            return False
        if len(scales) > 1:
            return False
    return True
