"""Parameters written as ``name = value unit`` in comments, titles and step lines."""

from __future__ import annotations

import re

import numpy as np

from gmid.sweep.numbers import is_number, parse_number
from gmid.sweep.readers.headers import is_unit, strip_brackets
from gmid.sweep.texttable import Column

_PAIR = re.compile(
    r"(?P<name>[^\s=,;\"']{1,80})\s*=\s*(?P<value>\"[^\"]*\"|'[^']*'|[^\s,;]+)"
    r"(?=(?:[ \t]+(?P<unit>[^\s=,;]{1,20})(?=[\s,;]|$)(?!\s*=))?)"
)
_LONGEST_TEXT = 4000


def find_pairs(text: str, *, suffixes: str = "spice") -> list[Column]:
    """Find ``name = value unit`` in a comment or a title.

    Parameters
    ----------
    text : str
        One or several lines.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of Column
        One value each, a number with the unit that is spelled behind it, or a word.

    Examples
    --------
    >>> found = find_pairs("corner=tt T=27 C  L=0.18 um Vdd=300m (Run: 1/6)")
    >>> [(column.name, column.unit, column.values[0].item()) for column in found]
    [('corner', None, 'tt'), ('T', 'C', 27.0), ('L', 'um', 0.18), ('Vdd', None, 0.3)]
    """
    found: dict[str, Column] = {}
    for match in _PAIR.finditer(text[:_LONGEST_TEXT]):
        word = match["value"].strip("\"'")
        unit = strip_brackets(match["unit"]) if match["unit"] else None
        if unit is not None and not is_unit(unit):
            unit = None
        if is_number(word, suffixes=suffixes):
            value = Column(match["name"], unit, np.array([parse_number(word, suffixes=suffixes)]))
        elif word:
            value = Column(match["name"], None, np.array([word]))
        else:
            continue
        found.setdefault(match["name"], value)
    return list(found.values())
