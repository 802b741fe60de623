"""Values caught by a pattern in a file's name, title, header, comment, step or column name."""

from __future__ import annotations

import re

from gmid.errors import DataFault, advise
from gmid.quantity import parse_quantity
from gmid.sweep.recipe import ValueSource
from gmid.sweep.texttable import TextTable


def captured(source: ValueSource, table: TextTable) -> str:
    """Return what the pattern catches in the file's name, title, header, comment or step.

    Parameters
    ----------
    source : ValueSource
        With origin and pattern.
    table : TextTable
        The table.

    Returns
    -------
    str
        The first group.

    Raises
    ------
    DataFault
        If the pattern does not match.

    Examples
    --------
    >>> source = ValueSource(origin="name", pattern="L([0-9p]+)")
    >>> captured(source, TextTable("nmos_L0p18.txt", []))
    '0p18'
    """
    assert source.origin is not None
    assert source.pattern is not None
    if source.origin == "column":
        return table.meta["column"]
    text = table.source if source.origin == "name" else table.meta.get(source.origin, "")
    match = re.search(source.pattern, text, re.IGNORECASE)
    if match is None or not match.groups():
        raise DataFault(
            f"pattern {source.pattern!r} does not match the {source.origin} {text!r}"
            f" of {table.source}."
            if match is None
            else f"pattern {source.pattern!r} has no group to capture.",
            where=source.where,
            hint="Its first group must be the value.",
        )
    return match.group(1)


def read_captured(text: str, unit: str, source: ValueSource) -> float:
    """Read captured text, in which ``0p18`` is 0.18, ``m40`` -40, and the recipe gives the unit.

    Parameters
    ----------
    text : str
        What the pattern caught.
    unit : str
        SI unit wanted.
    source : ValueSource
        For its unit, its list of values and its place.

    Returns
    -------
    float
        In SI.

    Raises
    ------
    DataFault
        If it is no number, is not listed, or is a length without a unit.

    Examples
    --------
    >>> read_captured("0p18", "m", ValueSource(origin="name", pattern="()", unit="um"))
    1.8e-07
    """
    word = re.sub(r"^(\d+)p(\d+)$", r"\1.\2", text.strip(), flags=re.IGNORECASE)
    if unit in ("degC", "V"):
        word = re.sub(r"^(?:m|neg)(?=\d)", "-", word, flags=re.IGNORECASE)
    if source.values is not None:
        if text not in source.values:
            raise DataFault(
                f"{text!r} is caught, but values has no such key.",
                where=source.where, hint=advise(text, source.values),
            )  # fmt: skip
        return float(source.values[text])
    try:
        plain = float(word)
    except ValueError:
        if source.unit is not None:
            raise DataFault(
                f"{text!r} is not a number, though the recipe gives its unit as {source.unit}.",
                where=source.where,
            ) from None
        return parse_quantity(word, unit, where=source.where)
    if source.unit is None:
        if unit == "m":
            raise DataFault(
                f"the length {text!r} has no unit.",
                where=source.where,
                hint='Add one: unit = "um".',
            )
        return plain
    if source.unit == unit:
        return plain
    return parse_quantity(f"{word} {source.unit}", unit, where=source.where)
