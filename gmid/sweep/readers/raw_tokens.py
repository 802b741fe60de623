"""Values of SPICE3 raw plots token by token, for lines that are few or not regular."""

from __future__ import annotations

from array import array
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, parse_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.raw_header import Plot
from gmid.sweep.readers.rows import has_cut_number
from gmid.sweep.source import TextSource, decode_line


@dataclass(frozen=True, eq=False)
class Body:
    """The values of a plot.

    Parameters
    ----------
    columns : list of ndarray, shape (n_points,)
        float64 or complex128, one a variable.
    lines : ndarray of int, shape (n_points,)
        Line on which each point begins.
    notes : list of str
        What is worth telling.
    """

    columns: list[NDArray[Any]]
    lines: NDArray[np.int64]
    notes: list[str] = field(default_factory=list)

    @property
    def points(self) -> int:
        """Number of points."""
        return int(self.lines.size)


def read_tokens(
    source: TextSource, plot: Plot, lines: Iterator[tuple[int, str]], *, suffixes: str
) -> Body:
    r"""Read the values of a plot, and name every line at fault.

    Parameters
    ----------
    source : TextSource
        For messages.
    plot : Plot
        The header.
    lines : iterator of tuple of (int, str)
        Numbers and texts of the lines up to the next plot.
    suffixes : {'spice', 'si'}
        Dialect of suffixes, should there be any.

    Returns
    -------
    Body
        The values.

    Raises
    ------
    DataFault or Faults
        If a value is missing or no number, or a point is incomplete.

    Examples
    --------
    >>> from gmid.sweep.readers.raw_header import Variable
    >>> from gmid.sweep.source import open_bytes
    >>> source = open_bytes(b" 0\t0.5\n", name="a.raw")
    >>> variable = Variable("v(d)", "V", None, 1)
    >>> plot = Plot(1, {}, [variable], False, False, None, 0, 0)
    >>> read_tokens(source, plot, source.lines(), suffixes="spice").columns
    [array([0.5])]
    """
    return _Tokens(source, plot, suffixes).run(lines)


class _Tokens:
    """The slow reading of one plot, token by token."""

    def __init__(self, source: TextSource, plot: Plot, suffixes: str) -> None:
        self._source, self._plot, self._suffixes = source, plot, suffixes
        self._values: list[array[float]] = [array("d") for _ in plot.variables]
        self._imaginary: list[array[float]] = [array("d") for _ in plot.variables]
        self._lines = array("q")
        self._faults = FaultList(source)
        self._expected: list[int] = []
        self._next = 0
        self._last_line = plot.values_line

    def run(self, lines: Iterator[tuple[int, str]]) -> Body:
        """Read the lines of the plot."""
        tail: list[str] = []
        for number, text in lines:
            if self._faults.is_full:
                break
            if text.strip():
                tail = [*tail[-29:], text]
                self._last_line = number
                self._read_line(number, text)
        if self._expected:
            name = self._plot.variables[self._expected[0]].name
            self._faults.add(
                self._last_line, f"the last point is incomplete: {len(self._expected)} of its "
                f"{len(self._plot.variables)} values are missing, from {name!r} on.",
                "The file is cut off: copy or write it again.",
            )  # fmt: skip
        elif not self._faults.any and self._is_cut(tail):
            self._faults.add(self._last_line, f"the file ends inside a number: {tail[-1]!r}.",
                             "It is cut off: copy or write it again.")  # fmt: skip
        self._faults.finish()
        return Body(self._columns(), np.array(self._lines, dtype=np.int64))

    def _read_line(self, number: int, text: str) -> None:
        words = text.replace(", ", ",").split()
        if not self._expected and text.startswith("\t"):
            self._too_many(number, words[0])
            return
        if not self._expected or (text[:1] != "\t" and len(words) > 1 and words[0].isdigit()):
            self._begin_point(number, words.pop(0))
        for word in words:
            if not self._expected:
                self._too_many(number, word)
                return
            self._read_word(number, self._expected.pop(0), word)

    def _too_many(self, number: int, word: str) -> None:
        self._faults.add(
            number, f"expected the number of the next point, found {word!r}: point "
            f"{self._next - 1} has too many values.", "The file is damaged: write it again.",
        )  # fmt: skip

    def _begin_point(self, number: int, word: str) -> None:
        """Check the index of a point and list the variables that it holds."""
        if self._expected:
            name = self._plot.variables[self._expected[0]].name
            self._faults.add(
                number, f"a new point begins while point {self._next - 1} still lacks "
                f"{name!r}.", "The file is damaged: write it again.",
            )  # fmt: skip
        index = self._next
        if word != str(index):
            self._faults.add(
                number, f"expected point {index}, found {word!r}.",
                "Points are missing or doubled: write the file again.",
            )  # fmt: skip
        self._next = int(word) + 1 if word.isdigit() and len(word) < 10 else index + 1
        self._lines.append(number)
        self._expected = [
            position for position, variable in enumerate(self._plot.variables)
            if not self._plot.is_unpadded or variable.size is None or index < variable.size
        ]  # fmt: skip

    def _read_word(self, number: int, position: int, word: str) -> None:
        parts = word.strip("()").split(",") if self._plot.is_complex else [word]
        name = self._plot.variables[position].name
        if len(parts) != (2 if self._plot.is_complex else 1):
            self._faults.add(number, f"expected 're,im' for {name!r}, found {word!r}.",
                             "The file is damaged: write it again.")  # fmt: skip
            return
        for target, part in zip((self._values, self._imaginary), parts, strict=False):
            try:
                target[position].append(parse_number(part, suffixes=self._suffixes))
            except DataFault:
                what = "the value is missing" if is_missing(part) else "expected a number"
                self._faults.add(number, f"{what} for {name!r}: found {part!r}.",
                                 "Simulate this point again.")  # fmt: skip

    def _is_cut(self, tail: list[str]) -> bool:
        """Tell whether the file ends inside a number of this plot."""
        if not has_cut_number("\n".join(tail).encode(), None):
            return False
        with self._source.stream() as stream:
            while stream.read():
                pass
            return decode_line(stream.tail.rsplit(b"\n", 1)[-1]) == tail[-1]

    def _columns(self) -> list[NDArray[Any]]:
        """Columns of full length; constants keep their one value for all points."""
        columns: list[NDArray[Any]] = []
        for real, imaginary in zip(self._values, self._imaginary, strict=True):
            values: NDArray[Any] = np.array(real)
            if self._plot.is_complex:
                values = values + 1j * np.array(imaginary)
            columns.append(values)
        return columns
