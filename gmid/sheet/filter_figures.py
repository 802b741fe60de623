"""Figures of a filter: its response with the mask, and intrinsic gain against bandwidth."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from gmid.errors import UsageFault
from gmid.filters.demand_check import check_filter
from gmid.filters.demand_report import ResponseCurve, trace_response
from gmid.filters.demand_types import FilterDemands
from gmid.quantity import choose_prefix
from gmid.sheet.figures import choose_style, draw_curve, drawing, new_figure, save_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_MASK: dict[str, Any] = {"facecolor": "#e4e4e4", "edgecolor": "#b0b0b0", "linewidth": 0.6}
_FLOOR_DB = -100.0


def draw_filter_figures(found: FilterDemands) -> dict[str, bytes]:
    """Draw the figures of a filter with amplifiers exactly as demanded.

    Parameters
    ----------
    found : FilterDemands
        The filter.

    Returns
    -------
    dict of str to bytes
        SVG by name: ``filter_response``, ``filter_trade_off``.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> sorted(draw_filter_figures(found))
    ['filter_response', 'filter_trade_off']
    """
    curves = [
        trace_response(
            found, check_filter(found, found.models, rscale=ports.rscale, cscale=ports.cscale),
            condition=_name_corner(ports.rscale),
        )
        for ports in found.plane.ports
    ]  # fmt: skip
    with drawing():
        return {
            "filter_response": save_figure(draw_response(found, curves), "svg"),
            "filter_trade_off": save_figure(draw_trade_off(found), "svg"),
        }


def draw_filter(found: FilterDemands) -> dict[str, str]:
    """Draw the figures of a filter as text.

    Parameters
    ----------
    found : FilterDemands
        The filter.

    Returns
    -------
    dict of str to str
        As `draw_filter_figures`.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> "<svg" in draw_filter(found)["filter_response"]
    True
    """
    return {name: drawn.decode() for name, drawn in draw_filter_figures(found).items()}


def draw_realised(found: FilterDemands, curves: Sequence[ResponseCurve]) -> dict[str, str]:
    """Draw the figures of a filter with its real amplifiers as text.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    curves : sequence of ResponseCurve
        In every condition.

    Returns
    -------
    dict of str to str
        As `draw_filter`.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> from gmid.filters.demand_check import check_filter
    >>> from gmid.filters.demand_report import trace_response
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> curve = trace_response(found, check_filter(found, found.models))
    >>> sorted(draw_realised(found, [curve]))
    ['filter_response', 'filter_trade_off']
    """
    with drawing():
        figures = {
            "filter_response": draw_response(found, curves),
            "filter_trade_off": draw_trade_off(found),
        }
        return {name: save_figure(one, "svg").decode() for name, one in figures.items()}


def _name_corner(rscale: float) -> str:
    if rscale == 1.0:
        return "amplifiers as demanded"
    return f"resistors {100 * (rscale - 1.0):+.3g} %"


def draw_response(found: FilterDemands, curves: Sequence[ResponseCurve]) -> Figure:
    """Draw the response with its mask, and what real amplifiers do to it in the passband.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    curves : sequence of ResponseCurve
        With real amplifiers, at least one; up to eight can be told apart.

    Returns
    -------
    Figure
        Gain above, deviation below.

    Raises
    ------
    UsageFault
        If there is no curve.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> from gmid.filters.demand_check import check_filter
    >>> from gmid.filters.demand_report import trace_response
    >>> from gmid.sheet.figures import drawing
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> with drawing():
    ...     curve = trace_response(found, check_filter(found, found.models))
    ...     figure = draw_response(found, [curve])
    >>> len(figure.axes)
    2
    """
    if not curves:
        raise UsageFault("a figure of the response needs at least one curve.")
    figure = new_figure(160, 130)
    top, bottom = figure.subplots(2, 1, height_ratios=(3, 2))
    every = np.concatenate([curve.frequency for curve in curves])
    prefix, power = choose_prefix([float(found.plane.fine.passband[1])])
    divisor = float(f"1e{power}")
    _draw_gain(top, found, curves, (float(every.min()), float(every.max())), divisor)
    _draw_deviation(bottom, found, curves, divisor)
    bottom.set_xlabel(f"Frequency [{prefix}Hz]")
    lines = [*top.get_lines()[:1], *bottom.get_lines()]
    figure.legend(handles=lines, loc="outside lower center", ncols=4 if len(lines) > 4 else 2)
    return figure


def _draw_gain(
    axes: Axes, found: FilterDemands, curves: Sequence[ResponseCurve], band: tuple[float, float],
    divisor: float,
) -> None:  # fmt: skip
    stick = found.plane.fine
    f = np.geomspace(*band, 600)
    with np.errstate(divide="ignore"):
        ideal = 20.0 * np.log10(np.abs(stick.ideal(f)))
    ideal = np.maximum(ideal, _FLOOR_DB)
    _draw_mask(axes, found, band, divisor)
    axes.semilogx(f / divisor, ideal, color="black", linewidth=0.8, label="ideal")
    for k, curve in enumerate(curves):
        draw_curve(axes, curve.frequency / divisor, curve.gain_db, choose_style(k),
                   label=curve.condition)  # fmt: skip
    lowest = min(float(ideal.min()), *(float(curve.gain_db.min()) for curve in curves))
    axes.set_ylim(max(_FLOOR_DB, lowest - 5.0), stick.reference_db + 5.0)
    axes.set_xlim(band[0] / divisor, band[1] / divisor)
    axes.set_ylabel("Gain [dB]")


def _draw_mask(axes: Axes, found: FilterDemands, band: tuple[float, float], divisor: float) -> None:
    """Shade where the gain may not be: under the passband and over the stopband."""
    spec, stick = found.spec, found.plane.fine
    low, high = stick.passband
    ripple = spec.ripple_db if spec.ripple_db is not None else 3.0103
    limit = stick.reference_db - ripple - found.tolerance.passband_db
    axes.fill_between(np.array([low, high]) / divisor, limit, 2 * _FLOOR_DB, **_MASK)
    if spec.attenuation_db is None:
        return
    ceiling = stick.reference_db - spec.attenuation_db + found.tolerance.stopband_db
    for start, stop in stick.stopbands:
        edges = np.array([max(start, band[0]), min(stop, band[1])]) / divisor
        axes.fill_between(edges, ceiling, stick.reference_db + 20.0, **_MASK)


def _draw_deviation(
    axes: Axes, found: FilterDemands, curves: Sequence[ResponseCurve], divisor: float
) -> None:
    allowed = found.tolerance.passband_db
    axes.axhspan(allowed, 10 * allowed, **_MASK)
    axes.axhspan(-10 * allowed, -allowed, **_MASK)
    largest = allowed
    for k, curve in enumerate(curves):
        there = np.isfinite(curve.deviation_db)
        aside = f", shift {100 * curve.shift:+.2f} % aside" if curve.tuned else ""
        draw_curve(axes, curve.frequency[there] / divisor, curve.deviation_db[there],
                   choose_style(k), label=f"{curve.condition}{aside}")  # fmt: skip
        largest = max(largest, float(np.abs(curve.deviation_db[there]).max()))
    axes.set_xscale("log" if found.spec.kind != "bandpass" else "linear")
    axes.set_ylim(-1.25 * largest, 1.25 * largest)
    axes.set_ylabel("Deviation [dB]")


def draw_trade_off(found: FilterDemands) -> Figure:
    """Draw which intrinsic gain needs how much bandwidth.

    Parameters
    ----------
    found : FilterDemands
        The filter.

    Returns
    -------
    Figure
        All points keep the tolerance; the demand is marked.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> from gmid.sheet.figures import drawing
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> with drawing():
    ...     axes = draw_trade_off(found).axes[0]
    >>> axes.get_xlabel()
    'Intrinsic gain [dB]'
    """
    trade = found.trade_off
    is_gm_c = found.spec.style == "gm-c"
    prefix, power = choose_prefix([trade.chosen[1]])
    divisor = float(f"1e{power}")
    figure = new_figure(160, 80)
    axes = figure.add_subplot()
    there = np.isfinite(trade.intrinsic_gain)
    gain_db = 20.0 * np.log10(trade.intrinsic_gain[there])
    draw_curve(axes, gain_db, trade.gm_sum[there] / divisor, choose_style(0),
               label="just keeps the tolerance", markers=20)  # fmt: skip
    for level in trade.gm_sum[~there] / divisor:
        axes.axhline(level, color="#808080", linewidth=0.8, linestyle=":", label="infinite gain")
    axes.axvline(20.0 * np.log10(trade.least_gain), color="#808080", linewidth=0.8,
                 linestyle="--", label="infinite bandwidth")  # fmt: skip
    axes.plot(20.0 * np.log10(trade.chosen[0]), trade.chosen[1] / divisor, linestyle="none",
              marker="*", markersize=9, color=choose_style(1).colour, label="demand")  # fmt: skip
    axes.set_yscale("log")
    for axis in (axes.yaxis.set_major_formatter, axes.yaxis.set_minor_formatter):
        axis("{x:g}")
    axes.set_xlabel("Intrinsic gain [dB]")
    what = "Mean excess pole" if is_gm_c else "Sum of gm_total"
    axes.set_ylabel(f"{what} [{prefix}{'Hz' if is_gm_c else 'S'}]")
    axes.legend()
    return figure
