"""Words of a sheet: names of checks, numbers with their units."""

from __future__ import annotations

from gmid.quantity import format_quantity

_FLOORS = {"V": 5e-10, "deg": 5e-7, "dB": 5e-7}
"""What is smaller than rounding of a solution is zero."""


def spell_name(name: str) -> str:
    """Write the name of a check as words.

    Parameters
    ----------
    name : str
        Such as ``dc_gain``.

    Returns
    -------
    str
        Such as ``DC gain``.

    Examples
    --------
    >>> spell_name("dc_gain"), spell_name("gbw"), spell_name("input_noise")
    ('DC gain', 'GBW', 'input noise')
    """
    words = {"dc": "DC", "gbw": "GBW", "snr": "SNR"}
    return " ".join(words.get(word, word) for word in name.split("_"))


def spell_value(value: float | None, unit: str, digits: int = 4) -> str:
    """Write a number of a sheet.

    Parameters
    ----------
    value : float or None
        In SI.
    unit : str
        Its unit.
    digits : int
        Significant ones.

    Returns
    -------
    str
        With prefix and unit; a dash for what is not known.

    Examples
    --------
    >>> spell_value(2.5e7, "Hz"), spell_value(None, "Hz"), spell_value(float("inf"), "Hz")
    ('25 MHz', '-', 'none')
    """
    if value is None or value != value:
        return "-"
    if value in (float("inf"), float("-inf")):
        return "none"
    floor = _FLOORS.get(unit, 0.0)
    return format_quantity(0.0 if abs(value) < floor else value, unit, digits=digits)
