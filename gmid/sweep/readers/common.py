"""What the readers of rows share: from a shape to a table, repeated columns left out."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gmid.errors import DataFault
from gmid.sweep.readers.careful import read_rows_slowly
from gmid.sweep.readers.gather import MOST_COLUMNS
from gmid.sweep.readers.rows import read_rows_fast
from gmid.sweep.readers.scan import Shape, name_columns, settle_header
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import Column, TextTable


def read_shape(
    source: TextSource, shape: Shape, *, layout: str, columns: Sequence[str] | None, suffixes: str
) -> TextTable:
    r"""Read the one table of a file of rows.

    Parameters
    ----------
    source : TextSource
        The file.
    shape : Shape
        How its rows are written.
    layout : str
        Name of the layout.
    columns : sequence of str, optional
        Names given by the user, one a column.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    TextTable
        With ``meta`` keys ``header`` (the line of names), ``spellings`` (heads as spelled, TAB
        between them, in step with the columns), ``comment``, ``title``, ``dropped``, ``note``
        where there is something to say.

    Raises
    ------
    DataFault or Faults
        If anything is wrong with the rows.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> from gmid.sweep.readers.scan import scan_lines
    >>> source = open_bytes(b"# tt\nvgs,id\n0,1\n", name="a.csv")
    >>> shape = scan_lines(source.head_lines(), ",", suffixes="si")
    >>> table = read_shape(source, shape, layout="csv", columns=None, suffixes="si")
    >>> table.names, table.meta["comment"]
    (['vgs', 'id'], '# tt')
    """
    if shape.width > MOST_COLUMNS:
        raise DataFault(
            f"there are {shape.width} columns, more than any sweep has.",
            where=source.where(shape.first_line), hint="Check the layout of the file.",
        )  # fmt: skip
    heads, shape = settle_header(source, shape, columns)
    rows = read_rows_fast(source, shape) or read_rows_slowly(
        source, shape, heads, suffixes=suffixes
    )
    named = name_columns(heads, shape.units if columns is None else None)
    made = [Column(*pair, values) for pair, values in zip(named, rows.values, strict=True)]
    kept, dropped = drop_repeats(made)
    kept = [position for position in kept if position not in shape.void]
    dropped += [
        f"{made[position].name} (column {position + 1} holds no value)".lstrip()
        for position in sorted(shape.void)
    ]
    meta = {
        "spellings": "\t".join(heads[position] for position in kept),
        "header": "" if shape.header is None else " ".join(shape.header.cells),
        "comment": "\n".join(shape.comments),
        "title": "\n".join(shape.titles),
        "dropped": ", ".join(dropped),
        "note": "\n".join(rows.notes),
    }
    return TextTable(
        source.name, [made[position] for position in kept], first_line=rows.first_line,
        lines=rows.lines, meta={key: text for key, text in meta.items() if text}, layout=layout,
    )  # fmt: skip


def drop_repeats(columns: Sequence[Column]) -> tuple[list[int], list[str]]:
    """Find columns that repeat an earlier one of the same name on every row.

    Parameters
    ----------
    columns : sequence of Column
        In the order of the file.

    Returns
    -------
    tuple of (list of int, list of str)
        Positions of the columns to keep, and names of those left out, such as ``v-sweep (column
        3 repeats column 1)``.

    Examples
    --------
    >>> same, other = np.array([0.0, 1.0]), np.array([0.0, 2.0])
    >>> drop_repeats([Column("x", None, same), Column("x", None, same), Column("x", None, other)])
    ([0, 2], ['x (column 2 repeats column 1)'])
    """
    kept: list[int] = []
    dropped: list[str] = []
    for position, column in enumerate(columns):
        for earlier in kept:
            other = columns[earlier]
            if other.name == column.name and np.array_equal(other.values, column.values):
                dropped.append(
                    f"{column.name} (column {position + 1} repeats column {earlier + 1})"
                )
                break
        else:
            kept.append(position)
    return kept, dropped
