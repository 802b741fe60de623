"""Values for people and notebooks: columns with units, small HTML tables, data frames."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from html import escape
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pandas import DataFrame as DataFrame

_PREFIXED = ("A", "S", "F", "Hz")
_CUSTOMARY = {"m": ("um", -6), "A/m": ("uA/um", 0), "degC": ("C", 0)}


def format_column(name: str, values: Sequence[Any], *, digits: int = 4) -> tuple[str, list[str]]:
    """Write the values of one quantity with one prefix for all.

    Parameters
    ----------
    name : str
        Of the nomenclature.
    values : sequence of float or None
        In SI; what is missing or not finite becomes ``-``.
    digits : int, keyword-only
        Significant digits.

    Returns
    -------
    head : str
        Symbol and unit with prefix.
    cells : list of str
        One for each value.

    Examples
    --------
    >>> format_column("id", [1e-6, 12.3456e-6])
    ('ID [uA]', ['1', '12.35'])
    >>> format_column("current_density", [0.5])
    ('ID/W [uA/um]', ['0.5'])
    """
    from gmid.nomenclature import QUANTITIES
    from gmid.quantity import choose_prefix

    quantity = QUANTITIES[name]
    unit, power = _CUSTOMARY.get(quantity.unit, (quantity.unit, 0))
    if quantity.unit in _PREFIXED:
        prefix, power = choose_prefix(values)
        unit = prefix + unit
    head = f"{quantity.symbol} [{unit}]" if unit else quantity.symbol
    return head, [_plain(value, power, digits) for value in values]


def _plain(value: float | None, power: int, digits: int) -> str:
    """Write a number without exponent where that stays short."""
    if value is None or not math.isfinite(value):
        return "-"
    text = f"{value / 10.0**power:.{digits}g}"
    plain = f"{float(text):.0f}" if "e+" in text else text
    return plain if len(plain) <= digits + 4 else text


def is_number(text: str) -> bool:
    """Tell whether a cell is a number, or stands for one that is not there.

    Parameters
    ----------
    text : str
        The cell.

    Returns
    -------
    bool
        True also for an empty cell and for ``-``.

    Examples
    --------
    >>> is_number("12.3"), is_number("-"), is_number("12.3 MHz")
    (True, True, False)
    """
    try:
        float(text)
    except ValueError:
        return text in ("", "-")
    return True


def list_html(
    title: str,
    heads: Sequence[str],
    rows: Sequence[Sequence[str]],
    *,
    notes: Sequence[str] = (),
) -> str:
    """Write a small HTML table for a notebook.

    Parameters
    ----------
    title : str
        Stands above, in bold.
    heads : sequence of str
        Column heads.
    rows : sequence of sequence of str
        Cells; columns of numbers are set flush right.
    notes : sequence of str, keyword-only
        Lines below.

    Returns
    -------
    str
        Escaped, without script, style sheet or colours: the page it is shown on, dark or light,
        gives its tables their looks, and stays as it was.

    Examples
    --------
    >>> "a &lt; b" in list_html("a < b", ["L [um]"], [["0.18"]])
    True
    """
    right = [bool(rows) and all(is_number(row[i]) for row in rows) for i in range(len(heads))]
    parts = [f"<div><b>{escape(title)}</b>"]
    if rows:
        lines = ["".join(map(_cell, row, right)) for row in rows]
        parts.append(f"<table><thead><tr>{''.join(map(_head, heads, right))}</tr></thead><tbody>")
        parts += [*(f"<tr>{line}</tr>" for line in lines), "</tbody></table>"]
    parts += [f"<div>{escape(note)}</div>" for note in notes]
    return "\n".join([*parts, "</div>"])


def _head(text: str, flush: bool) -> str:
    return f'<th style="text-align: {_SIDES[flush]}">{escape(text)}</th>'


def _cell(text: str, flush: bool) -> str:
    whole = "; white-space: nowrap" if len(text) <= _SHORT else ""
    return f'<td style="text-align: {_SIDES[flush]}{whole}">{escape(text)}</td>'


_SIDES = {True: "right", False: "left"}
_SHORT = 20
"""Letters of a cell that is never broken, such as a number with its unit."""


def spell_range(values: Any, unit: str) -> str:
    """Write a value, or the ends of several.

    Parameters
    ----------
    values : array_like, shape (...)
        In SI.
    unit : str
        Of them.

    Returns
    -------
    str
        With prefix and unit; ``none`` for what is not finite.

    Examples
    --------
    >>> spell_range([1e-6, 2e-6], "A"), spell_range(float("inf"), "ohm")
    ('1 uA to 2 uA', 'none')
    """
    import numpy as np

    from gmid.quantity import format_quantity

    ends = [float(np.min(values)), float(np.max(values))] if np.size(values) else []
    texts = [format_quantity(end, unit) if math.isfinite(end) else "none" for end in ends]
    return " to ".join(dict.fromkeys(texts)) or "-"


def make_frame(columns: Mapping[str, Any], *, units: Mapping[str, str] | None = None) -> DataFrame:
    """Put columns into a data frame.

    Parameters
    ----------
    columns : mapping of str to sequence
        All of one length.
    units : mapping of str to str, keyword-only
        Units of some columns, kept as ``attrs["units"]``.

    Returns
    -------
    DataFrame
        With the columns in their order and rows numbered from 0.

    Examples
    --------
    >>> make_frame({"vgs": [0.5, 0.6]}, units={"vgs": "V"}).attrs
    {'units': {'vgs': 'V'}}
    """
    import pandas as pd

    frame = pd.DataFrame(dict(columns))
    frame.attrs["units"] = dict(units or {})
    return frame
