"""Layout ``stepped``: one header, then runs that begin with the list of their step parameters."""

from __future__ import annotations

import cmath
import math
import re

from gmid.errors import DataFault
from gmid.sweep.numbers import parse_number
from gmid.sweep.readers.cells import split_cells
from gmid.sweep.readers.gather import Gather, LineReading
from gmid.sweep.readers.pairs import find_pairs
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "stepped"

_STEP = re.compile(r"\s*Step Information:(?P<text>.*)", re.IGNORECASE)
_RUN = re.compile(r"\(Run:\s*(\d+)\s*/\s*(\d+)\)", re.IGNORECASE)
_POLAR = re.compile(
    r"\((?P<size>[^,]+?)(?P<db>dB)?\s*,\s*(?P<angle>[^,]+?)(?:deg|\N{DEGREE SIGN})\)", re.IGNORECASE
)


def recognise(head: str) -> float:
    r"""Judge whether a text is a stepped export.

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
    >>> recognise("vgs\tid\nStep Information: L=180n  (Run: 1/2)\n0\t1e-12\n")
    0.97
    """
    return 0.97 if re.search(r"^\s*Step Information:", head, re.M | re.I) else 0.0


def read(source: TextSource, *, suffixes: str = "spice") -> list[TextTable]:
    r"""Read a stepped export, one table a run.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of TextTable
        The step parameters are columns of one value each, put first; ``meta["step"]`` is the
        line that lists them.

    Raises
    ------
    DataFault or Faults
        If runs are missing or doubled, the scale begins anew inside a run, or a row is at fault.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = b"vgs\tid\nStep Information: L=180n (Run: 1/1)\n0\t1e-12\n0.1\t2e-12\n"
    >>> table = read(open_bytes(text, name="a.txt"))[0]
    >>> [(column.name, column.values.tolist()) for column in table.columns]
    [('L', [1.8e-07, 1.8e-07]), ('vgs', [0.0, 0.1]), ('id', [1e-12, 2e-12])]
    """
    return _Reading(source, suffixes).run()


class _Reading(LineReading):
    """One pass over the lines."""

    def __init__(self, source: TextSource, suffixes: str) -> None:
        super().__init__(source, suffixes)
        self.names: list[str] = []
        self.separator: str | None = None
        self.step = ""
        self.runs = (0, 0)

    def take(self, number: int, text: str) -> None:
        match = _STEP.match(text)
        if match is not None:
            self._close()
            self._begin(number, match["text"].strip())
        elif self.rows is not None:
            self._row(number, text)
        elif not self.names:
            self.separator = "\t" if "\t" in text.strip() else None
            self.names = [cell for cell in split_cells(text, self.separator) if cell]
        else:
            raise DataFault(
                f"expected 'Step Information:' before the first row, found {text.strip()[:60]!r}.",
                where=self.source.where(number), hint="Is it another layout?",
            )  # fmt: skip

    def _begin(self, number: int, text: str) -> None:
        if not self.names:
            raise DataFault(
                "there is no line of names before the first run.",
                where=self.source.where(number), hint="Export the file again, with its header.",
            )  # fmt: skip
        self.step = text
        self.rows = Gather(
            self.source, self.names, self.faults, suffixes=self.suffixes, is_complex=True
        )
        counter = _RUN.search(text)
        if counter is None:
            return
        run, total = int(counter[1]), int(counter[2])
        if run != self.runs[0] + 1:
            self.faults.add(number, f"expected run {self.runs[0] + 1} of {total}, found run {run}.",
                            "Runs are missing or doubled: export the file again.")  # fmt: skip
        self.runs = run, total

    def _row(self, number: int, text: str) -> None:
        assert self.rows is not None
        cells = split_cells(text, self.separator)
        while len(cells) > len(self.names) and not cells[-1]:
            cells.pop()
        self.rows.add(number, [_rectangular(cell, self.suffixes) for cell in cells])

    def _close(self) -> None:
        """End a run: its scale must not begin anew inside it."""
        if self.rows is None:
            return
        if not self.rows.lines:
            self.faults.add(self.last_line, f"the run {self.step!r} has no rows.",
                            "Did the simulation run to its end?")  # fmt: skip
            return
        table = self.rows.table(
            LAYOUT, {"header": " ".join(self.names), "step": self.step},
            constants=find_pairs(_RUN.sub("", self.step), suffixes=self.suffixes),
        )  # fmt: skip
        scale = table.columns[-len(self.names)].values.real
        steps = scale[1:] - scale[:-1]
        if steps.size and (steps[0] * steps <= 0).any():
            row = int((steps[0] * steps <= 0).argmax()) + 1
            self.faults.add(
                table.line_of(row), f"the scale {self.names[0]!r} goes from {scale[row - 1]:g} to "
                f"{scale[row]:g} inside a run.", "A line with the step parameters is missing here.",
            )  # fmt: skip
        self.tables.append(table)

    def end(self) -> None:
        self._close()
        if not self.faults.is_full and self.runs[0] < self.runs[1]:
            self.faults.add(self.last_line, f"the file ends after run {self.runs[0]} of "
                            f"{self.runs[1]}.", "It is cut off: export it again.")  # fmt: skip


def _rectangular(cell: str, suffixes: str) -> str:
    """Write a complex cell as ``re,im``."""
    if not cell.startswith("("):
        return cell
    match = _POLAR.fullmatch(cell)
    if match is None:
        return cell.strip("()")
    try:
        size = parse_number(match["size"], suffixes=suffixes)
        angle = math.radians(parse_number(match["angle"], suffixes=suffixes))
    except DataFault:
        return cell.strip("()")
    try:
        value = cmath.rect(10 ** (size / 20) if match["db"] else size, angle)
    except OverflowError:
        return "inf"
    return f"{value.real!r},{value.imag!r}"
