"""Number words as simulators print them: plain, Fortran, and with engineering suffixes.

Two dialects of suffixes exist.  In ``spice`` letters are case-blind (``M`` is milli, ``MEG``
mega, ``F`` femto, ``mil`` a thousandth of an inch) and whatever follows is ignored as a unit;
in ``si`` they are case-sensitive prefixes of a known unit (``M`` mega, ``F`` farad).  A suffix
is applied by writing its power into the digits, so that ``415.99f`` is the nearest double.
"""

from __future__ import annotations

import re
from decimal import Decimal

from gmid.errors import DataFault, UsageFault

DIALECTS = ("spice", "si")
"""Names of the suffix dialects."""

_PLAIN = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eEdD][+-]?\d+)?", re.ASCII)
_BARE_EXPONENT = re.compile(r"([+-]?(?:\d+\.\d*|\.\d+))([+-]\d{3})", re.ASCII)
_NON_NUMBER = re.compile(
    r"[+-]?(?:nan(?:\(\w*\))?|inf(?:inity)?|1\.?#\w+|n/?a|null|none|failed|\*+|-{2,}|\?+)",
    re.IGNORECASE,
)
_UNIT_LETTERS = re.compile(r"[A-Za-z%\u00b5\u03bc\u03a9\u2126\u00b0]*")
_SPICE = {
    "t": 12, "g": 9, "meg": 6, "x": 6, "k": 3, "m": -3, "u": -6, "\u00b5": -6, "\u03bc": -6,
    "n": -9, "p": -12, "f": -15, "a": -18,
}  # fmt: skip
_SI = {
    "T": 12, "G": 9, "meg": 6, "Meg": 6, "MEG": 6, "M": 6, "k": 3, "": 0, "m": -3, "u": -6,
    "\u00b5": -6, "\u03bc": -6, "n": -9, "p": -12, "f": -15, "a": -18,
}  # fmt: skip
_SI_UNITS = ("V", "A", "S", "F", "Hz", "m", "s", "ohm", "Ohm", "\u03a9", "\u2126", "W", "C", "")


def parse_number(word: str, *, suffixes: str = "spice") -> float:
    """Read one number word.

    Parameters
    ----------
    word : str
        Such as ``1.2E-6``, ``1.2D-06``, ``1.23-105``, ``10.3u``, ``4.2e+04meg``, ``18fF``.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes.

    Returns
    -------
    float
        The double nearest to what is written.

    Raises
    ------
    DataFault
        If the word is no number, is a mark for a missing value, or is beyond the range.
    UsageFault
        If the dialect is not known.

    Examples
    --------
    >>> parse_number("1.2D-06"), parse_number("1.23-105"), parse_number("415.99f")
    (1.2e-06, 1.23e-105, 4.1599e-13)
    >>> parse_number("3M"), parse_number("3M", suffixes="si"), parse_number("1mil")
    (0.003, 3000000.0, 2.54e-05)
    """
    if suffixes not in DIALECTS:
        raise UsageFault(f"suffixes must be 'spice' or 'si', not {suffixes!r}.")
    text = word.strip()
    if is_missing(text):
        raise DataFault(f"the value is missing: found {text!r}.")
    value = _read(text, suffixes)
    if value is None:
        raise DataFault(f"expected a number, found {text!r}.")
    if value - value != 0:
        raise DataFault(f"the number {text!r} is too large.")
    return value


def is_missing(word: str) -> bool:
    """Tell whether a word stands for a value that is not there.

    Parameters
    ----------
    word : str
        Such as ``nan``, ``failed``, ``N/A``, ``***``, ``--``, ``1.#IND`` or an empty field.

    Returns
    -------
    bool
        True for a mark of a missing value.

    Examples
    --------
    >>> is_missing("1.#QNAN"), is_missing("***"), is_missing("-"), is_missing("id")
    (True, True, False, False)
    """
    text = word.strip()
    return not text or _NON_NUMBER.fullmatch(text) is not None


def is_number(word: str, *, suffixes: str = "spice") -> bool:
    """Tell whether a word reads as a finite number.

    Parameters
    ----------
    word : str
        Any word.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes.

    Returns
    -------
    bool
        True when `parse_number` would succeed.

    Examples
    --------
    >>> is_number("1e-3"), is_number("2.5mS"), is_number("vgs"), is_number("nan")
    (True, True, False, False)
    """
    text = word.strip()
    if is_missing(text):
        return False
    value = _read(text, suffixes)
    return value is not None and value - value == 0


def is_ambiguous(word: str) -> bool:
    """Tell whether the two dialects read different numbers from a word.

    Parameters
    ----------
    word : str
        Any word.

    Returns
    -------
    bool
        True for ``3M`` (milli or mega) or ``1F`` (femto or farad), False for ``3u``.

    Examples
    --------
    >>> is_ambiguous("3M"), is_ambiguous("3u"), is_ambiguous("1e-3")
    (True, False, False)
    """
    text = word.strip()
    if _PLAIN.fullmatch(text) or is_missing(text):
        return False
    spice, si = _read(text, "spice"), _read(text, "si")
    return spice is not None and si is not None and spice != si


def _read(text: str, suffixes: str) -> float | None:
    """Value of a stripped word, or None when it is no number."""
    match = _PLAIN.match(text)
    if match is None:
        return None
    digits, tail = match.group().lower().replace("d", "e"), text[match.end() :]
    if not tail:
        return float(digits)
    bare = _BARE_EXPONENT.fullmatch(text)
    if bare is not None:
        return float(f"{bare[1]}e{bare[2]}")
    tail = tail.removeprefix(" ") if suffixes == "si" else tail
    if suffixes == "spice" and tail.lower().startswith("mil"):
        return float(Decimal(digits) * Decimal("25.4e-6"))
    power = _spice_power(tail) if suffixes == "spice" else _si_power(tail)
    if power is None:
        return None
    mantissa, _, exponent = digits.partition("e")
    return float(f"{mantissa}e{int(exponent or 0) + power}")


def _spice_power(tail: str) -> int | None:
    """Power of the leading suffix; what follows must be letters of a unit."""
    if not _UNIT_LETTERS.fullmatch(tail) or tail[0] in "eEdD":
        return None
    folded = tail.lower()
    if folded.startswith("meg"):
        return 6
    return _SPICE.get(folded[0], 0)


def _si_power(tail: str) -> int | None:
    """Power of the prefix of a known unit, or of a prefix alone."""
    if tail in _SI:
        return _SI[tail]
    for unit in _SI_UNITS:
        if tail.endswith(unit):
            prefix = tail[: len(tail) - len(unit)] if unit else tail
            if prefix in _SI:
                return _SI[prefix]
    return None
