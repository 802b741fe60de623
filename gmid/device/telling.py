"""How devices and operating points tell themselves: as text, in a notebook, as data frames."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from gmid.nomenclature import QUANTITIES
from gmid.quantity import format_quantity
from gmid.sweep.listing import format_column, list_html, make_frame

if TYPE_CHECKING:
    from gmid.device.device import Device
    from gmid.device.operating_point import OperatingPoint
    from gmid.sweep.listing import DataFrame

USUAL = (
    "length", "width", "count", "vgs", "vds", "vsb", "id", "gm", "gm_over_id", "current_density",
    "intrinsic_gain", "ft", "vdsat",
)  # fmt: skip
"""Fields of a batch that are shown, as far as the table gives them."""

_SINGLE = ("length", "count", "vgs", "vds", "vsb", "id", "gm_over_id", "vdsat", "intrinsic_gain",
           "ft")  # fmt: skip
_FEW, _SOME = 5, 10


def spell_point(point: OperatingPoint) -> str:
    """Write an operating point as text: its values, or the shape and the first points of many.

    Parameters
    ----------
    point : OperatingPoint
        Of any shape.

    Returns
    -------
    str
        One line for a single point, a small table for a batch.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> point = Device(example_sweep()).at(length=1e-6, vds=0.6, vgs=[0.5, 0.6])
    >>> print(spell_point(point).splitlines()[0])
    OperatingPoint(nmos tt/27, shape (2,))
    """
    if not point.shape:
        values = _read(point, _SINGLE)
        texts = [
            f"{name} {format_quantity(float(value), QUANTITIES[name].unit)}"
            for name, value in values.items()
        ]
        return f"OperatingPoint({point.label}: {', '.join(texts)})"
    heads, rows = _tabulate(point, _FEW)
    lines = [f"OperatingPoint({point.label}, shape {point.shape})"]
    if rows:
        widths = [max(map(len, column)) for column in zip(heads, *rows, strict=True)]
        lines += [
            "  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=True))
            for row in (heads, *rows)
        ]
    return "\n".join([*lines, *_tell_rest(point, len(rows))])


def list_point(point: OperatingPoint) -> str:
    """Write an operating point as a small HTML table.

    Parameters
    ----------
    point : OperatingPoint
        Of any shape; of a batch the first points are shown.

    Returns
    -------
    str
        HTML.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> point = Device(example_sweep()).at(length=1e-6, vds=0.6, vgs=0.5)
    >>> "transit frequency" in list_point(point)
    True
    """
    if point.shape:
        heads, rows = _tabulate(point, _SOME)
        title = f"{point.label}, shape {point.shape}"
        return list_html(title, heads, rows, notes=_tell_rest(point, len(rows)))
    told = [
        (
            QUANTITIES[name].symbol,
            format_quantity(float(value), QUANTITIES[name].unit),
            QUANTITIES[name].meaning,
        )
        for name, value in _read(point, point.fields).items()
    ]
    return list_html(point.label, ("", "value", "meaning"), told)


def list_device(device: Device) -> str:
    """Write a device as a small HTML table: its axes, its unit and what it answers.

    Parameters
    ----------
    device : Device
        In its condition.

    Returns
    -------
    str
        HTML.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> "n-channel" in list_device(Device(example_sweep()))
    True
    """
    rows = []
    for name, axis in device.sweep.axes.items():
        unit = QUANTITIES[name].unit
        ends = [format_quantity(float(end), unit) for end in (axis[0], axis[-1])]
        rows.append((QUANTITIES[name].symbol, *ends, str(axis.size), QUANTITIES[name].meaning))
    unit_words = (
        f"{device.unit.polarity}-channel, unit transistor "
        f"{format_quantity(device.unit.width, 'm')} wide, {device.unit.fingers} finger(s)"
    )
    return list_html(
        f"{device.name} {device.condition}: {unit_words}",
        ("axis", "from", "to", "points", "meaning"),
        rows,
        notes=(f"answers {' '.join(device.fields)}", *device.notes),
    )


def frame_point(point: OperatingPoint) -> DataFrame:
    """Put every field of an operating point into a data frame.

    Parameters
    ----------
    point : OperatingPoint
        Of any shape.

    Returns
    -------
    DataFrame
        One row a point, last axis fastest; SI, with ``attrs["units"]`` by column and
        ``attrs["label"]`` the device and condition.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> point = Device(example_sweep()).at(length=1e-6, vds=0.6, vgs=[0.5, 0.6])
    >>> frame_point(point)["vgs"].tolist()
    [0.5, 0.6]
    """
    values = _read(point, point.fields)
    columns = {name: np.ravel(value) for name, value in values.items()}
    frame = make_frame(columns, units={name: QUANTITIES[name].unit for name in columns})
    frame.attrs["label"] = point.label
    return frame


def _read(point: OperatingPoint, names: tuple[str, ...]) -> dict[str, np.ndarray]:
    """Read those there are; a device that carries no current gives ratios that are no numbers."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return point.read([name for name in names if name in point.fields])


def _tabulate(point: OperatingPoint, most: int) -> tuple[list[str], list[list[str]]]:
    """Write the first points of a batch as heads and cells, computing no others."""
    if not np.prod(point.shape):
        return [], []
    parts: dict[str, Any] = {
        name: np.ravel(np.broadcast_to(getattr(point, name), point.shape))[:most]
        for name in ("length", "vgs", "vds", "vsb", "count")
    }
    values = _read(replace(point, **parts, _found={}), USUAL)
    columns = [format_column(name, np.ravel(value).tolist()) for name, value in values.items()]
    heads = [head for head, _ in columns]
    return heads, [list(row) for row in zip(*(cells for _, cells in columns), strict=True)]


def _tell_rest(point: OperatingPoint, shown: int) -> list[str]:
    left = int(np.prod(point.shape)) - shown
    return [f"and {left} more"] if left else []
