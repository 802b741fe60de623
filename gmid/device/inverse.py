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
from gmid.device.roots import bracket, solve_false_position
from gmid.device.spline import Array, SplineAxis
from gmid.device.windows import Places, Windows, pick_stencil, solve_span

_CHUNK = 512
"""Points whose whole curves are held at a time."""

_MANY = 1500
"""Points from which on bounds are worth their cost."""

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
    scaled, places = drive.scale(target), _place(drive, length, vds, vsb)
    shift = interpolant.threshold(length, vsb)
    factor = saturate(vds, interpolant.grid.condition.thermal_voltage)
    found, low, high = np.full((3, target.size), np.nan)
    if target.size >= _MANY:
        found = Windows(drive, places, drive.sense * scaled, shift, factor).solve()
    missed = np.zeros(target.size, dtype=bool)
    left = places.sorted[0]
    left = left[np.isnan(found[left])]
    for start in range(0, left.size, _CHUNK):
        part = left[start : start + _CHUNK]
        found[part], low[part], high[part] = _solve_chunk(
            drive, places.collapse(part), scaled[part], shift[part], factor[part]
        )
        missed[part] = np.isnan(found[part])
    reach = (drive.unscale(low), drive.unscale(high))
    points = {"length": length, "vds": vds, "vsb": vsb}
    refuse_targets(interpolant.grid.sweep, name, target, reach, points, missed)
    return found


def _place(drive: Drive, length: Array, vds: Array, vsb: Array) -> Places:
    """Find points among the cells of the splines that a drive needs."""
    settled = drive.interpolant.settle(drive.columns, length)
    if settled is not None:
        return Places(settled[0], *settled[0].cells(settled[1], vsb, vds))
    bulk = bulk_coordinate(vsb, float(drive.interpolant.grid.sweep.vsb[0]))
    stack = drive.interpolant.stack(drive.columns)
    return Places(stack, *stack.cells(length_coordinate(length), bulk, drain_coordinate(vds)))


def _solve_chunk(
    drive: Drive, lines: Array, target: Array, shift: Array, factor: Array
) -> tuple[Array, Array, Array]:
    """Solve on whole curves, shape (quantities, n, n_gate); give the roots and the range."""
    gate, sweep = drive.interpolant.axes[3], drive.interpolant.grid.sweep
    nodes = (lines[..., :-2] + 4 * lines[..., 1:-1] + lines[..., 2:]) / 6
    curve = drive.values(nodes, factor[:, None])
    ends = [
        np.clip(vgs - shift, gate.breaks[0], gate.breaks[-1])
        for vgs in (sweep.vgs[0], sweep.vgs[-1])
    ]
    first, last = (drive.values(_read_lines(gate, lines, end), factor) for end in ends)
    curve = np.where(gate.points <= ends[0][:, None], first[:, None], curve)
    curve = np.where(gate.points >= ends[1][:, None], last[:, None], curve)
    cell, target, low, high = bracket(drive.sense, curve, target)
    step = gate.breaks[1] - gate.breaks[0]
    bracketed = [
        (np.clip(gate.points[cell + side], *ends) - gate.breaks[cell]) / step for side in (0, 1)
    ]
    root = solve_span(drive, gate, cell, pick_stencil(lines, cell), factor, target, bracketed)
    return root + shift, low, high


def _read_lines(gate: SplineAxis, lines: Array, places: Array) -> Array:
    """Evaluate each curve, of coefficients along the gate axis, at a place of its own."""
    span, place = gate.locate(places)
    return np.asarray(np.einsum("qnc,nc->qn", pick_stencil(lines, span), gate.weights(span, place)))


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
        return drive.values(values.T, saturate(vgs, thermal_voltage))

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
