"""Layout ``blocks``: blocks of rows whose parameters stand in comments, and zone tables."""

from __future__ import annotations

import re

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, is_number
from gmid.sweep.readers.cells import split_cells
from gmid.sweep.readers.gather import Gather, LineReading
from gmid.sweep.readers.headers import join_units
from gmid.sweep.readers.pairs import find_pairs
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import Column, TextTable

LAYOUT = "blocks"

_COMMENT = re.compile(r"\s*[!#*%]+\s*(?P<text>.*)")
_VARIABLES = re.compile(r"\s*VARIABLES\s*=\s*(?P<text>.*)", re.IGNORECASE)
_ZONE = re.compile(r"\s*ZONE\b\s*(?P<text>.*)", re.IGNORECASE)
_TITLE = re.compile(r"\s*TITLE\s*=\s*(?P<text>.*)", re.IGNORECASE)


def recognise(head: str) -> float:
    r"""Judge whether a text holds blocks with their parameters in comments.

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
    >>> recognise("! L=0.18 um\n! VGS ID\n 0.0 1e-12\n\n! L=0.36 um\n! VGS ID\n 0.0 2e-12\n")
    0.85
    """
    if re.search(r"^\s*VARIABLES\s*=", head, re.M | re.I) and re.search(
        r"^\s*ZONE\b", head, re.M | re.I
    ):
        return 0.95
    seen = starts = wrong = 0
    after_row = True
    for line in head.split("\n")[:2000]:
        match = _COMMENT.match(line)
        if match is not None:
            pairs = find_pairs(match["text"])
            starts += bool(pairs) and after_row
            after_row = after_row and not pairs
        elif line.strip():
            words = line.replace("D", "E").split()
            wrong += not all(is_number(word) or is_missing(word) for word in words)
            seen, after_row = seen + 1, True
    if not starts or wrong * 10 >= seen:
        return 0.0
    return 0.85 if starts > 1 else 0.5


def read(source: TextSource, *, suffixes: str = "spice") -> list[TextTable]:
    r"""Read blocks of rows.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of TextTable
        One a block.  Parameters are columns of one value each, put first, with the unit that is
        spelled behind the value and none where none is; ``meta["comment"]`` holds the comments
        above the block, ``meta["step"]`` the title of a zone.

    Raises
    ------
    DataFault or Faults
        If a block has no names, or a row is at fault.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = b"! L=0.18 um\n!  VGS  ID\n 0.0D+00 1.0D-12\n 0.1D+00 2.0D-12\n"
    >>> table = read(open_bytes(text, name="a.txt"))[0]
    >>> [(column.name, column.unit, column.values.tolist()) for column in table.columns]
    [('L', 'um', [0.18, 0.18]), ('VGS', None, [0.0, 0.1]), ('ID', None, [1e-12, 2e-12])]
    """
    return _Reading(source, suffixes).run()


class _Reading(LineReading):
    """One pass over the lines."""

    def __init__(self, source: TextSource, suffixes: str) -> None:
        super().__init__(source, suffixes)
        self.comments: list[str] = []
        self.names: list[str] = []
        self.constants: dict[str, Column] = {}
        self.zone = self.title = ""
        self.is_zoned = self.named = False

    def take(self, number: int, text: str) -> None:
        comment = _COMMENT.match(text)
        words = text.split()
        if comment is not None and (words[0] == "*" or not is_missing(words[0])):
            self._comment(comment["text"])
        elif (match := _TITLE.match(text)) is not None:
            self.title = match["text"].strip().strip('"')
        elif (match := _VARIABLES.match(text)) is not None:
            self._close()
            self.names = _quoted(match["text"])
            self.is_zoned = True
        elif (match := _ZONE.match(text)) is not None:
            self._close()
            self._zone(match["text"])
        elif self.is_zoned and self.rows is None and re.fullmatch(r'\s*("[^"]*"\s*,?\s*)+', text):
            self.names += _quoted(text)
        else:
            self._row(number, text)

    def _comment(self, text: str) -> None:
        self._close()
        pairs = find_pairs(text, suffixes=self.suffixes)
        self.comments.append(text.strip())
        for pair in pairs:
            self.constants[pair.name] = pair

    def _zone(self, text: str) -> None:
        match = re.search(r'T\s*=\s*"([^"]*)"', text, re.IGNORECASE)
        self.zone = match[1] if match is not None else text
        self.constants = {c.name: c for c in find_pairs(self.zone, suffixes=self.suffixes)}

    def _row(self, number: int, text: str) -> None:
        words = _cells(text)
        if self.rows is None:
            if len(words) > 1 and not any(is_number(word) or is_missing(word) for word in words):
                self.names = words
                self.named = True
                return
            names = self._names_for(len(words))
            if not names:
                raise DataFault(
                    f"the {len(words)} columns of this block have no names above them.",
                    where=self.source.where(number),
                    hint="Write a comment line with one name for each column.",
                )
            self.rows = Gather(self.source, names, self.faults, suffixes=self.suffixes)
        self.rows.add(number, words)

    def _names_for(self, count: int) -> list[str]:
        """Pick the nearest comment that can be a header, else the names used before."""
        if self.is_zoned or self.named:
            return self.names if len(self.names) == count else []
        for comment in reversed(self.comments):
            words = join_units(_cells(comment), count)
            if len(words) == count and "=" not in comment and not any(map(is_number, words)):
                self.names = words
                return words
        return self.names if len(self.names) == count else []

    def _close(self) -> None:
        """End a block; its comments serve no other."""
        if self.rows is None:
            return
        if self.rows.lines:
            meta = {"comment": "\n".join(self.comments), "step": self.zone, "title": self.title,
                    "header": " ".join(self.rows.names)}  # fmt: skip
            table = self.rows.table(LAYOUT, meta, constants=list(self.constants.values()))
            self.tables.append(table)
        self.rows = None
        self.named = False
        self.comments, self.constants = [], {}

    def take_blank(self) -> None:
        self._close()

    def end(self) -> None:
        self._close()


def _cells(text: str) -> list[str]:
    """Split at the separator that a line bears, else at blanks."""
    separator = next((mark for mark in ";\t," if mark in text.strip()), None)
    cells = split_cells(text.strip(), separator)
    return cells[:-1] if separator and not cells[-1] else cells


def _quoted(text: str) -> list[str]:
    """Names between quotes, or between commas and blanks."""
    found = re.findall(r'"([^"]*)"', text)
    return found or [word for word in re.split(r"[,\s]+", text) if word]
