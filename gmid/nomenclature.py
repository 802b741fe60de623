"""Every quantity once: name, symbol, unit, meaning, and how it scales with the unit count.

File attributes, terminal headers, axis labels, the sheet and the glossary are all fed from
here.  `scaling` is the power of the number of units in parallel: 1 for what adds up
(currents, conductances, capacitances, noise power densities), 0 for what stays.
"""

from __future__ import annotations

from dataclasses import dataclass

from gmid.errors import UnknownName, advise


@dataclass(frozen=True)
class Quantity:
    """One quantity of the trade.

    Parameters
    ----------
    name : str
        Name in the API, in files and on the command line.
    symbol : str
        Short symbol for headers and axes.
    unit : str
        SI unit, a key of `gmid.quantity.UNIT_WORDS`.
    meaning : str
        One line, without a full stop.
    scaling : int
        Power of the unit count by which the value grows.
    kind : str
        ``axis``, ``sweep`` (may be stored in a table), ``answer`` (computed from those) or
        ``amplifier``.

    Examples
    --------
    >>> find_quantity("gm").unit
    'S'
    """

    name: str
    symbol: str
    unit: str
    meaning: str
    scaling: int = 0
    kind: str = "sweep"

    @property
    def header(self) -> str:
        """Symbol with unit, as heads of columns and labels of axes write it."""
        return f"{self.symbol} [{self.unit or '-'}]"


AXES = ("length", "vsb", "vds", "vgs")
"""Order of the axes of every table array, the last one fastest."""

TERMINALS = "gdsb"
"""Gate, drain, source, bulk, in the order of capacitance matrices."""

CAPACITANCES = tuple(f"c{i}{j}" for i in TERMINALS for j in TERMINALS)
"""All sixteen entries of the capacitance matrix, row by row."""

_TERMINAL_WORDS = {"g": "gate", "d": "drain", "s": "source", "b": "bulk"}


def _capacitance(name: str) -> Quantity:
    row, column = (_TERMINAL_WORDS[letter] for letter in name[1:])
    if row == column:
        meaning = f"{row} charge per {row} voltage, dQ{name[1]}/dV{name[1]}"
    else:
        meaning = f"minus {row} charge per {column} voltage, -dQ{name[1]}/dV{name[2]}"
    return Quantity(name, f"C{name[1:]}", "F", meaning, 1)


_ENTRIES = (
    Quantity("length", "L", "m", "drawn channel length", 0, "axis"),
    Quantity("vsb", "VSB", "V", "source-bulk voltage, positive for reverse body bias", 0, "axis"),
    Quantity("vds", "VDS", "V", "drain-source voltage, magnitude for p-channel", 0, "axis"),
    Quantity("vgs", "VGS", "V", "gate-source voltage, magnitude for p-channel", 0, "axis"),
    Quantity("width", "W", "m", "total channel width", 1, "answer"),
    Quantity("count", "N", "", "unit transistors in parallel", 1, "answer"),
    Quantity("temperature", "T", "degC", "temperature", 0, "answer"),
    Quantity("id", "ID", "A", "drain current, positive when conducting", 1),
    Quantity("gm", "gm", "S", "gate transconductance dID/dVGS", 1),
    Quantity("gds", "gds", "S", "output conductance dID/dVDS", 1),
    Quantity("gmb", "gmb", "S", "bulk transconductance dID/dVBS", 1),
    Quantity("vth", "Vth", "V", "threshold voltage as the simulator gives it"),
    Quantity("vdsat", "Vdsat", "V", "edge of saturation of the drain-source voltage"),
    *(_capacitance(name) for name in CAPACITANCES),
    Quantity(
        "noise_thermal", "Sth", "A^2/Hz", "thermal part of the drain current's noise density", 1
    ),
    Quantity(
        "noise_flicker", "Sfl", "A^2/Hz", "flicker part of that density at 1 Hz, falling as 1/f", 1
    ),
    Quantity("gm_over_id", "gm/ID", "1/V", "transconductance per current", 0, "answer"),
    Quantity("current_density", "ID/W", "A/m", "drain current per width", 0, "answer"),
    Quantity("normalized_current", "ID L/W", "A", "drain current of a square device", 0, "answer"),
    Quantity("intrinsic_gain", "gm/gds", "", "intrinsic gain", 0, "answer"),
    Quantity("ft", "fT", "Hz", "transit frequency gm/(2 pi Cgg)", 0, "answer"),
)

QUANTITIES = {entry.name: entry for entry in _ENTRIES}
"""Every quantity by name, in the order in which answers list them."""

SWEEP_QUANTITIES = tuple(entry.name for entry in _ENTRIES if entry.kind == "sweep")
"""Names that a sweep may bring and a table may hold."""


def find_quantity(name: str, *, where: str | None = None) -> Quantity:
    """Look a quantity up by its name.

    Parameters
    ----------
    name : str
        Such as ``gm_over_id``.
    where : str, optional
        Place for the error message.

    Returns
    -------
    Quantity
        The entry.

    Raises
    ------
    UnknownName
        If there is none of that name; the nearest one is named.

    Examples
    --------
    >>> find_quantity("cgd").header
    'Cgd [F]'
    """
    try:
        return QUANTITIES[name]
    except KeyError:
        raise UnknownName(
            f"{name!r} is not a quantity.", where=where, hint=advise(name, QUANTITIES)
        ) from None
