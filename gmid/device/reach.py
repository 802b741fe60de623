"""What a table covers, and the words for what it does not."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from gmid.device.spline import Array
from gmid.errors import OutOfReach
from gmid.nomenclature import AXES, QUANTITIES
from gmid.quantity import format_quantity
from gmid.sweep.model import Sweep

MOST_NAMED = 10
"""How many unreachable combinations one message names."""

_SLACK = 1e-9
"""Rounding allowed at the ends of an axis, relative to its largest value."""

_ADVICE = {
    "gm_over_id": ("Ask for less, or a longer channel.", "Ask for more, or a shorter channel."),
    "vdsat": ("Ask for less.", "Ask for more, or take the bias by another drive."),
    "id": ("Ask for less, or more units.", "Ask for more, or fewer units."),
    "current_density": ("Ask for less.", "Ask for more."),
}


def settle_axes(
    sweep: Sweep, length: Array, vgs: Array | None, vds: Array, vsb: Array
) -> tuple[Array, Array | None, Array, Array]:
    """Check that points lie inside the table and bring rounding at its edges inside.

    Parameters
    ----------
    sweep : Sweep
        The table's axes.
    length, vds, vsb : ndarray, shape (n,)
        Channel length [m] and voltages [V].
    vgs : ndarray, shape (n,), or None
        Gate-source voltage [V], where it is given.

    Returns
    -------
    tuple of ndarray
        The same, clipped to the axes.

    Raises
    ------
    OutOfReach
        If any lies outside; all axes and values are named.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> one = np.ones(1)
    >>> settle_axes(example_sweep(), one * 1e-6, one, one * 3.0, one * 0)
    Traceback (most recent call last):
    ...
    gmid.errors.OutOfReach: vds = 3 V is out of reach for nmos tt/27: the table covers 0 to 1.8 V.
    """
    given: dict[str, Array | None] = {"length": length, "vsb": vsb, "vds": vds, "vgs": vgs}
    faults = []
    settled: dict[str, Array | None] = {}
    for name in AXES:
        values, axis = given[name], getattr(sweep, name)
        if values is None:
            settled[name] = None
            continue
        if values.size and axis[0] <= values.min() and values.max() <= axis[-1]:
            settled[name] = np.array(values)
            continue
        slack = _SLACK * max(abs(float(axis[0])), abs(float(axis[-1])), 0.0)
        slack = max(slack, 0.0 if name == "length" else _SLACK)
        inside = (values >= axis[0] - slack) & (values <= axis[-1] + slack)
        if not inside.all():
            faults.append(_describe_axis(sweep, name, np.unique(values[~inside])))
        settled[name] = np.clip(values, axis[0], axis[-1])
    if faults:
        raise OutOfReach(" ".join(faults))
    length, vsb, vds = (np.asarray(settled[name]) for name in AXES[:3])
    return length, settled["vgs"], vds, vsb


def _describe_axis(sweep: Sweep, name: str, values: Array) -> str:
    axis, unit = getattr(sweep, name), QUANTITIES[name].unit
    asked = [_number(float(value), unit) for value in values[:MOST_NAMED]]
    more = f" and {values.size - MOST_NAMED} more" if values.size > MOST_NAMED else ""
    first, last = float(axis[0]), float(axis[-1])
    covers = (
        f"covers {_range(first, last, unit)}"
        if last > first
        else (f"holds {_number(first, unit)} alone")
    )
    verb = "is" if values.size == 1 else "are"
    return (
        f"{name} = {', '.join(asked)}{more} {verb} out of reach for {sweep.label}: "
        f"the table {covers}."
    )


def refuse_targets(
    sweep: Sweep,
    drive: str,
    target: Array,
    reach: tuple[Array, Array],
    points: dict[str, Array],
    missed: NDArray[np.bool_],
    *,
    diode: bool = False,
) -> None:
    """Raise the error that names what a drive cannot reach, if there is anything.

    Parameters
    ----------
    sweep : Sweep
        Device and condition.
    drive : str
        Name of the quantity asked for.
    target : ndarray, shape (n,)
        What was asked for, of one unit.
    reach : tuple of ndarray, shape (n,)
        Least and largest value to be had at each point.
    points : dict of str to ndarray, shape (n,)
        ``length``, ``vds`` and ``vsb`` of each point.
    missed : ndarray of bool, shape (n,)
        Which cannot be had.
    diode : bool, keyword-only
        Whether vds was to equal vgs.

    Raises
    ------
    OutOfReach
        Naming up to ten combinations and the number of the others.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> one = np.ones(1)
    >>> refuse_targets(example_sweep(), "gm_over_id", one * 31, (one * 2.1, one * 27.4),
    ...                {"length": one * 180e-9, "vds": one * 0.9, "vsb": one * 0}, one > 0)
    Traceback (most recent call last):
    ...
    gmid.errors.OutOfReach: gm/Id = 31 1/V is out of reach for nmos tt/27 at L = 180 nm, \
vds = 0.9 V, vsb = 0 V: the table covers 2.1 to 27.4 1/V. Ask for less, or a longer channel.
    """
    if not missed.any():
        return
    where = np.flatnonzero(missed)
    symbol, unit = QUANTITIES[drive].symbol.replace("ID", "Id"), QUANTITIES[drive].unit
    lines = []
    for index in where[:MOST_NAMED]:
        place = [
            f"L = {format_quantity(float(points['length'][index]), 'm')}",
            "vds = vgs" if diode else f"vds = {_number(float(points['vds'][index]), 'V')}",
            f"vsb = {_number(float(points['vsb'][index]), 'V')}",
        ]
        lines.append(
            f"{symbol} = {_number(float(target[index]), unit)} is out of reach for "
            f"{sweep.label} at {', '.join(place)}: the table covers "
            f"{_range(float(reach[0][index]), float(reach[1][index]), unit)}."
        )
    if where.size > MOST_NAMED:
        lines.append(f"And {where.size - MOST_NAMED} more of {target.size} combinations.")
    raise OutOfReach("\n".join(lines), hint=_advise_on(drive, target[where], reach[1][where]))


def _number(value: float, unit: str) -> str:
    return f"{value:.4g} V" if unit == "V" else format_quantity(value, unit)


def _range(low: float, high: float, unit: str) -> str:
    first, last = _number(low, unit), _number(high, unit)
    if first.partition(" ")[2] == last.partition(" ")[2]:
        first = first.partition(" ")[0]
    return f"{first} to {last}"


def _advise_on(drive: str, target: Array, highest: Array) -> str | None:
    sides: Sequence[str] = _ADVICE.get(drive, ())
    above = target > highest
    if not sides or (above.any() and not above.all()):
        return None
    return sides[0] if above.all() else sides[1]
