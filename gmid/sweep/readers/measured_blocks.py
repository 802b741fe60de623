"""Layout ``measured-blocks``: measured data between ``BEGIN_DB`` and ``END_DB``."""

from __future__ import annotations

import re

import numpy as np

from gmid.errors import DataFault
from gmid.sweep.numbers import is_number, parse_number
from gmid.sweep.readers.gather import Gather, LineReading
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import Column, TextTable

LAYOUT = "measured-blocks"

_VALUE = re.compile(r"\s*(?P<word>\w+_VAR)\s+(?P<name>\S+)\s+(?P<value>\S+)\s*", re.IGNORECASE)
_QUOTED = re.compile(r"\s*(?P<name>[A-Za-z]\w*)\s+\"(?P<value>[^\"]+)\"\s*")


def recognise(head: str) -> float:
    r"""Judge whether a text holds measured-data blocks.

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
    >>> recognise("BEGIN_HEADER\nEND_HEADER\nBEGIN_DB\n#vg id\n 0 1\nEND_DB\n")
    0.98
    """
    begun = re.search(r"^\s*BEGIN_(?:HEADER|DB)\b", head, re.M | re.I)
    return 0.98 if begun else 0.0


def read(source: TextSource, *, suffixes: str = "spice") -> list[TextTable]:
    r"""Read measured-data blocks.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of TextTable
        One a block.  Outer values (lines whose first word ends in ``_VAR``), constant inputs
        and quoted numbers of the header are columns of one value each, put first;
        ``meta["header"]`` is the header.

    Raises
    ------
    DataFault or Faults
        If a block is not closed, has no names, or does not have the points that the header
        announces.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = b"BEGIN_DB\n MEAS_VAR vd 0.3\n#vg id\n 0 1.2e-12\n 1 2e-6\nEND_DB\n"
    >>> table = read(open_bytes(text, name="a.txt"))[0]
    >>> [(column.name, column.values.tolist()) for column in table.columns]
    [('vd', [0.3, 0.3]), ('vg', [0.0, 1.0]), ('id', [1.2e-12, 2e-06])]
    """
    return _Reading(source, suffixes).run()


class _Reading(LineReading):
    """One pass over the lines."""

    def __init__(self, source: TextSource, suffixes: str) -> None:
        super().__init__(source, suffixes)
        self.header: list[str] = []
        self.fixed: list[Column] = []
        self.points: dict[str, tuple[int, int]] = {}
        self.place = ""
        self.begun = 0
        self.outer: list[Column] = []

    def take(self, number: int, text: str) -> None:
        text = text.split("!", 1)[0].strip()
        if not text:
            return
        word = text.split()[0].upper()
        if word in ("BEGIN_HEADER", "BEGIN_DB"):
            if self.place:
                self.faults.add(
                    number, f"{word} stands inside the {self.place} that began in line "
                    f"{self.begun}.", "A line that ends it is missing.",
                )  # fmt: skip
                self._close(number)
            self.place, self.begun = "header" if word == "BEGIN_HEADER" else "block", number
        elif word in ("END_HEADER", "END_DB"):
            if self.place == "block":
                self._close(number)
            elif not self.place:
                self.faults.add(number, f"{word} closes nothing.", "The file is damaged.")
            self.place = ""
        elif self.place == "header":
            self._header(text)
        elif self.place == "block":
            self._block(number, text)

    def _header(self, text: str) -> None:
        self.header.append(text)
        quoted = _QUOTED.fullmatch(text)
        words = text.split()
        if quoted is not None and is_number(quoted["value"], suffixes=self.suffixes):
            self.fixed.append(self._constant(quoted["name"], quoted["value"]))
        elif "CON" in words[:-1] and is_number(words[words.index("CON") + 1]):
            self.fixed.append(self._constant(words[0], words[words.index("CON") + 1]))
        elif "LIN" in words[:-5]:
            at = words.index("LIN")
            order, points = words[at + 1], words[at + 4]
            if order.isdigit() and points.isdigit():
                self.points[words[0].lower()] = int(order), int(points)

    def _constant(self, name: str, word: str) -> Column:
        return Column(name, None, np.array([parse_number(word, suffixes=self.suffixes)]))

    def _block(self, number: int, text: str) -> None:
        match = _VALUE.fullmatch(text)
        if match is not None:
            if not is_number(match["value"], suffixes=self.suffixes):
                self.faults.add(number, f"expected a number for {match['name']!r}, "
                                f"found {match['value']!r}.", "The file is damaged.")  # fmt: skip
                return
            self.outer.append(self._constant(match["name"], match["value"]))
        elif text.startswith("#"):
            self.rows = Gather(
                self.source, text.lstrip("# \t").split(), self.faults, suffixes=self.suffixes
            )
        elif self.rows is None:
            raise DataFault(
                f"expected a line of names that begins with '#', found {text[:60]!r}.",
                where=self.source.where(number), hint="The block is damaged.",
            )  # fmt: skip
        else:
            self.rows.add(number, text.split())

    def _close(self, number: int) -> None:
        rows, self.rows = self.rows, None
        outer, self.outer = self.outer, []
        if rows is None or not rows.lines:
            self.faults.add(number, f"the block that began in line {self.begun} has no rows.",
                            "Measure it again.")  # fmt: skip
            return
        order, points = self.points.get(rows.names[0].lower(), (0, 0))
        if order == 1 and points != len(rows.lines) and not self.faults.any:
            self.faults.add(
                number, f"expected {points} rows as the header says of {rows.names[0]!r}, "
                f"found {len(rows.lines)}.", "The measurement was stopped or the file cut off.",
            )  # fmt: skip
        names = {column.name for column in outer}
        fixed = [column for column in self.fixed if column.name not in names]
        self.tables.append(
            rows.table(LAYOUT, {"header": "\n".join(self.header)}, constants=[*fixed, *outer])
        )

    def end(self) -> None:
        if self.place:
            self.faults.add(self.last_line, f"the {self.place} that began in line {self.begun} "
                            "is not closed.", "The file is cut off: copy it again.")  # fmt: skip
