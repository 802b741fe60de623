"""From a drive (gm/Id, current, Vdsat) back to the gate voltage.

At given length, vds and vsb the splines collapse to curves along the gate axis.  The last
crossing of the target in the drive's own sense is taken: gm/Id falls and the others rise
where the device is on, and what leakage does below is left aside.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gmid.device.channel import saturate
from gmid.device.coordinates import bulk_coordinate, drain_coordinate, length_coordinate
from gmid.device.drive import Drive
from gmid.device.interpolant import Interpolant
from gmid.device.reach import refuse_targets
from gmid.device.roots import bracket, solve_false_position, solve_newton
from gmid.device.spline import Array, Indices, SplineAxis

_CHUNK = 512
_SAMPLES = 81
"""Points along vgs = vds at which a diode's curve is first looked at."""


def solve_drive(
    interpolant: Interpolant, name: str, target: Array, length: Array, vds: Array, vsb: Array
) -> Array:
    """Find the gate voltage that gives a drive.

    Parameters
    ----------
    interpolant : Interpolant
        The splines.
    name : str
        ``gm_over_id``, ``id``, ``current_density`` or ``vdsat``.
    target : ndarray, shape (n,)
        What is asked for: [1/V], [A] of one unit, [A/m] or [V].
    length, vds, vsb : ndarray, shape (n,)
        Channel length [m] and voltages [V], inside the table.

    Returns
    -------
    ndarray, shape (n,)
        Gate-source voltage [V].

    Raises
    ------
    OutOfReach
        If the table does not reach a target; all of them are named.

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
    >>> from gmid.device.example import example_sweep
    >>> spline = Interpolant(AlignedGrid(example_sweep()))
    >>> one = np.ones(1)
    >>> bias = (one * 1e-6, one * 0.6, one * 0)
    >>> float(solve_drive(spline, "gm_over_id", one * 15, *bias)[0].round(3))
    0.49
    """
    drive = Drive(name, interpolant)
    found = np.empty(target.size)
    settled = interpolant.settle(drive.columns, length)
    low, high = np.empty(target.size), np.empty(target.size)
    scaled = drive.scale(target)
    order = _sort_by_cell(interpolant, length, vds)
    for start in range(0, target.size, _CHUNK):
        part = order[start : start + _CHUNK]
        if settled is not None:
            lines = settled[0].curves(settled[1][part], vsb[part], vds[part])
        else:
            lines = _collapse_all(drive, length[part], vds[part], vsb[part])
        shift = interpolant.threshold(length[part], vsb[part])
        found[part], low[part], high[part] = _solve_chunk(
            drive, scaled[part], lines, shift, vds[part]
        )
    reach = (drive.unscale(low), drive.unscale(high))
    points = {"length": length, "vds": vds, "vsb": vsb}
    refuse_targets(interpolant.grid.sweep, name, target, reach, points, np.isnan(found))
    return found


def _sort_by_cell(interpolant: Interpolant, length: Array, vds: Array) -> Indices:
    """Order points so that those of one cell of length and vds lie together."""
    along, _ = interpolant.axes[0].locate(length_coordinate(length))
    across, _ = interpolant.axes[2].locate(drain_coordinate(vds))
    return np.lexsort((across, along))


def _collapse_all(drive: Drive, length: Array, vds: Array, vsb: Array) -> Array:
    """Collapse the splines over all four axes to curves along the gate axis."""
    bulk = bulk_coordinate(vsb, float(drive.interpolant.grid.sweep.vsb[0]))
    stack = drive.interpolant.stack(drive.columns)
    return stack.curves(length_coordinate(length), bulk, drain_coordinate(vds))


def _solve_chunk(
    drive: Drive, target: Array, lines: Array, shift: Array, vds: Array
) -> tuple[Array, Array, Array]:
    """Solve on curves along the gate axis, given by their coefficients and thresholds."""
    spline, sweep = drive.interpolant, drive.interpolant.grid.sweep
    gate = spline.axes[3]
    factor = saturate(vds, spline.grid.condition.thermal_voltage)

    nodes = (lines[:, :-2] + 4 * lines[:, 1:-1] + lines[:, 2:]) / 6
    curve = drive.values(nodes, factor[:, None])
    ends = [
        np.clip(vgs - shift, gate.breaks[0], gate.breaks[-1])
        for vgs in (sweep.vgs[0], sweep.vgs[-1])
    ]
    places = np.broadcast_to(gate.points, curve.shape)
    first, last = (drive.values(_read_lines(gate, lines, end), factor) for end in ends)
    curve = np.where(places <= ends[0][:, None], first[:, None], curve)
    curve = np.where(places >= ends[1][:, None], last[:, None], curve)
    places = np.clip(places, ends[0][:, None], ends[1][:, None])
    cell, target, low, high = bracket(drive.sense, curve, target)
    rows = np.arange(target.size)
    step = gate.breaks[1] - gate.breaks[0]
    powers = np.einsum("cp,ncq->pnq", gate.basis[0], _pick(lines, cell))

    def evaluate(places: Array) -> tuple[Array, Array]:
        """Scaled drive and slope at places of shape (n,) within the cells found."""
        t = ((places - gate.breaks[cell]) / step)[:, None]
        values = ((powers[3] * t + powers[2]) * t + powers[1]) * t + powers[0]
        tilts = ((3 * powers[3] * t + 2 * powers[2]) * t + powers[1]) / step
        return drive.values(values, factor), drive.slopes(values, tilts, factor)

    root = solve_newton(evaluate, target, places[rows, cell], places[rows, cell + 1], drive.sense)
    return np.where(np.isnan(target), np.nan, root + shift), low, high


def _read_lines(gate: SplineAxis, lines: Array, places: Array) -> Array:
    """Evaluate each curve, of coefficients along the gate axis, at a place of its own."""
    span, place = gate.locate(places)
    return np.asarray(np.einsum("ncq,nc->nq", _pick(lines, span), gate.weights(span, place)))


def _pick(lines: Array, span: Indices) -> Array:
    """Take the coefficients that bear on one span of each curve."""
    count, size, _ = lines.shape
    first = size * np.arange(count) + span
    return np.asarray(lines.reshape(count * size, -1)[first[:, None] + np.arange(4)])


def solve_diode(
    interpolant: Interpolant, name: str, target: Array, length: Array, vsb: Array
) -> Array:
    """Find the gate voltage of a diode-connected device (vds = vgs) that gives a drive.

    Parameters
    ----------
    interpolant : Interpolant
        The splines.
    name : str
        ``gm_over_id``, ``id``, ``current_density`` or ``vdsat``.
    target : ndarray, shape (n,)
        What is asked for: [1/V], [A] of one unit, [A/m] or [V].
    length, vsb : ndarray, shape (n,)
        Channel length [m] and body bias [V], inside the table.

    Returns
    -------
    ndarray, shape (n,)
        Gate-source voltage [V].

    Raises
    ------
    OutOfReach
        If the table does not reach a target; all of them are named.

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
    >>> from gmid.device.example import example_sweep
    >>> spline = Interpolant(AlignedGrid(example_sweep()))
    >>> one = np.ones(1)
    >>> float(solve_diode(spline, "id", one * 1e-6, one * 1e-6, one * 0)[0].round(3))
    0.433
    """
    drive, sweep = Drive(name, interpolant), interpolant.grid.sweep
    thermal_voltage = interpolant.grid.condition.thermal_voltage

    def evaluate(vgs: Array, rows: NDArray[np.intp]) -> Array:
        bias = (length[rows], vgs, vgs, vsb[rows])
        values = interpolant.tables(drive.columns, *bias)
        return drive.values(values, saturate(vgs, thermal_voltage))

    first = max(float(sweep.vgs[0]), float(sweep.vds[0]), 1e-3)
    samples = np.linspace(first, min(float(sweep.vgs[-1]), float(sweep.vds[-1])), _SAMPLES)
    rows = np.arange(target.size)
    curve = evaluate(np.tile(samples, target.size), np.repeat(rows, _SAMPLES))
    cell, goal, low, high = bracket(
        drive.sense, curve.reshape(target.size, _SAMPLES), drive.scale(target)
    )
    reach = (drive.unscale(low), drive.unscale(high))
    points = {"length": length, "vds": vsb, "vsb": vsb}
    refuse_targets(sweep, name, target, reach, points, np.isnan(goal), diode=True)
    return solve_false_position(
        lambda vgs: drive.sense * (evaluate(vgs, rows) - goal), samples[cell], samples[cell + 1]
    )
