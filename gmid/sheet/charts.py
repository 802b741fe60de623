"""Charts of devices: the usual curves against gm/Id or vgs, one panel a quantity."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from gmid.device.device import Device
from gmid.device.spline import Array
from gmid.errors import OutOfReach, UsageFault
from gmid.nomenclature import CAPACITANCES, QUANTITIES
from gmid.quantity import format_quantity
from gmid.sheet.figures import choose_style, draw_curve, new_figure, scale_axis, typeset

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

AGAINST = ("gm_over_id", "vgs")
"""What may lie on the horizontal axis."""

USUAL = (
    "gm_over_id", "vgs", "current_density", "ft", "intrinsic_gain", "vdsat", "cgg", "cgd", "cdd",
)  # fmt: skip
"""Quantities of a chart unless others are asked for, less the one on the horizontal axis."""

_LOGARITHMIC = (
    "id", "gm", "gds", "gmb", "current_density", "normalized_current", "ft", "noise_thermal",
    "noise_flicker",
)  # fmt: skip
_TERMINALS = {"g": "gate", "d": "drain", "s": "source", "b": "bulk"}
_TITLES = {
    "noise_thermal": "Thermal noise",
    "noise_flicker": "Flicker noise at 1 Hz",
}
_DECADES = 6.5
_MOST_COLOURS, _MOST_DASHES = 8, 6


@dataclass(frozen=True, eq=False)
class Curve:
    """One device in one condition at one length, as vgs goes up.

    Parameters
    ----------
    device, condition : str
        Names.
    length : float
        Channel length [m].
    vds : float or None
        Drain-source voltage [V]; None where it equals vgs.
    vsb : float
        Source-bulk voltage [V].
    width : float
        Of the unit transistor [m].
    values : dict of str to ndarray, shape (n,)
        Quantities of one unit, in SI.

    Examples
    --------
    >>> Curve("nmos", "tt/27", 1e-6, 0.6, 0.0, 2e-6, {}).label(("length",))
    'L = 1 um'
    """

    device: str
    condition: str
    length: float
    vds: float | None
    vsb: float
    width: float
    values: dict[str, Array]

    def place(self, part: str) -> object:
        """Tell one part of what sets this curve apart.

        Parameters
        ----------
        part : str
            Of ``device condition length vds vsb``.

        Returns
        -------
        object
            Name or value.
        """
        return getattr(self, part)

    def label(self, parts: Sequence[str]) -> str:
        """Word some parts of what sets this curve apart.

        Parameters
        ----------
        parts : sequence of str
            Of ``device condition length vds vsb``.

        Returns
        -------
        str
            For a legend or a title, without typesetting.
        """
        words = {
            "device": self.device,
            "condition": self.condition,
            "length": f"L = {self.length * 1e6:.6g} um",
            "vds": "VDS = VGS" if self.vds is None else f"VDS = {self.vds:.4g} V",
            "vsb": f"VSB = {self.vsb:.4g} V",
        }
        return ", ".join(words[part] for part in parts)


_PARTS = ("device", "condition", "length", "vds", "vsb")


def trace_curve(
    device: Device,
    *,
    length: float,
    vds: float | Literal["diode"],
    vsb: float = 0.0,
    quantities: Sequence[str] | None = None,
    points: int = 241,
) -> Curve:
    """Follow a device from the lowest to the highest vgs of its table.

    Parameters
    ----------
    device : Device
        In one condition.
    length : float, keyword-only
        Channel length [m].
    vds : float or "diode", keyword-only
        Drain-source voltage [V].
    vsb : float, keyword-only
        Source-bulk voltage [V].
    quantities : sequence of str, keyword-only
        What to read, the `USUAL` ones that the table has by default; `gm_over_id`, `id` and
        `vgs` come along.
    points : int, keyword-only
        Number of points in equal steps of vgs.

    Returns
    -------
    Curve
        Without points at which no current flows.

    Raises
    ------
    OutOfReach
        If the table does not cover the length or the voltages, or nothing conducts.
    UnknownName
        If it lacks a quantity.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> curve = trace_curve(Device(example_sweep()), length=1e-6, vds=0.6)
    >>> falling = [curve.values[name][::-1] for name in ("gm_over_id", "vgs")]
    >>> bool(abs(np.interp(15, *falling) - 0.49) < 2e-3)
    True
    """
    low, high = float(device.sweep.vgs[0]), float(device.sweep.vgs[-1])
    if vds == "diode":
        low = max(low, float(device.sweep.vds[0]))
        high = min(high, float(device.sweep.vds[-1]))
    point = device.at(length=length, vds=vds, vsb=vsb, vgs=np.linspace(low, high, points))
    if quantities is None:
        quantities = [name for name in USUAL if name in device.fields]
    names = dict.fromkeys(("vgs", "id", "gm_over_id", *quantities))
    with np.errstate(divide="ignore", invalid="ignore"):
        values = point.read(list(names))
    keep = (values["id"] > 0) & (values["gm_over_id"] > 0)
    if not keep.any():
        raise OutOfReach(
            f"{device.name} {device.condition} conducts nowhere at "
            f"L = {format_quantity(length, 'm')}, vds = {vds}, vsb = {vsb:g} V."
        )
    return Curve(
        device.name, str(device.condition), length, None if vds == "diode" else float(vds), vsb,
        device.unit.width, {name: np.asarray(column)[keep] for name, column in values.items()},
    )  # fmt: skip


def draw_chart(
    curves: Sequence[Curve],
    *,
    against: str = "gm_over_id",
    quantities: Sequence[str] | None = None,
) -> Figure:
    """Draw curves, one panel a quantity.

    Parameters
    ----------
    curves : sequence of Curve
        At least one.
    against : str, keyword-only
        Quantity of the horizontal axis, one of `AGAINST`; against gm/Id the branch above the
        largest gm/Id is drawn.
    quantities : sequence of str, keyword-only
        One panel each, by default the `USUAL` ones that all curves have; what adds up with
        the width is divided by it.

    Returns
    -------
    Figure
        To be saved inside `gmid.sheet.figures.drawing`.

    Raises
    ------
    UsageFault
        If there is no quantity to draw, or there are more curves than can be told apart.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> from gmid.sheet.figures import drawing
    >>> curve = trace_curve(Device(example_sweep()), length=1e-6, vds=0.6, quantities=["ft"])
    >>> with drawing():
    ...     figure = draw_chart([curve], quantities=["ft"])
    >>> figure.axes[0].get_ylabel()
    '$f_{T}$ [GHz]'
    """
    if quantities is None:
        quantities = [name for name in USUAL if all(name in curve.values for curve in curves)]
    names = [name for name in quantities if name != against]
    if not names:
        raise UsageFault(f"there is nothing to draw against {against}.")
    varying = [part for part in _PARTS if len({curve.place(part) for curve in curves}) > 1]
    families = split_families(curves, varying)
    columns = 1 if len(names) == 1 else 2 if len(names) <= 4 else 3
    rows = math.ceil(len(names) / columns)
    figure = new_figure(*((130, 95) if columns == 1 else (92 * columns, 66 * rows + 16)))
    grid = figure.subplots(rows, columns, squeeze=False).ravel()
    for axes, name in zip(grid, names, strict=False):
        _draw_panel(axes, curves, families, against, name, varying)
    for axes in grid[len(names) :]:
        axes.set_axis_off()
    same = [part for part in _PARTS if part not in varying]
    figure.suptitle(_typeset_label(curves[0].label(same)), fontsize=10)
    if varying:
        _add_legend(figure, grid[0], list(grid[len(names) :]))
    return figure


def split_families(curves: Sequence[Curve], varying: Sequence[str]) -> list[tuple[int, int | None]]:
    """Give each curve its place in the family of colours and that of dashes.

    Parameters
    ----------
    curves : sequence of Curve
        The curves.
    varying : sequence of str
        Parts in which they differ.

    Returns
    -------
    list of (int, int or None)
        For `choose_style`; lengths take the colours where there are several.

    Raises
    ------
    UsageFault
        If there are more curves than can be told apart.

    Examples
    --------
    >>> curves = [Curve("nmos", "tt/27", x * 1e-6, 0.6, 0.0, 2e-6, {}) for x in (1, 2)]
    >>> split_families(curves, ["length"])
    [(0, None), (1, None)]
    """
    first = ["length"] if "length" in varying else list(varying[:1])
    second = [part for part in varying if part not in first]
    colours = list(dict.fromkeys(curve.label(first) for curve in curves))
    dashes = list(dict.fromkeys(curve.label(second) for curve in curves))
    if len(colours) > _MOST_COLOURS or len(dashes) > _MOST_DASHES:
        most = _MOST_COLOURS if len(colours) > _MOST_COLOURS else _MOST_DASHES
        what = ", ".join(first if len(colours) > _MOST_COLOURS else second)
        raise UsageFault(
            f"{max(len(colours), len(dashes))} curves of different {what} cannot be told apart "
            f"in one chart, {most} can.",
            hint="Choose fewer, or draw several charts.",
        )
    return [
        (
            colours.index(curve.label(first)),
            dashes.index(curve.label(second)) if second else None,
        )
        for curve in curves
    ]


def _draw_panel(
    axes: Axes,
    curves: Sequence[Curve],
    families: Sequence[tuple[int, int | None]],
    against: str,
    name: str,
    varying: Sequence[str],
) -> None:
    per_width = QUANTITIES[name].scaling == 1
    drawn = []
    for curve in curves:
        start = int(np.argmax(curve.values["gm_over_id"])) if against == "gm_over_id" else 0
        x, y = (curve.values[key][start:] for key in (against, name))
        drawn.append((x, y / curve.width if per_width else y))
    label, divisor = scale_axis(name, [y for _, y in drawn], per_width=per_width)
    across, step = scale_axis(against, [x for x, _ in drawn])
    for (x, y), curve, family in zip(drawn, curves, families, strict=True):
        words = _typeset_label(curve.label(varying))
        draw_curve(axes, x / step, y / divisor, choose_style(*family), label=words)
    axes.set_xlabel(across)
    axes.set_ylabel(label)
    axes.set_title(_title(name) + (" per width" if per_width else ""), loc="left")
    top = max(float(np.max(y, initial=0.0)) for _, y in drawn) / divisor
    if name in _LOGARITHMIC and top > 0:
        axes.set_yscale("log")
        low = max(axes.get_ylim()[0], top / 10**_DECADES)
        axes.set_ylim(bottom=low, top=top * 2)


def _title(name: str) -> str:
    """Word what a panel shows, without formulas."""
    if name in _TITLES:
        return _TITLES[name]
    if name in CAPACITANCES:
        words = [_TERMINALS[letter] for letter in dict.fromkeys(name[1:])]
        return f"{'-'.join(words)} capacitance".capitalize()
    text = re.split(r",| (?=\S*/)", QUANTITIES[name].meaning)[0]
    return text[:1].upper() + text[1:]


def _typeset_label(text: str) -> str:
    """Typeset the symbols in words such as ``L = 1 um, VDS = 0.6 V``."""
    parts = []
    for part in text.split(", "):
        symbol, equals, value = part.partition(" = ")
        right = typeset(value) if value in ("VGS",) else value.replace(" um", " \N{MICRO SIGN}m")
        parts.append(f"{typeset(symbol)} = {right}" if equals else part)
    return ", ".join(parts)


def _add_legend(figure: Figure, axes: Axes, free: Sequence[Axes]) -> None:
    """Put the legend into an empty cell if it fits, below the panels if not."""
    handles, labels = axes.get_legend_handles_labels()
    if len(free) and len(labels) <= 12:
        free[0].legend(handles, labels, loc="center", handlelength=4.0, fontsize=8)
        return
    entry = 18 + 1.6 * max(len(label.replace("$", "")) for label in labels)
    across = max(1, int(figure.get_figwidth() * 25.4 / entry))
    figure.legend(
        handles,
        labels,
        loc="outside lower center",
        handlelength=4.0,
        ncols=min(across, len(labels)),
    )
