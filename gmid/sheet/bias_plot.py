"""The bias points of an amplifier on the gm/Id curves of its devices."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from gmid.amplifier.prediction import Prediction
from gmid.device.circuit_device import CircuitDevice
from gmid.device.device import Device
from gmid.device.spline import Array
from gmid.sheet.amplifiers import Reviewed
from gmid.sheet.charts import trace_curve
from gmid.sheet.figures import choose_style, new_figure, scale_axis

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_WIDTH = 125.0
_MOST_LENGTHS = 8


@dataclass(frozen=True)
class Chosen:
    """Where a place works.

    Parameters
    ----------
    place : str
        Its name.
    device : str
        Of the table.
    length : float
        Channel length [m].
    gm_over_id : float
        [1/V].
    normalized_current : float
        id L/W of a unit; units in series count as one of their common length [A].
    vds : float
        Magnitude [V].

    Examples
    --------
    >>> Chosen("pair", "nmos", 5e-7, 15.0, 1e-6, 0.4).place
    'pair'
    """

    place: str
    device: str
    length: float
    gm_over_id: float
    normalized_current: float
    vds: float


def find_nominal(case: Prediction) -> int:
    """Tell which of the supplies of a prediction is the nominal one.

    Parameters
    ----------
    case : Prediction
        With the supplies as its only axis.

    Returns
    -------
    int
        Its index.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> find_nominal(sample_review().first)
    1
    """
    return int(np.argmin(np.abs(case.voltage - case.supply.voltage)))


def list_chosen(case: Prediction) -> list[Chosen]:
    """List where each place works at the nominal supply.

    Parameters
    ----------
    case : Prediction
        With the supplies as its only axis.

    Returns
    -------
    list of Chosen
        One for each place, of its first instance.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> list_chosen(sample_review().first)[0].place
    'pair'
    """
    found: dict[str, Chosen] = {}
    nominal = find_nominal(case)
    for one in case.circuit.transistors:
        if one.role in found:
            continue
        point = case.bias.point(one.name)
        current, ratio, vds = (
            float(np.broadcast_to(point[key], case.batch)[nominal])
            for key in ("id", "gm_over_id", "vds")
        )
        squares = float(point["width"]) / (float(point["length"]) * one.stack)
        found[one.role] = Chosen(
            one.role, one.device, float(point["length"]), ratio, current / squares, vds
        )
    return list(found.values())


def draw_bias(reviewed: Reviewed) -> Figure:
    """Draw gm/Id over normalised current of each device, with the points chosen.

    Parameters
    ----------
    reviewed : Reviewed
        The amplifier, predicted.

    Returns
    -------
    Figure
        In the first condition at the nominal supply, one panel a device.

    Examples
    --------
    >>> from gmid.sheet.figures import drawing
    >>> from gmid.sheet.sample import sample_review
    >>> with drawing():
    ...     figure = draw_bias(sample_review())
    >>> [axes.get_title(loc="left").split(",")[0] for axes in figure.axes]
    ['nmos', 'pmos']
    """
    case = reviewed.first
    chosen = list_chosen(case)
    names = list(dict.fromkeys(one.device for one in chosen))
    groups = {name: [one for one in chosen if one.device == name] for name in names}
    heights = [
        max(52.0, 20 + 4.2 * len(group), 30 + 8.5 * len({one.length for one in group}))
        for group in groups.values()
    ]
    figure = new_figure(_WIDTH, sum(heights))
    grid = figure.subplots(len(names), 1, squeeze=False, height_ratios=heights).ravel()
    for axes, name, height in zip(grid, names, heights, strict=True):
        _draw_device(axes, case.devices, groups[name], height)
    return figure


def _draw_device(
    axes: Axes, devices: Mapping[str, CircuitDevice], group: Sequence[Chosen], height: float
) -> None:
    device = devices[group[0].device]
    assert isinstance(device, Device)
    lengths = sorted({one.length for one in group})[:_MOST_LENGTHS]
    vds = float(np.median([one.vds for one in group]))
    label, divisor = scale_axis("normalized_current", [[1e-6]])
    seen = np.array([one.normalized_current for one in group]) / divisor
    low, high = (
        10 ** np.floor(np.log10(np.min(seen)) - 0.5),
        10 ** np.ceil(np.log10(np.max(seen)) + 0.5),
    )
    tops = [0.0]
    for index, length in enumerate(lengths):
        curve = trace_curve(device, length=length, vds=vds, quantities=["normalized_current"])
        start = int(np.argmax(curve.values["gm_over_id"]))
        x = curve.values["normalized_current"][start:] / divisor
        y = curve.values["gm_over_id"][start:]
        style = choose_style(index)
        name = f"L = {length * 1e6:.4g} \N{MICRO SIGN}m"
        axes.semilogx(x, y, color=style.colour, linestyle=style.dash, label=name)
        tops.append(float(np.max(y[x >= low], initial=0.0)))
    axes.set_xlim(low, high)
    axes.set_ylim(0, 1.08 * max(*tops, *(one.gm_over_id for one in group)))
    _mark_points(axes, group, lengths, seen, height)
    axes.set_xlabel(label)
    axes.set_ylabel(scale_axis("gm_over_id", [[1.0]])[0])
    axes.set_title(f"{device.name}, {device.condition}, curves at vds = {vds:.2f} V", loc="left")
    axes.legend(loc="lower left", handlelength=3.5, fontsize=7, labelspacing=0.3, borderaxespad=0.3)


def _mark_points(
    axes: Axes, group: Sequence[Chosen], lengths: Sequence[float], seen: Array, height: float
) -> None:
    """Mark the points, their names in a column at the right, in the order of gm/Id."""
    top = axes.get_ylim()[1]
    levels = spread_heights(
        [one.gm_over_id for one in group], top * 0.97, top * 4.0 / (height - 18)
    )
    for one, x, level in zip(group, seen, levels, strict=True):
        style = choose_style(lengths.index(one.length) if one.length in lengths else 0)
        axes.plot([x], [one.gm_over_id], marker=style.marker, color=style.colour, markersize=5.5,
                  linestyle="none", markeredgecolor="#111111", zorder=5)  # fmt: skip
        axes.annotate(
            one.place, (x, one.gm_over_id), xytext=(1.02, level / top),
            textcoords="axes fraction", va="center", annotation_clip=False,
            arrowprops={"arrowstyle": "-", "color": "#808080", "linewidth": 0.5, "shrinkA": 1,
                        "shrinkB": 3, "relpos": (0.0, 0.5)},
        )  # fmt: skip


def spread_heights(wanted: Sequence[float], top: float, step: float) -> list[float]:
    """Move heights apart, as little as may be, so that words there do not overlap.

    Parameters
    ----------
    wanted : sequence of float
        Where they would stand.
    top : float
        None ends above it, unless there are too many.
    step : float
        Least distance.

    Returns
    -------
    list of float
        In the order of `wanted`.

    Examples
    --------
    >>> spread_heights([1.0, 1.0, 9.0], 10.0, 1.0)
    [0.5, 1.5, 9.0]
    >>> spread_heights([9.9, 9.8], 10.0, 1.0)
    [10.0, 9.0]
    """
    order = sorted(range(len(wanted)), key=lambda k: wanted[k])
    # blocks of neighbours that touch: each stands at the mean of what its members want
    blocks: list[list[int]] = []
    for index in order:
        blocks.append([index])
        while len(blocks) > 1 and _start(blocks[-1], wanted, step, top) < _end(
            blocks[-2], wanted, step, top
        ):
            last = blocks.pop()
            blocks[-1] += last
    found = [0.0] * len(wanted)
    for block in blocks:
        start = _start(block, wanted, step, top)
        for place, index in enumerate(block):
            found[index] = start + place * step
    return found


def _start(block: Sequence[int], wanted: Sequence[float], step: float, top: float) -> float:
    middle = float(np.mean([wanted[index] for index in block]))
    half = step * (len(block) - 1) / 2
    return max(min(middle - half, top - 2 * half), 0.0)


def _end(block: Sequence[int], wanted: Sequence[float], step: float, top: float) -> float:
    return _start(block, wanted, step, top) + step * len(block)
