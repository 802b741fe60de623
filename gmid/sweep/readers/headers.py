"""Heads of columns: takes ``id (uA)``, ``vgs[V]``, ``gm/uS``, ``id_uA`` apart.

The difficulty is what only looks like a unit: ``v(s)`` is a node and not a voltage in
seconds, ``gm/id`` a ratio, ``id/W`` a density, ``@m1[as]`` an area.
"""

from __future__ import annotations

import re
from collections.abc import Sequence

from gmid.quantity import UNIT_WORDS, unit_power

_MICRO = str.maketrans({"\N{MICRO SIGN}": "u", "\N{GREEK SMALL LETTER MU}": "u"})
_BRACKETED = re.compile(r"(?P<name>.*?)(?P<gap>\s*)(?:\[(?P<square>[^\[\]]*)\]|\((?P<round>.*)\))")
_PROBES = {"v": "V", "i": "A"}
_LENGTHS = ("l", "w", "len", "length", "width", "lch", "leff", "weff")
_TIMES = ("t", "time")


def is_unit(word: str) -> bool:
    """Tell whether a word is a unit, with or without a prefix.

    Parameters
    ----------
    word : str
        Such as ``uA`` or ``fF``; ``-`` and ``1`` stand for no unit.

    Returns
    -------
    bool
        True for a unit that `gmid.quantity` knows, and for kelvin.

    Examples
    --------
    >>> is_unit("uA"), is_unit("A^2/Hz"), is_unit("id"), is_unit("-")
    (True, True, False, True)
    """
    return _find_base(word) is not None


def split_head(cell: str) -> tuple[str, str | None]:
    """Take the head of a column apart into name and unit.

    Parameters
    ----------
    cell : str
        As the file writes it, quotes taken off.

    Returns
    -------
    tuple of (str, str or None)
        Name, and unit as the file spells it (None when it says none).

    Examples
    --------
    >>> [split_head(cell) for cell in ("L [um]", "id (uA)", "gm/uS", "id_uA", "Id, A")]
    [('L', 'um'), ('id', 'uA'), ('gm', 'uS'), ('id', 'uA'), ('Id', 'A')]
    >>> [split_head(cell)[1] for cell in ("v(s)", "gm/id", "id/W", "@m1[as]", "v_s")]
    [None, None, None, None, None]
    """
    text = cell.strip()
    match = _BRACKETED.fullmatch(text)
    if match is not None:
        square = match["square"] is not None
        unit = (match["square"] if square else match["round"]).strip()
        if match["name"] and _is_bracketed_unit(match["name"], match["gap"], unit, square=square):
            return match["name"], unit
        return text, None
    for mark in (",", "/", "_"):
        name, found, unit = text.rpartition(mark)
        if mark == "/" and not _is_slashed_unit(name, unit):
            name, found, unit = text.partition(mark)
        name, unit = name.strip(), unit.strip()
        accepted = {",": _is_comma_unit, "/": _is_slashed_unit, "_": _is_underscored_unit}[mark]
        if found and name and accepted(name, unit):
            return name, unit
    return text, None


def strip_brackets(word: str) -> str:
    """Take the brackets off a unit that stands alone.

    Parameters
    ----------
    word : str
        ``[um]``, ``(V)`` or ``uA``.

    Returns
    -------
    str
        The unit.

    Examples
    --------
    >>> strip_brackets("[um]"), strip_brackets("uA")
    ('um', 'uA')
    """
    word = word.strip()
    if len(word) > 1 and word[0] + word[-1] in ("[]", "()"):
        return word[1:-1].strip()
    return word


def join_units(words: Sequence[str], count: int) -> list[str]:
    """Join units that blanks have split off their names.

    Parameters
    ----------
    words : sequence of str
        Words of a header line.
    count : int
        Number of columns wanted.

    Returns
    -------
    list of str
        ``["L [um]", "vgs [V]"]`` for ``["L", "[um]", "vgs", "[V]"]`` when that gives the number
        wanted, else the words as they are.

    Examples
    --------
    >>> join_units(["L", "[um]", "id", "(uA)"], 2)
    ['L [um]', 'id (uA)']
    """
    joined: list[str] = []
    for word in words:
        if joined and word[:1] in ("[", "(") and is_unit(strip_brackets(word)):
            joined[-1] += f" {word}"
        else:
            joined.append(word)
    return joined if len(joined) == count else list(words)


def _find_base(word: str) -> str | None:
    """SI name of a spelled unit, or None when the word is none."""
    text = word.strip().translate(_MICRO)
    if text in ("-", "1"):
        return ""
    if text in ("K", "mil"):
        return text
    for base in UNIT_WORDS:
        if base and unit_power(text, base) is not None:
            return base
    return None


def _is_bracketed_unit(name: str, gap: str, unit: str, *, square: bool) -> bool:
    base = _find_base(unit)
    if name.startswith("@") or (not gap and base is None):
        return False
    if square:
        return base is not None or bool(gap)
    if base is None:
        return False
    if gap:
        return True
    if name.lower() in _PROBES:
        return base == _PROBES[name.lower()]
    return base not in ("s", "m") or _fits(name, base)


def _is_comma_unit(name: str, unit: str) -> bool:
    return bool(name) and _find_base(unit) is not None


def _is_slashed_unit(name: str, unit: str) -> bool:
    base = _find_base(unit)
    if not name.strip() or name.strip() == "1" or base in (None, ""):
        return False
    return unit.strip() not in ("W", "m", "s", "C", "K", "S") or _fits(name.strip(), base or "")


def _is_underscored_unit(name: str, unit: str) -> bool:
    """Judge ``id_uA``; single letters are mostly terminals and need a name that suits them."""
    base = _find_base(unit)
    if base in (None, "", "1/V", "W", "%"):
        return False
    if unit in ("V", "A") or (len(unit.translate(_MICRO)) > 1 and base not in ("s",)):
        return True
    return _fits(name, base or "")


def _fits(name: str, base: str) -> bool:
    """Tell whether a quantity of that name is likely to have that unit."""
    folded = name.lower()
    if base == "S":
        return folded.startswith("g") and len(folded) > 1
    if base == "F":
        return folded.startswith("c") and len(folded) > 1
    if base == "m":
        return folded in _LENGTHS
    if base == "s":
        return folded in _TIMES
    if base in ("degC", "K"):
        return folded.startswith("t")
    return False
