"""Lines cut into cells: quotes, comments, decimal commas."""

from __future__ import annotations

import csv
import re

from gmid.sweep.numbers import is_missing, is_number

_WORDS = re.compile(r'"([^"]*)"|(\S+)')


def split_cells(text: str, separator: str | None) -> list[str]:
    """Split one line into stripped cells.

    Parameters
    ----------
    text : str
        The line.
    separator : str or None
        None for blanks; quotes are honoured otherwise.

    Returns
    -------
    list of str
        The cells.

    Examples
    --------
    >>> split_cells('"Id, A", 2', ",")
    ['Id, A', '2']
    """
    if separator is None:
        if '"' in text:
            return [(quoted or word).strip() for quoted, word in _WORDS.findall(text)]
        return text.split()
    if '"' in text:
        try:
            cells = next(csv.reader([text.replace("\r", " ")], delimiter=separator))
        except csv.Error:
            cells = text.split(separator)
        return [cell.strip() for cell in cells]
    return [cell.strip() for cell in text.split(separator)]


def is_comment(text: str, separator: str | None) -> bool:
    """Tell whether a line is a comment.

    Parameters
    ----------
    text : str
        The line.
    separator : str or None
        Separator of the table: with ``;`` a line that starts with it may be a row.

    Returns
    -------
    bool
        True for lines that start with ``# * ! ; %``; a row whose first number overflowed into
        asterisks is none.

    Examples
    --------
    >>> is_comment("# corner=tt", ","), is_comment("*** 1.0 2.0", None)
    (True, False)
    """
    stripped = text.lstrip()
    sign = stripped[:1]
    if sign == "*":
        cells = split_cells(stripped, separator)
        return len(cells) == 1 or cells[0] == "*" or not is_missing(cells[0])
    if sign == ";" and separator == ";":
        return not any(is_number(cell, suffixes="si") for cell in split_cells(stripped, ";"))
    return sign != "" and sign in "#!;%"


def normalise_number(word: str, *, decimal_comma: bool) -> str:
    """Write a decimal comma as a point.

    Parameters
    ----------
    word : str
        Number word.
    decimal_comma : bool
        Whether commas are decimal; points are then thousands separators and spoil the word.

    Returns
    -------
    str
        The word.

    Examples
    --------
    >>> normalise_number("1,5", decimal_comma=True), normalise_number("1.234,5", decimal_comma=True)
    ('1.5', '1.234,5')
    """
    if decimal_comma and "." in word:
        return word if "," in word else f"{word} (a point where commas are decimal)"
    return word.replace(",", ".") if decimal_comma else word
