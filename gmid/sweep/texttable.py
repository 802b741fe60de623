"""What every reader yields: one table of columns with names, unit hints and line numbers.

A reader knows nothing of transistors; it only says which columns a text holds, what was
written about them, and where each row stands.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import UnknownName, advise


@dataclass(frozen=True, eq=False)
class Column:
    """One column of a text table.

    Parameters
    ----------
    name : str
        As the file spells it, without the unit.
    unit : str or None
        Unit as the file spells it (``uA``), or None when it does not say.  Values are still in
        that unit.
    values : ndarray, shape (n_rows,)
        float64, complex128, or str for columns of words.

    Examples
    --------
    >>> Column("id", "uA", np.array([1.0, 2.0])).values.size
    2
    """

    name: str
    unit: str | None
    values: NDArray[Any]


@dataclass(frozen=True, eq=False)
class TextTable:
    """One table as it stands in a text file.

    Parameters
    ----------
    source : str
        The file, as the user named it.
    columns : sequence of Column
        In the order of the file.  Names may repeat; all have the same number of rows.
    first_line : int
        Line of the first row (1 for the first line of the file).
    lines_per_row : int
        How many lines a row takes (1 for columns, several for raw files), blank ones included.
    lines : ndarray of int, shape (n_rows,), optional
        Line of each row, where comments or blank lines make the spacing uneven.
    meta : mapping of str to str
        What the text says besides: ``title``, ``header``, ``comment``, ``step``, ``plot``.
    layout : str
        Name of the layout it was read as.
    counts_points : bool
        Whether "lines" are numbers of points, the file being binary.

    Examples
    --------
    >>> table = TextTable("a.csv", [Column("vgs", "V", np.array([0.0, 0.1]))], first_line=2)
    >>> table.where(1)
    'a.csv:3'
    """

    source: str
    columns: Sequence[Column]
    first_line: int = 1
    lines_per_row: int = 1
    lines: NDArray[np.int64] | None = None
    meta: Mapping[str, str] = field(default_factory=dict)
    layout: str = ""
    counts_points: bool = False

    @property
    def rows(self) -> int:
        """Number of rows."""
        return int(self.columns[0].values.size) if self.columns else 0

    @property
    def names(self) -> list[str]:
        """Names of the columns in order."""
        return [column.name for column in self.columns]

    def line_of(self, row: int) -> int:
        """Line of the text on which a row begins.

        Parameters
        ----------
        row : int
            Row index, from 0.

        Returns
        -------
        int
            Line number, from 1.

        Examples
        --------
        >>> TextTable("a.raw", [], first_line=10, lines_per_row=4).line_of(2)
        18
        """
        if self.lines is not None:
            return int(self.lines[row])
        return self.first_line + row * self.lines_per_row

    def where(self, row: int) -> str:
        """Place of a row as ``file:line``.

        Parameters
        ----------
        row : int
            Row index, from 0.

        Returns
        -------
        str
            For the `where` of an error.

        Examples
        --------
        >>> TextTable("a.csv", [], first_line=2).where(0)
        'a.csv:2'
        """
        if self.counts_points:
            return f"{self.source}: point {self.line_of(row)}"
        return f"{self.source}:{self.line_of(row)}"

    def column(self, name: str) -> Column:
        """Find a column by name, case-blind where that is unambiguous.

        Parameters
        ----------
        name : str
            Name as in the file.

        Returns
        -------
        Column
            The first exact match, else the first case-blind one.

        Raises
        ------
        UnknownName
            If there is none; the nearest name is named.

        Examples
        --------
        >>> TextTable("a.csv", [Column("ID", "A", np.zeros(1))]).column("id").name
        'ID'
        """
        for column in self.columns:
            if column.name == name:
                return column
        for column in self.columns:
            if column.name.lower() == name.lower():
                return column
        raise UnknownName(
            f"there is no column {name!r}.", where=self.source, hint=advise(name, self.names)
        )
