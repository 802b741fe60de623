"""Entries of a recipe that say where an axis, a quantity or a condition is found."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

from gmid.errors import DataFault, UnknownName, advise
from gmid.nomenclature import AXES
from gmid.quantity import parse_quantities, parse_quantity
from gmid.sweep.recipe import ORIGINS, ValueSource

NOISE_UNITS = ("A/rtHz", "V/rtHz", "A^2/Hz", "V^2/Hz")
"""Units in which a noise spectrum may be written."""

_SHARED_KINDS = ("column", "value", "from")
_AXIS_KINDS = ("restart", "preceding")
_QUANTITY_KINDS = ("derived", "admittance", "spectrum")
_COMPANIONS = {
    "pattern": ("from",), "values": ("from",), "outside": ("restart",),
    "resistance": ("spectrum",),
}  # fmt: skip
_KEYS = (*_SHARED_KINDS, *_AXIS_KINDS, *_QUANTITY_KINDS, "unit", *_COMPANIONS)


def read_source(raw: object, *, unit: str, outer: bool) -> ValueSource:
    """Read an axis or a quantity: an expression, a number, or an inline table.

    Parameters
    ----------
    raw : object
        As the TOML reader gives it.
    unit : str
        SI unit wanted, or ``word``.
    outer : bool
        Whether it is an axis or a condition, and no quantity.

    Returns
    -------
    ValueSource
        Checked.

    Raises
    ------
    GmidError
        If a key is unknown, missing or contradicts another.

    Examples
    --------
    >>> read_source({"value": "0.18 um"}, unit="m", outer=True).value
    1.8e-07
    """
    if isinstance(raw, str):
        return ValueSource(expression=raw)
    if isinstance(raw, (int, float)) and not isinstance(raw, bool):
        return ValueSource(value=float(raw))
    if not isinstance(raw, Mapping):
        raise DataFault(
            "expected an expression, a number or a table.",
            hint='Such as "v(d)" or { value = "0.18 um" }.',
        )
    for key in raw:
        if key not in _KEYS:
            raise UnknownName(f"{key!r} is not a known key here.", hint=advise(str(key), _KEYS))
    allowed = [*_SHARED_KINDS, *(_AXIS_KINDS if outer else _QUANTITY_KINDS)]
    kinds = [key for key in _READERS if key in raw]
    if len(kinds) != 1:
        raise DataFault(
            f"needs exactly one of {', '.join(allowed)}; "
            f"found {', '.join(kinds) or 'none of them'}."
        )
    if kinds[0] not in allowed:
        raise DataFault(f"cannot be given by {kinds[0]!r}.", hint=f"Use {', '.join(allowed)}.")
    spelled = raw.get("unit")
    if spelled is not None and not isinstance(spelled, str):
        raise DataFault("unit must be a text such as 'um'.")
    stray = [key for key, kind in _COMPANIONS.items() if key in raw and kinds[0] not in kind]
    if stray:
        raise DataFault(f"{stray[0]} does not go with {kinds[0]}.")
    return _READERS[kinds[0]](dict(raw), unit, spelled)


def _by_column(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    if not isinstance(raw["column"], str):
        raise DataFault("column must be a text.")
    return ValueSource(expression=raw["column"], unit=spelled)


def _text_of(raw: dict[str, Any], key: str) -> str:
    if not isinstance(raw[key], str):
        raise DataFault(f"{key} must be an expression in quotes.")
    return str(raw[key])


def _by_preceding(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    return ValueSource(preceding=_text_of(raw, "preceding"), unit=spelled)


def _by_admittance(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    if spelled is not None:
        raise DataFault("an admittance has no unit: give amperes per volt.")
    return ValueSource(admittance=_text_of(raw, "admittance"))


def _by_spectrum(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    resistance = raw.get("resistance")
    if spelled not in NOISE_UNITS:
        raise DataFault("a spectrum needs its unit.", hint=f"One of {', '.join(NOISE_UNITS)}.")
    if spelled.startswith("V") == (resistance is None):
        raise DataFault(
            "a voltage spectrum needs the resistance that the noise current flows in, "
            "a current spectrum none.", hint='Such as resistance = "1 kohm".',
        )  # fmt: skip
    ohms = None if resistance is None else parse_quantity(resistance, "ohm")
    if ohms is not None and ohms <= 0:
        raise DataFault("the resistance must be positive.")
    return ValueSource(spectrum=_text_of(raw, "spectrum"), unit=spelled, resistance=ohms)


def _by_value(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    text = f"{raw['value']} {spelled}" if spelled else raw["value"]
    return ValueSource(value=text if unit == "word" else parse_quantity(text, unit))


def _by_origin(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    origin, pattern = raw["from"], raw.get("pattern")
    if origin not in ORIGINS:
        raise UnknownName(f"from = {origin!r} is not a place.", hint=advise(str(origin), ORIGINS))
    if not isinstance(pattern, str):
        raise DataFault("needs a pattern, a regular expression whose first group is the value.")
    try:
        groups = re.compile(pattern).groups
    except re.error as trouble:
        raise DataFault(f"the pattern {pattern!r} is not valid: {trouble}.") from None
    if groups < 1:
        raise DataFault(
            f"the pattern {pattern!r} has no group.", hint="Put the value's part in parentheses."
        )
    values = raw.get("values")
    if values is not None:
        if not isinstance(values, Mapping) or not values or unit == "word":
            raise DataFault("values must be a table such as { m1 = '0.18 um' }.")
        values = {str(key): parse_quantity(entry, unit) for key, entry in values.items()}
    return ValueSource(origin=str(origin), pattern=pattern, unit=spelled, values=values)


def _by_restart(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    values = expand_values(raw["restart"], unit, spelled)
    outside = raw.get("outside", "vgs")
    if outside not in AXES:
        raise UnknownName(f"outside = {outside!r} is not an axis.", hint=advise(str(outside), AXES))
    return ValueSource(restart=values, outside=str(outside))


def _by_derivation(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    if raw["derived"] is not True:
        raise DataFault("derived can only be true.")
    return ValueSource(derived=True)


def expand_values(raw: object, unit: str, spelled: str | None = None) -> tuple[float, ...]:
    """Expand ``start:stop:step`` (both ends in) or a list of values.

    Parameters
    ----------
    raw : object
        A text or a list.
    unit : str
        SI unit of the values.
    spelled : str, optional
        Unit in which bare numbers stand.

    Returns
    -------
    tuple of float
        In SI.

    Raises
    ------
    DataFault
        If the step of a range does not fit, or the list is empty.

    Examples
    --------
    >>> expand_values("0:0.3:0.1", "V")
    (0.0, 0.1, 0.2, 0.3)
    """
    if isinstance(raw, (list, tuple)):
        if not raw:
            raise DataFault("the list of values is empty.")
        if spelled is None:
            return tuple(
                parse_quantity(item if isinstance(item, (int, float)) else str(item), unit)
                for item in raw
            )
        return tuple(parse_quantity(f"{item} {spelled}", unit) for item in raw)
    text = str(raw)
    if spelled is not None:
        text = re.sub(r"[^,:]+", lambda part: f"{part[0].strip()} {spelled}", text)
    if not re.search(r"[,:]", text):
        raise DataFault(f"{raw!r} is not a range.", hint="Write start:stop:step, or a list.")
    return tuple(parse_quantities(text, unit))


def read_word(raw: object) -> ValueSource:
    """Read a corner: a word, or where it is found.

    Parameters
    ----------
    raw : object
        As the TOML reader gives it.

    Returns
    -------
    ValueSource
        Checked.

    Examples
    --------
    >>> read_word("tt").value
    'tt'
    """
    if isinstance(raw, str):
        return ValueSource(value=raw)
    return _condition_source(raw, "word")


def read_temperature(raw: object) -> ValueSource:
    """Read a temperature: a value, or where it is found.

    Parameters
    ----------
    raw : object
        As the TOML reader gives it.

    Returns
    -------
    ValueSource
        In degrees Celsius.

    Examples
    --------
    >>> read_temperature("-40 C").value
    -40.0
    """
    if isinstance(raw, (str, int, float)) and not isinstance(raw, bool):
        return ValueSource(value=parse_quantity(raw, "degC"))
    return _condition_source(raw, "degC")


def _condition_source(raw: object, unit: str) -> ValueSource:
    found = read_source(raw, unit=unit, outer=True)
    if found.restart is not None or found.preceding is not None or found.origin == "column":
        raise DataFault(
            "must be a value, a column, or be caught in a name, title, header, comment or step."
        )
    return found


_READERS = {
    "column": _by_column,
    "value": _by_value,
    "from": _by_origin,
    "restart": _by_restart,
    "preceding": _by_preceding,
    "derived": _by_derivation,
    "admittance": _by_admittance,
    "spectrum": _by_spectrum,
}
