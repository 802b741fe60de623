"""Signs: from what a simulator wrote to source-referenced magnitudes.

A p-channel device is held as if it were n-channel, `vsb` is positive for reverse body bias,
`id` positive when conducting.  Signs are read from strong inversion, where leakage and
rounding cannot blur them; every flip is noted.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.nomenclature import CAPACITANCES
from gmid.quantity import format_quantity
from gmid.sweep.rows import Note, Rows

_CONDUCTANCES = ("gm", "gds", "gmb")
_OFF_DIAGONAL = tuple(name for name in CAPACITANCES if name[1] != name[2])
_OVERLAPPED = ("cgs", "cgd", "cgb", "cdg", "csg")
"""Off-diagonal entries that are positive, by the -dQ/dV rule, wherever a channel exists."""


def normalise_signs(rows: Rows, polarity: str) -> None:
    """Turn axes and quantities of rows into magnitudes, in place, noting each flip.

    Parameters
    ----------
    rows : Rows
        As mapped from the text.
    polarity : str
        ``n`` or ``p``, as the recipe says.

    Raises
    ------
    DataFault
        If the data contradict the polarity, or an axis changes its reference.

    Examples
    --------
    >>> import numpy as np
    >>> from gmid.condition import Condition
    >>> axes = {"length": np.full(2, 1e-6), "vsb": np.zeros(2), "vds": np.full(2, -1.0),
    ...         "vgs": np.array([-1.0, 0.0])}
    >>> rows = Rows("pmos", Condition("tt", 27.0), axes, {"id": np.array([-1e-5, 0.0])}, [])
    >>> normalise_signs(rows, "p")
    >>> rows.axes["vgs"].tolist(), rows.values["id"].tolist()
    ([1.0, 0.0], [1e-05, 0.0])
    """
    for name in ("vgs", "vds"):
        _orient_axis(rows, name, polarity)
    _orient_body(rows, polarity)
    strong = _strong(rows)
    _orient_current(rows, strong, polarity)
    for name in _CONDUCTANCES:
        if name in rows.values and np.median(rows.values[name][strong]) < 0:
            _flip_value(rows, name)
    _orient_capacitances(rows, strong)


def _orient_axis(rows: Rows, name: str, polarity: str) -> None:
    axis = rows.axes[name]
    low, high = float(axis.min()), float(axis.max())
    if abs(low) <= high:
        return
    if polarity == "n":
        raise DataFault(
            f"{name} of {rows.label} goes from {low:g} to {high:g} V, as for a p-channel device, "
            "but the recipe says n.",
            where=rows.where(int(axis.argmin())),
            hint='Set polarity = "p", or write the axis as the difference it is, '
            f'such as {name} = "-v(x)".',
        )
    rows.axes[name] = 0.0 - axis
    rows.notes.append(Note("flipped", f"{name}: sign turned, so that it is positive when on."))


def _orient_body(rows: Rows, polarity: str) -> None:
    axis = rows.axes["vsb"]
    low, high = float(axis.min()), float(axis.max())
    if abs(low) <= high:
        return
    if polarity == "n":
        raise DataFault(
            f"vsb of {rows.label} goes from {low:g} to {high:g} V; it must be positive for "
            "reverse body bias.",
            where=rows.where(int(axis.argmin())),
            hint='If the column is the bulk-source voltage, write vsb = "-COLUMN".',
        )
    rows.axes["vsb"] = 0.0 - axis
    rows.notes.append(Note("flipped", "vsb: sign turned, positive for reverse body bias."))


def _strong(rows: Rows) -> NDArray[np.intp]:
    """Rows with the largest vgs and, among those, the upper half of vds."""
    vgs, vds = rows.axes["vgs"], rows.axes["vds"]
    top = np.flatnonzero(vgs >= vgs.max() - 1e-9)
    return top[vds[top] >= np.median(vds[top])]


def _orient_current(rows: Rows, strong: NDArray[np.intp], polarity: str) -> None:
    current = rows.values["id"]
    if np.median(current[strong]) < 0:
        _flip_value(rows, "id")
        current = rows.values["id"]
    vgs, vds = rows.axes["vgs"], rows.axes["vds"]
    like = np.flatnonzero(vds >= vds[strong].min())
    weak = like[vgs[like] <= vgs[like].min() + 1e-9]
    on, off = np.median(current[strong]), np.median(np.abs(current[weak]))
    if on <= off and vgs.max() > vgs.min():
        other = "n" if polarity == "p" else "p"
        raise DataFault(
            f"the current of {rows.label} falls from {format_quantity(off, 'A')} to "
            f"{format_quantity(on, 'A')} as vgs rises to {vgs.max():g} V.",
            where=rows.where(int(strong[0])),
            hint=f"Is its polarity {other}? Otherwise vgs may be measured from the supply: "
            "write it as the difference it is.",
        )


def _orient_capacitances(rows: Rows, strong: NDArray[np.intp]) -> None:
    for name in ("cgg", "cdd", "css", "cbb"):
        if name in rows.values and np.median(rows.values[name][strong]) < 0:
            _flip_value(rows, name)
    seen = [name for name in _OVERLAPPED if name in rows.values]
    negative = [name for name in seen if np.median(rows.values[name][strong]) < 0]
    if not seen or not negative:
        return
    if len(negative) < len(seen) and set(negative) - {"cgb"}:
        raise DataFault(
            f"{', '.join(negative)} of {rows.label} are negative in strong inversion, "
            f"{', '.join(sorted(set(seen) - set(negative)))} positive.",
            where=rows.where(int(strong[0])),
            hint="Give all off-diagonal capacitances in one convention (-dQi/dVj).",
        )
    if set(negative) - {"cgb"}:
        for name in _OFF_DIAGONAL:
            if name in rows.values:
                rows.values[name] = 0.0 - rows.values[name]
        rows.notes.append(Note("flipped", "off-diagonal capacitances: from dQi/dVj to -dQi/dVj."))


def _flip_value(rows: Rows, name: str) -> None:
    rows.values[name] = 0.0 - rows.values[name]
    rows.notes.append(Note("flipped", f"{name}: sign turned, so that it is positive when on."))
