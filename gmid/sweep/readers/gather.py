"""Gathers rows of number words into tables, for the readers that go line by line."""

from __future__ import annotations

from abc import ABC, abstractmethod
from array import array
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, parse_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.headers import split_head
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import Column, TextTable

MOST_COLUMNS = 4096
"""Columns beyond which a text is no sweep."""


class Gather:
    """Rows of one table while they are read.

    Parameters
    ----------
    source : TextSource
        The file.
    names : sequence of str
        Heads of the columns, units included.
    faults : FaultList
        Where what is wrong is kept.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.
    is_complex : bool
        Whether cells may be ``re,im``.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> source = open_bytes(b"0 1u", name="a.txt")
    >>> rows = Gather(source, ["vgs", "id"], FaultList(source))
    >>> rows.add(1, ["0", "1u"])
    >>> rows.table("columns").column("id").values.tolist()
    [1e-06]
    """

    def __init__(
        self, source: TextSource, names: Sequence[str], faults: FaultList, *,
        suffixes: str = "spice", is_complex: bool = False,
    ) -> None:  # fmt: skip
        self.source, self.names, self.faults = source, list(names), faults
        self._suffixes = suffixes
        self._real = [array("d") for _ in names]
        self._is_complex = is_complex
        self._imaginary: list[array[float]] | None = None
        self.lines = array("q")
        if len(self.names) > MOST_COLUMNS:
            raise DataFault(
                f"there are {len(self.names)} columns, more than any sweep has.",
                where=source.name, hint="Check the layout of the file.",
            )  # fmt: skip

    def add(self, number: int, cells: Sequence[str]) -> None:
        """Add one row.

        Parameters
        ----------
        number : int
            Its line.
        cells : sequence of str
            As many words as there are names, else a fault is kept.
        """
        if len(cells) != len(self.names):
            self.faults.add(
                number, f"expected {len(self.names)} values as there are names, "
                f"found {len(cells)}.", "The file is damaged or cut off: write it again.",
            )  # fmt: skip
            return
        self.lines.append(number)
        try:
            values: list[complex] = list(map(float, cells))
        except ValueError:
            values = []
        if not values or any(value - value != 0 for value in values):
            values = [self._cell(number, j, cell) for j, cell in enumerate(cells)]
        if self._is_complex and not self._imaginary and any(value.imag for value in values):
            before = bytes(8 * len(self._real[0]))
            self._imaginary = [array("d", before) for _ in self.names]
        for position, value in enumerate(values):
            self._real[position].append(value.real)
            if self._imaginary is not None:
                self._imaginary[position].append(value.imag)

    def extend(self, numbers: Iterable[int], columns: Sequence[NDArray[np.float64]]) -> None:
        """Add rows that are known to be sound.

        Parameters
        ----------
        numbers : iterable of int
            Their lines.
        columns : sequence of ndarray, shape (n_rows,)
            Real values for each name.
        """
        self.lines.extend(numbers)
        for target, values in zip(self._real, columns, strict=True):
            target.frombytes(np.ascontiguousarray(values).view(np.uint8).data)
        if self._imaginary is not None:
            for other in self._imaginary:
                other.frombytes(bytes(8 * (len(self.lines) - len(other))))

    def _cell(self, number: int, position: int, cell: str) -> complex:
        if not self._is_complex:
            return self._read(number, position, cell)
        real, comma, imaginary = cell.strip("()").partition(",")
        value = complex(self._read(number, position, real))
        return value + 1j * self._read(number, position, imaginary) if comma else value

    def _read(self, number: int, position: int, word: str) -> float:
        try:
            return parse_number(word, suffixes=self._suffixes)
        except DataFault:
            name, missing = self.names[position], is_missing(word)
            what = "the value of" if missing else "expected a number for"
            found = " is missing: found" if missing else ", found"
            hint = "Simulate this point again." if missing else "The file is damaged."
            self.faults.add(number, f"{what} {name!r}{found} {word!r}.", hint)
            return float("nan")

    def table(
        self, layout: str, meta: Mapping[str, str] | None = None, *,
        constants: Sequence[Column] = (), units: Mapping[str, str | None] | None = None,
    ) -> TextTable:  # fmt: skip
        """Make the table; no row can be added after that.

        Parameters
        ----------
        layout : str
            Name of the layout.
        meta : mapping of str to str, optional
            What the text says besides; empty entries are left out.
        constants : sequence of Column
            Of one value each, to be spread over the rows and put first.
        units : mapping of str to str or None, optional
            Units by name; taken from the heads when not given.

        Returns
        -------
        TextTable
            With the rows so far.
        """
        columns: list[Column] = []
        size = len(self.lines)
        own = {name if units is not None else split_head(name)[0] for name in self.names}
        for constant in constants:
            if constant.name not in own:
                spread = np.broadcast_to(constant.values, (size,))
                columns.append(Column(constant.name, constant.unit, spread))
        for position, head in enumerate(self.names):
            name, unit = (head, units.get(head)) if units is not None else split_head(head)
            values: Any = np.frombuffer(self._real[position]) if size else np.empty(0)
            if self._imaginary is not None and any(self._imaginary[position]):
                values = values + 1j * np.array(self._imaginary[position])
            columns.append(Column(name, unit, values))
        lines = np.array(self.lines, dtype=np.int64)
        return TextTable(
            self.source.name, columns, first_line=int(lines[0]) if size else 1, lines=lines,
            meta={key: text for key, text in (meta or {}).items() if text}, layout=layout,
        )  # fmt: skip


class LineReading(ABC):
    """One pass over the lines of a file that holds several tables.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Attributes
    ----------
    faults : FaultList
        What is wrong; the pass ends when it is full.
    tables : list of TextTable
        Those that are closed.
    rows : Gather or None
        The table being read.
    last_line : int
        Line of the text that is not blank and was taken last.
    """

    def __init__(self, source: TextSource, suffixes: str) -> None:
        self.source, self.suffixes = source, suffixes
        self.faults = FaultList(source)
        self.tables: list[TextTable] = []
        self.rows: Gather | None = None
        self.last_line = 0

    def run(self) -> list[TextTable]:
        """Read the file.

        Returns
        -------
        list of TextTable
            At least one.

        Raises
        ------
        DataFault or Faults
            If anything is wrong.
        """
        for number, text in self.source.lines():
            if text.strip():
                self.last_line = number
                self.take(number, text)
            else:
                self.take_blank()
            if self.faults.is_full:
                break
        self.end()
        self.faults.finish()
        return check_tables(self.source, self.tables)

    @abstractmethod
    def take(self, number: int, text: str) -> None:
        """Take one line that is not blank.

        Parameters
        ----------
        number : int
            Its number.
        text : str
            The line.
        """

    def take_blank(self) -> None:
        """Take a blank line."""
        return

    @abstractmethod
    def end(self) -> None:
        """Close the last table, and keep the faults of a file that ends too early."""


def check_tables(source: TextSource, tables: Sequence[TextTable]) -> list[TextTable]:
    """Give the tables that have rows.

    Parameters
    ----------
    source : TextSource
        For messages.
    tables : sequence of TextTable
        As read.

    Returns
    -------
    list of TextTable
        At least one.

    Raises
    ------
    DataFault
        If there is no row at all.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> check_tables(open_bytes(b"x", name="a.txt"), [])
    Traceback (most recent call last):
    ...
    gmid.errors.DataFault: a.txt: there are no rows. Did the simulation run to its end?
    """
    filled = [table for table in tables if table.rows]
    if not filled:
        raise DataFault(
            "there are no rows.", where=source.name, hint="Did the simulation run to its end?"
        )
    return filled
