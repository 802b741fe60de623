"""Records that repeat line by line, read many at a time.

A listing prints the same lines for every bias point, with other numbers in them.  One record
that was read with care serves as the model of those after it: what fits it is taken by columns,
and reading stops before the first record that does not fit, which is again read with care.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.sweep.numbers import parse_number

_POWERS = {"m": "e-3", "u": "e-6", "n": "e-9", "p": "e-12", "f": "e-15", "a": "e-18"}


@dataclass(frozen=True)
class ModelLine:
    """One line of the model record.

    Parameters
    ----------
    text : str
        As it stands.
    names : tuple of str
        Of the values that it holds, in their order; none for a line of words.
    prefix : str
        What stands before the first value.
    unit : str
        Word after the value, where one value is followed by one.
    begins : bool
        Whether the pattern of the start of a record is found in it.
    """

    text: str
    names: tuple[str, ...] = ()
    prefix: str = ""
    unit: str = ""
    begins: bool = False


def model_line(text: str, found: Sequence[tuple[str, str]], *, begins: bool) -> ModelLine:
    """Make the model of a line.

    Parameters
    ----------
    text : str
        The line.
    found : sequence of (str, str)
        Names and number words read from it, in the order of the words.
    begins : bool, keyword-only
        Whether the pattern of the start of a record is found in it.

    Returns
    -------
    ModelLine
        With what is to be the same in every record.

    Examples
    --------
    >>> model_line(" vgs = 0.5 V", [("vgs", "0.5")], begins=False).unit
    'V'
    """
    if not found:
        return ModelLine(text, begins=begins)
    cut = text.find("=") + 1
    if not cut:
        cut = len(text) - len(text.lstrip()) + len(text.split()[0]) + 1
    after = text[cut:].split()[len(found) :]
    names = tuple(name for name, _ in found)
    return ModelLine(text, names, text[:cut], after[0] if after else "", begins)


class Model:
    """The lines of one record.

    Parameters
    ----------
    lines : sequence of ModelLine
        From the first line with a value to the one before the next record's.
    is_words : callable
        Tells whether a line that differs from the model's is one of words as well.
    start : pattern, optional
        Of the line that begins a record.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Examples
    --------
    >>> lines = [model_line("vgs = 0.5", [("vgs", "0.5")], begins=False)]
    >>> model = Model(lines, lambda text: False)
    >>> model.read(["vgs = 0.6", "vgs = 0.7", "end"], 0)[0].tolist()
    [0.6, 0.7]
    """

    def __init__(
        self, lines: Sequence[ModelLine], is_words: Callable[[str], bool], *,
        start: re.Pattern[str] | None = None, suffixes: str = "spice",
    ) -> None:  # fmt: skip
        self._lines, self._is_words = tuple(lines), is_words
        self._start, self._suffixes = start, suffixes
        self.names = [name for line in lines for name in line.names]

    @property
    def size(self) -> int:
        """Lines of a record."""
        return len(self._lines)

    @property
    def has_words(self) -> bool:
        """Whether a line of it holds words alone."""
        return any(line.text.strip() and not line.names for line in self._lines)

    def read(self, lines: Sequence[str], first: int) -> list[NDArray[np.float64]]:
        """Read as many records as fit the model.

        Parameters
        ----------
        lines : sequence of str
            Of the text.
        first : int
            Place of the first line of the first record.

        Returns
        -------
        list of ndarray, shape (n_records,)
            One for each of `names`.
        """
        count = (len(lines) - first) // self.size
        columns: list[NDArray[np.float64]] = []
        for place, model in enumerate(self._lines):
            same = lines[first + place : first + count * self.size : self.size]
            if model.names:
                values = self._read_line(model, same)
                count = min(count, values.shape[0])
                columns.extend(values.T)
            else:
                count = self._count_words(model, same)
            if not count:
                break
        columns += [np.empty(0)] * (len(self.names) - len(columns))
        return [column[:count] for column in columns]

    def _read_line(self, model: ModelLine, lines: Sequence[str]) -> NDArray[np.float64]:
        """Read one line of every record, as far as they fit."""
        cut, width = len(model.prefix), len(model.names)
        fits = [line.startswith(model.prefix) for line in lines]
        if self._start is not None:
            begun = [self._start.search(line) is not None for line in lines]
            fits = [fit and now == model.begins for fit, now in zip(fits, begun, strict=True)]
        lines = lines[: fits.index(False)] if not all(fits) else lines
        words = [line[cut:] for line in lines]
        if width > 1 or model.unit:
            rows = [word.split() for word in words]
            full = width + bool(model.unit)
            odd = (i for i, row in enumerate(rows)
                   if len(row) != full or (model.unit and row[-1] != model.unit))  # fmt: skip
            words = [word for row in rows[: next(odd, len(rows))] for word in row[:width]]
        values = self._read_words(words)
        return values[: values.size // width * width].reshape(-1, width)

    def _read_words(self, words: list[str]) -> NDArray[np.float64]:
        """Read numbers up to the first word that is none."""
        try:
            if "_" in "".join(words):
                raise ValueError("Python alone reads 1_0 as a number")
            values = np.array(_read_plain(words), dtype=np.float64)
        except ValueError:
            found = []
            for word in words:
                try:
                    found.append(parse_number(word.strip(), suffixes=self._suffixes))
                except DataFault:
                    break
            values = np.array(found, dtype=np.float64)
        strange = np.flatnonzero(~np.isfinite(values))
        return values[: strange[0]] if strange.size else values

    def _count_words(self, model: ModelLine, lines: Sequence[str]) -> int:
        """Count the lines that are words as the model's is."""
        for place, line in enumerate(lines):
            if line == model.text:
                continue
            begins = self._start is not None and self._start.search(line) is not None
            alike = begins == model.begins and _kind(line) == _kind(model.text)
            if not alike or not self._is_words(line) or not self._is_words(model.text):
                return place
        return len(lines)


def _read_plain(words: list[str]) -> list[float]:
    """Read numbers with at most one letter behind them that both dialects read alike."""
    try:
        return list(map(float, words))
    except ValueError:
        stripped = [word.strip() for word in words]
        return [
            float(word[:-1] + _POWERS[word[-1:]]) if word[-1:] in _POWERS else float(word)
            for word in stripped
        ]


def _kind(text: str) -> int:
    """Tell a blank line from a rule, and that from words."""
    stripped = text.strip()
    return bool(stripped) + bool(stripped.strip("-="))
