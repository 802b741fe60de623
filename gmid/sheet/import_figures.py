"""Figures of an import: gm against the slope of the current, and the map of missing points."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gmid.sheet.figures import choose_style, drawing, new_figure, save_figure, scale_axis
from gmid.sweep.comparing import SlopeComparison, compare_gm
from gmid.sweep.coverage import Coverage
from gmid.sweep.model import Array, Sweep

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST_LENGTHS = 5
"""How many lengths are drawn of a table that has more."""

MOST_PANELS = 12
"""How many planes a map of missing points shows."""

_THERE, _MISSING = "#e6e6e6", "#7a1f1f"
_DOUBTFUL = 0.1
_DECADES = 9
_RATIO = r"$g_{m}$ over that slope"


def draw_import_figures(
    sweeps: Sequence[Sweep],
    coverages: Sequence[Coverage] = (),
    *,
    progress: Callable[[str, int, int], None] | None = None,
) -> dict[str, bytes]:
    """Draw what an import has to show.

    Parameters
    ----------
    sweeps : sequence of Sweep
        One figure each, of those with `gm` and at least four values of vgs.
    coverages : sequence of Coverage
        One figure for each that lacks points.
    progress : callable, keyword-only, optional
        Told of each figure: what, how many are done and how many there are.

    Returns
    -------
    dict of str to bytes
        SVG by name, such as ``gm_nmos_tt_27`` and ``missing_nmos_tt_27``.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> list(draw_import_figures([example_sweep(length=[1e-6], vsb=[0.0])]))
    ['gm_nmos_tt_27']
    """
    found = {}
    comparable = [sweep for sweep in sweeps if "gm" in sweep and sweep.vgs.size >= 4]
    wanted: list[Sweep | Coverage] = [*comparable, *(one for one in coverages if one.count)]
    with drawing():
        for done, one in enumerate(wanted):
            if progress is not None:
                progress(f"figure of {one.label}", done, len(wanted))
            name = f"{one.device}_{one.condition.corner}_{one.condition.temperature:g}"
            if isinstance(one, Coverage):
                found[f"missing_{name}"] = save_figure(draw_missing(one), "svg")
            else:
                figure = draw_slopes(compare_gm(one), one.label)
                found[f"gm_{name}"] = save_figure(figure, "svg")
    if progress is not None and wanted:
        progress("figures", len(wanted), len(wanted))
    return found


def draw_slopes(found: SlopeComparison, label: str) -> Figure:
    """Draw gm, the slope of the current beside it, and the ratio of the two, along vgs.

    Parameters
    ----------
    found : SlopeComparison
        Of one sweep.
    label : str
        Device and condition.

    Returns
    -------
    Figure
        To be saved inside `gmid.sheet.figures.drawing`; of a derived gm it says that there is
        nothing to compare, and shows gm alone.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> with drawing():
    ...     figure = draw_slopes(compare_gm(example_sweep()), "nmos tt/27")
    >>> [axes.get_ylabel() for axes in figure.axes]
    ['$g_{m}$ [mS]', 'deviation [%]']
    """
    figure = new_figure(150, 85 if found.derived else 140)
    upper, *rest = figure.subplots(1 if found.derived else 2, 1, sharex=True, squeeze=False)[:, 0]
    chosen = _choose_lengths(found.length.size)
    where = f"$V_{{DS}}$ = {found.vds:.4g} V, $V_{{SB}}$ = {found.vsb:.4g} V"
    figure.suptitle(f"{label}: {where}", fontsize=10)
    _draw_conductance(upper, found, chosen)
    for lower in rest:
        _draw_ratio(lower, found, chosen)
    (rest or [upper])[-1].set_xlabel(scale_axis("vgs", [found.vgs])[0])
    _name_lengths(figure, found, chosen)
    return figure


def draw_missing(coverage: Coverage) -> Figure:
    """Map the missing points over vgs and vds, one panel for each length and vsb that lacks any.

    Parameters
    ----------
    coverage : Coverage
        With missing points.

    Returns
    -------
    Figure
        To be saved inside `gmid.sheet.figures.drawing`; of more planes than fit, those that
        lack most, and in words how many others there are.

    Examples
    --------
    >>> from gmid.condition import Condition
    >>> axes = {"length": np.ones(1) * 1e-6, "vsb": np.zeros(1), "vds": np.arange(2.0),
    ...         "vgs": np.arange(3.0)}
    >>> lost = np.zeros((1, 1, 2, 3), dtype=bool)
    >>> lost[..., 1, 2] = True
    >>> with drawing():
    ...     figure = draw_missing(Coverage("n", Condition("tt", 27.0), axes, lost))
    >>> figure.axes[0].get_title(loc="left")
    '$L$ = 1 \u03bcm, $V_{SB}$ = 0 V: 1 of 6'
    """
    counts = coverage.missing.sum(axis=(2, 3))
    planes = np.argwhere(counts)
    order = np.argsort(-counts[tuple(planes.T)], kind="stable")
    shown = planes[np.sort(order[:MOST_PANELS])]
    columns = min(3, len(shown)) if len(shown) != 4 else 2
    rows = math.ceil(len(shown) / columns)
    figure = new_figure(max(110, 70 * columns), 58 * rows + 22)
    grid = figure.subplots(rows, columns, squeeze=False, sharex=True, sharey=True)
    figure.suptitle(_headline(coverage, counts, shown), fontsize=9)
    for place, axes in enumerate(grid.ravel()):
        if place >= len(shown):
            axes.set_axis_off()
            continue
        _draw_plane(axes, coverage, *(int(i) for i in shown[place]))
        if place + columns >= len(shown):
            axes.set_xlabel(scale_axis("vgs", [coverage.axes["vgs"]])[0])
            axes.tick_params(labelbottom=True)
        if place % columns == 0:
            axes.set_ylabel(scale_axis("vds", [coverage.axes["vds"]])[0])
    _explain(figure)
    return figure


def _choose_lengths(count: int) -> list[int]:
    """Take places evenly from the first to the last."""
    if count <= MOST_LENGTHS:
        return list(range(count))
    return [round(i * (count - 1) / (MOST_LENGTHS - 1)) for i in range(MOST_LENGTHS)]


def _word_length(length: float) -> str:
    return f"$L$ = {length * 1e6:.6g} \N{GREEK SMALL LETTER MU}m"


def _draw_conductance(axes: Axes, found: SlopeComparison, chosen: Sequence[int]) -> None:
    label, divisor = scale_axis("gm", [found.gm[chosen]])
    for place, row in enumerate(chosen):
        style = choose_style(place)
        words = style.keywords | {"linestyle": "none", "markersize": 3.5}
        held = _positive(found.gm[row] / divisor)
        axes.plot(found.vgs, held, color=style.colour, linestyle=style.dash)
        if not found.derived:
            axes.plot(found.vgs, _positive(found.slope[row] / divisor), **words)
    top = float(np.max(found.gm[chosen], initial=0.0)) / divisor
    axes.set_ylabel(label)
    if top > 0:
        axes.set_yscale("log")
        axes.set_ylim(max(axes.get_ylim()[0], top / 10**_DECADES), top * 3)
    text = (
        r"$g_{m}$ is derived from the current: the text holds none, so nothing is compared"
        if found.derived
        else r"Lines: $g_{m}$ as read; markers: slope of the current, "
        r"$I_{D}\,\mathrm{d}\ln I_{D}/\mathrm{d}V_{GS}$"
    )
    axes.set_title(text, loc="left", fontsize=8)


def _name_lengths(figure: Figure, found: SlopeComparison, chosen: Sequence[int]) -> None:
    from matplotlib.lines import Line2D

    handles = []
    for place, row in enumerate(chosen):
        keywords = choose_style(place).keywords | {"label": _word_length(found.length[row])}
        handles.append(Line2D([], [], **keywords | ({"marker": None} if found.derived else {})))
    figure.legend(
        handles=handles, loc="outside lower center", ncols=min(3, len(handles)), handlelength=4.0
    )


def _draw_ratio(axes: Axes, found: SlopeComparison, chosen: Sequence[int]) -> None:
    """Draw the deviation in percent, or the ratio on a logarithmic axis where it is large."""
    every = np.concatenate((found.low, found.high))
    every = every[np.isfinite(every)]
    if not every.size:
        axes.set_title(f"{_RATIO}: nowhere to be compared", loc="left", fontsize=8)
        axes.set_ylabel("ratio [-]")
        return
    large = bool(np.max(np.abs(every - 1)) > 0.5)
    change: Any = _positive if large else _percent
    some = np.isfinite(found.low)
    axes.fill_between(found.vgs[some], change(found.low[some]), change(found.high[some]),
                      color="#d8d8d8", linewidth=0)  # fmt: skip
    for limit in (1 - _DOUBTFUL, 1 + _DOUBTFUL):
        if large or np.max(np.abs(every - 1)) > 0.5 * _DOUBTFUL:
            axes.axhline(change(np.array(limit)), color="#606060", linewidth=0.8, linestyle="--")
    for place, row in enumerate(chosen):
        keywords = choose_style(place).keywords | {"markersize": 3.0, "linewidth": 1.0}
        axes.plot(found.vgs, change(found.ratio[row]), markevery=3, **keywords)
    axes.set_ylabel("ratio [-]" if large else "deviation [%]")
    if large:
        _scale_ratio(axes)
    axes.set_title(
        f"{_RATIO}{'' if large else ' less 1'}; grey: every length, vds and vsb that conducts",
        loc="left", fontsize=8,
    )  # fmt: skip


def _scale_ratio(axes: Axes) -> None:
    """Make a logarithmic axis with plain numbers on it."""
    from matplotlib.ticker import LogLocator, NullFormatter

    axes.set_yscale("log")
    low, high = axes.get_ylim()
    subs = (1.0, 2.0, 5.0) if high < 1000 * low else (1.0,)
    axes.yaxis.set_major_locator(LogLocator(subs=subs))
    axes.yaxis.set_major_formatter(lambda value, _: f"{value:g}")
    axes.yaxis.set_minor_formatter(NullFormatter())
    axes.set_ylim(min(low, 0.5), max(high, 2.0))


def _positive(values: Array) -> Array:
    return np.where(values > 0, values, np.nan)


def _percent(ratio: Array) -> Array:
    return 100 * (ratio - 1)


def _headline(coverage: Coverage, counts: NDArray[np.intp], shown: NDArray[np.intp]) -> str:
    total = coverage.missing.size
    words = f"{coverage.label}: {coverage.count} of {total} bias points missing"
    hidden = int(np.count_nonzero(counts)) - len(shown)
    if hidden:
        rest = coverage.count - int(counts[tuple(shown.T)].sum())
        words += f"\nnot shown: {hidden} more of length and vsb, with {rest} of them"
    return words


def _draw_plane(axes: Axes, coverage: Coverage, length: int, vsb: int) -> None:
    """Fill a rectangle for each run of missing points along vgs."""
    from matplotlib.collections import PolyCollection

    plane = coverage.missing[length, vsb]
    across, up = (_edges(coverage.axes[name]) for name in ("vgs", "vds"))
    axes.set_facecolor(_THERE)
    axes.grid(visible=False)
    corners = []
    for row, line in enumerate(plane):
        steps = np.flatnonzero(np.diff(np.concatenate(([0], line.astype(int), [0]))))
        for start, stop in steps.reshape(-1, 2):
            left, right, low, high = across[start], across[stop], up[row], up[row + 1]
            corners.append([(left, low), (right, low), (right, high), (left, high)])
    axes.add_collection(PolyCollection(corners, facecolor=_MISSING, edgecolor=_MISSING,
                                       linewidth=0.3))  # fmt: skip
    axes.set_xlim(across[0], across[-1])
    axes.set_ylim(up[0], up[-1])
    found = coverage.axes
    axes.set_title(
        f"{_word_length(found['length'][length])}, $V_{{SB}}$ = {found['vsb'][vsb]:.4g} V: "
        f"{np.count_nonzero(plane)} of {plane.size}", loc="left", fontsize=8,
    )  # fmt: skip


def _edges(axis: Array) -> Array:
    """Bounds of the cells around the values of an axis."""
    if axis.size == 1:
        return np.array([axis[0] - 0.5, axis[0] + 0.5])
    middle = 0.5 * (axis[1:] + axis[:-1])
    return np.concatenate(([2 * axis[0] - middle[0]], middle, [2 * axis[-1] - middle[-1]]))


def _explain(figure: Figure) -> None:
    from matplotlib.patches import Patch

    figure.legend(
        handles=[Patch(facecolor=_THERE, edgecolor="#b0b0b0", label="there"),
                 Patch(facecolor=_MISSING, label="missing")],
        loc="outside lower center", ncols=2,
    )  # fmt: skip
