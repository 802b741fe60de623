"""The slow reading of rows: understands every number word, names every line at fault."""

from __future__ import annotations

from array import array
from collections.abc import Sequence
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault, GmidError, raise_faults
from gmid.sweep.numbers import is_ambiguous, is_missing, is_number, parse_number
from gmid.sweep.readers.cells import is_comment, normalise_number, split_cells
from gmid.sweep.readers.pairs import find_pairs
from gmid.sweep.readers.rows import Rows, has_cut_number
from gmid.sweep.readers.scan import Shape
from gmid.sweep.source import TextSource

MOST_FAULTS = 20
"""Faults told of one file; a reader stops after these."""


class ParametersBetween(DataFault):
    """Comments with parameters between the rows of what seemed one table."""


class FaultList:
    """Collects the faults of a file up to a bound.

    Parameters
    ----------
    source : TextSource
        The file.

    Examples
    --------
    >>> FaultList.__name__
    'FaultList'
    """

    def __init__(self, source: TextSource) -> None:
        self._source = source
        self._faults: list[GmidError] = []

    @property
    def is_full(self) -> bool:
        """Whether enough were found."""
        return len(self._faults) >= MOST_FAULTS

    @property
    def any(self) -> bool:
        """Whether there is one."""
        return bool(self._faults)

    def add(self, line: int, message: str, hint: str | None = None) -> None:
        """Add one.

        Parameters
        ----------
        line : int
            Line number.
        message : str
            What was asked and what is there.
        hint : str, optional
            What to do.
        """
        self._faults.append(DataFault(message, where=self._source.where(line), hint=hint))

    def finish(self) -> None:
        """Raise what was collected.

        Raises
        ------
        DataFault or Faults
            If there is anything.
        """
        if self.is_full:
            self._faults.append(
                DataFault(
                    f"the reading stopped after {len(self._faults)} faults.",
                    where=self._source.name,
                )
            )
        raise_faults(self._faults)


def read_rows_slowly(
    source: TextSource, shape: Shape, names: Sequence[str], *, suffixes: str
) -> Rows:
    r"""Read rows line by line.

    Parameters
    ----------
    source : TextSource
        The file.
    shape : Shape
        How the rows are written.
    names : sequence of str
        Names of the columns, for messages.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    Rows
        The values.

    Raises
    ------
    DataFault or Faults
        If a row has another number of fields, or a field is missing or no number.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> from gmid.sweep.readers.scan import scan_lines
    >>> source = open_bytes(b"vgs,id\n100m,3u\n", name="a.csv")
    >>> shape = scan_lines(source.head_lines(), ",", suffixes="si")
    >>> read_rows_slowly(source, shape, ["vgs", "id"], suffixes="si").values
    [array([0.1]), array([3.e-06])]
    """
    return _Reading(source, shape, names, suffixes).run()


class _Reading:
    """One pass over the lines."""

    def __init__(
        self, source: TextSource, shape: Shape, names: Sequence[str], suffixes: str
    ) -> None:
        self._source, self._shape, self._names, self._suffixes = source, shape, names, suffixes
        self._values: list[Any] = [
            [] if j in shape.text else array("d") for j in range(shape.width)
        ]
        self._lines = array("q")
        self._notes: list[str] = []
        self._faults = FaultList(source)
        self._last: list[str] = []

    def run(self) -> Rows:
        last_number = 0
        for number, text in self._source.lines(self._shape.first_line):
            if not text.strip() or is_comment(text, self._shape.separator):
                if "=" in text and self._lines and find_pairs(text):
                    raise self._between(number, text)
                continue
            self._last = [*self._last[-29:], text]
            last_number = number
            if not self._read_line(number, text) or self._faults.is_full:
                break
        self._check_end(last_number)
        self._faults.finish()
        lines = np.frombuffer(self._lines, dtype=np.int64).copy()
        columns: list[NDArray[Any]] = [
            np.array(column, dtype=str if isinstance(column, list) else np.float64)
            for column in self._values
        ]
        return Rows(columns, int(lines[0]), lines, self._notes)

    def _between(self, number: int, text: str) -> ParametersBetween:
        return ParametersBetween(
            f"a comment with parameters stands between the rows: {_shorten(text)}.",
            where=self._source.where(number),
            hint='Read the file in blocks: layout = "blocks".',
        )

    def _read_line(self, number: int, text: str) -> bool:
        """Take one line; False when reading on makes no sense."""
        shape = self._shape
        cells = split_cells(text, shape.separator)
        if not any(cells):
            return True
        if len(self._lines) and self._starts_table(cells):
            self._faults.add(
                number, f"a second table begins here: {_shorten(text)}.",
                "Put each table in a file of its own.",
            )  # fmt: skip
            return False
        if len(cells) == shape.fields and shape.trailing:
            if cells[-1]:
                self._faults.add(number, f"expected nothing after the last {shape.separator!r}, "
                                 f"found {cells[-1]!r}.", "Correct the row.")  # fmt: skip
                return True
            cells.pop()
        while len(cells) > shape.width and shape.separator is not None and not cells[-1]:
            cells.pop()
        if len(cells) != shape.width:
            self._count_fault(number, text, len(cells))
            return True
        for position, cell in enumerate(cells):
            self._read_cell(number, position, cell)
        self._lines.append(number)
        return True

    def _starts_table(self, cells: Sequence[str]) -> bool:
        words = [cell for cell in cells if cell]
        if len(self._shape.text) == self._shape.width or not words:
            return False
        header = self._shape.header
        if header is not None and tuple(words) == tuple(cell for cell in header.cells if cell):
            return True
        if len(words) < 2 or abs(len(words) - self._shape.width) > 3 * self._shape.width:
            return False
        return not any(
            is_missing(word) or is_number(self._plain(word), suffixes=self._suffixes)
            for word in words
        )

    def _plain(self, cell: str) -> str:
        return normalise_number(cell, decimal_comma=self._shape.decimal_comma)

    def _read_cell(self, number: int, position: int, cell: str) -> None:
        column, name = self._values[position], self._names[position]
        if isinstance(column, list):
            if not cell:
                self._faults.add(number, f"column {name!r} is empty.", "Fill the field.")
            column.append(cell)
            return
        if position in self._shape.void:
            self._read_void(number, position, cell)
            return
        try:
            word = self._plain(cell)
            value = parse_number(word, suffixes=self._suffixes)
        except DataFault as fault:
            self._word_fault(number, name, cell, fault)
            return
        if len(self._notes) < 3 and is_ambiguous(word):
            other = "si" if self._suffixes == "spice" else "spice"
            self._notes.append(
                f"{self._source.where(number)}: {cell!r} is read as {value:g} (suffixes "
                f"{self._suffixes!r}); in the dialect {other!r} it would be "
                f"{parse_number(word, suffixes=other):g}."
            )
        column.append(value)

    def _read_void(self, number: int, position: int, cell: str) -> None:
        self._values[position].append(float("nan"))
        if not is_missing(cell):
            self._faults.add(
                number, f"{self._names[position]!r} is {cell!r} here and missing on the rows "
                f"before, from line {self._lines[0] if self._lines else number} on.",
                "Simulate those points again, or take the column out.",
            )  # fmt: skip

    def _word_fault(self, number: int, name: str, cell: str, fault: DataFault) -> None:
        if is_missing(cell):
            what = f"found {cell!r}" if cell else "the field is empty"
            self._faults.add(
                number, f"the value of {name!r} is missing: {what}.",
                "Simulate this point again, or leave out the row.",
            )  # fmt: skip
        elif "," in cell and self._shape.separator in (",", None):
            self._faults.add(
                number, f"expected a number for {name!r}, found {cell!r}.",
                "Write decimal points, and no separators of thousands.",
            )  # fmt: skip
        elif "too large" in fault.message:
            self._faults.add(number, f"the value of {name!r} is beyond the range of numbers: "
                             f"{cell!r}.", "Simulate this point again.")  # fmt: skip
        else:
            self._faults.add(
                number, f"expected a number for {name!r}, found {cell!r}.",
                "Correct the word, or say how suffixes are meant (suffixes: 'spice' or 'si').",
            )  # fmt: skip

    def _count_fault(self, number: int, text: str, found: int) -> None:
        shape = self._shape
        as_in = f"as in the first row (line {self._lines[0]})" if self._lines else "on each row"
        if shape.header is not None:
            as_in = f"as in the header (line {shape.header.number})"
        hint = None
        if shape.separator == "," and shape.width < found <= 2 * shape.width:
            hint = (
                "Decimal commas cannot be told from commas that separate: write the file with "
                "';' or TAB between the columns, or with decimal points."
            )
        elif shape.separator is None and found < shape.width and _is_glued(text):
            hint = "Two numbers have run into each other: print wider columns."
        self._faults.add(number, f"expected {shape.width} columns {as_in}, found {found}.", hint)

    def _check_end(self, last_number: int) -> None:
        """Refuse a table without rows, and a last row that was cut off."""
        tail = "\n".join(self._last).encode()
        if self._faults.any:
            return
        if not self._lines:
            self._faults.add(self._shape.first_line, "there is no complete row here.",
                             "Did the simulation run to its end?")  # fmt: skip
        elif has_cut_number(tail, self._shape.separator) and self._has_open_end():
            self._faults.add(last_number, f"the file ends inside a number: "
                             f"{_shorten(self._last[-1])}.",
                             "It is cut off: copy or write it again.")  # fmt: skip

    def _has_open_end(self) -> bool:
        with self._source.stream() as stream:
            while stream.read():
                pass
            return not stream.tail.endswith((b"\n", b"\r"))


def _is_glued(text: str) -> bool:
    """Tell whether a minus sign stands directly behind a digit, outside an exponent."""
    return any(sign == "-" and before.isdigit() for before, sign in pairwise(text))


def _shorten(text: str) -> str:
    text = text.strip()
    return repr(text if len(text) <= 60 else f"{text[:57]}...")
