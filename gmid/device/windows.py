"""Where along the gate axis a drive is met, told by bounds, so that little has to be collapsed.

A spline lies between the least and the largest of the coefficients that bear on it.  For each
cell of (length, vsb, vds) this bounds a drive along the gate axis, whatever the point in the
cell.  A target then lies within a few spans, and only there the curve of a point is collapsed.
What the bounds leave open, at the ends of the table or with noisy data, is left to the whole
curves of `gmid.device.inverse`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Protocol
from weakref import WeakKeyDictionary

import numpy as np

from gmid.device.cells import multiply_weights, sort_cells
from gmid.device.channel import saturate
from gmid.device.coordinates import invert_drain
from gmid.device.drive import Drive
from gmid.device.roots import find_last, solve_newton
from gmid.device.spline import Array, Indices, SplineAxis

_WIDEST = 32
"""Spans to which a target must be narrowed down, or the whole curve is taken."""

_TOGETHER = 4
"""Spans whose windows are collapsed alike."""

_CHUNK = 2048
"""Points solved at a time, so that their curves stay in the cache."""

_ROUNDING = 1e-9
"""Room left for rounding where a bound excludes a crossing."""


class Celled(Protocol):
    """Coefficients that are read cell by cell: `Stack` or `Collapsed`."""

    @property
    def vds(self) -> SplineAxis:
        """The drain axis."""

    @property
    def gate(self) -> SplineAxis:
        """The shifted gate axis."""

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of cells along length, vsb and vds."""

    def extremes(self) -> tuple[Array, Array]:
        """Give the least and largest coefficient that bear on each cell.

        Returns
        -------
        least, most : ndarray, shape (*shape, gate spans, quantities)
            Bounds of the splines.
        """

    def block(self, corner: Sequence[int], gates: slice = ...) -> Array:
        """Give the coefficients that bear on one cell.

        Parameters
        ----------
        corner : sequence of int
            Spans of the cell.
        gates : slice
            Which of the coefficients along the gate axis.

        Returns
        -------
        ndarray, shape (products of the weights, quantities, n_gate)
            Coefficients.
        """


_BOUNDS: WeakKeyDictionary[Celled, tuple[Array, Array]] = WeakKeyDictionary()
"""Bounds once found, as long as their splines are kept."""


@dataclass(frozen=True, eq=False)
class Places:
    """Points among the cells of a spline.

    Parameters
    ----------
    spline : Celled
        The spline.
    spans : list of ndarray of int, shape (n,)
        Their cells.
    weights : list of ndarray, shape (n, order)
        Weights of the coefficients of `spline.block`.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis, uniform_axis
    >>> from gmid.device.stack import Stack
    >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
    >>> stack = Stack(one, one, one, gate, np.ones((1, 1, 7, 1, 2)))
    >>> Places(stack, *stack.cells(*np.zeros((3, 5)))).collapse(np.arange(3)).shape
    (2, 3, 7)
    """

    spline: Celled
    spans: list[Indices]
    weights: list[Array]

    @cached_property
    def sorted(self) -> tuple[Indices, list[int], list[list[int]]]:
        """Points in the order of their cells, where each begins, and its spans."""
        return sort_cells(self.spline.shape, self.spans)

    def collapse(self, points: Indices) -> Array:
        """Collapse some points to coefficients along the whole gate axis.

        Parameters
        ----------
        points : ndarray of int, shape (m,)
            Which.

        Returns
        -------
        ndarray, shape (quantities, m, n_gate)
            Coefficients of one curve for each quantity and point.
        """
        order, starts, corners = sort_cells(self.spline.shape, [s[points] for s in self.spans])
        weights = [weight[points] for weight in self.weights]
        found = None
        for members, corner in zip(np.split(order, starts[1:]), corners, strict=True):
            block = self.spline.block(corner)
            if found is None:
                found = np.empty((block.shape[1], points.size, block.shape[2]))
            outer = multiply_weights([weight[members] for weight in weights])
            lines = (outer @ block.reshape(len(block), -1)).reshape(-1, *block.shape[1:])
            found[:, members] = lines.swapaxes(0, 1)
        return np.empty((0, 0, 0)) if found is None else found


def bound_drive(drive: Drive, spline: Celled) -> tuple[Array, Array]:
    """Bound the rising drive in each cell, from each span of the gate axis up to its end.

    Parameters
    ----------
    drive : Drive
        The drive.
    spline : Celled
        Its transformed quantities.

    Returns
    -------
    least, most : ndarray, shape (cells, gate spans)
        Least value of the lower and of the upper bounds of all spans from here on; the drive
        is taken with its sense, so that it rises where the device is on.

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
    >>> from gmid.device.example import example_sweep
    >>> from gmid.device.interpolant import Interpolant
    >>> splines = Interpolant(AlignedGrid(example_sweep()))
    >>> drive = Drive("id", splines)
    >>> least, most = bound_drive(drive, splines.stack(drive.columns))
    >>> bool(np.all(least <= most)) and bool(np.all(np.diff(least) >= 0))
    True
    """
    if spline in _BOUNDS:
        return _BOUNDS[spline]
    ends = saturate(
        invert_drain(spline.vds.breaks), drive.interpolant.grid.condition.thermal_voltage
    )
    low, high = (np.moveaxis(part, -1, 0) for part in spline.extremes())
    lower, upper = drive.bounds(low, high, ends[:-1, None], ends[1:, None])
    if drive.sense < 0:
        lower, upper = -upper, -lower
    least, most = (
        np.minimum.accumulate(part.reshape(-1, part.shape[-1])[:, ::-1], axis=1)[:, ::-1]
        for part in (lower, upper)
    )
    _BOUNDS[spline] = (least, most)
    return least, most


@dataclass(frozen=True, eq=False)
class Windows:
    """Drives sought at many points, each within a few spans of the gate axis.

    Parameters
    ----------
    drive : Drive
        The drive.
    places : Places
        Points among the cells.
    goal : ndarray, shape (n,)
        Scaled targets times the drive's sense.
    shift : ndarray, shape (n,)
        Threshold [V].
    factor : ndarray, shape (n,)
        Saturation factor [-].

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
    >>> from gmid.device.example import example_sweep
    >>> from gmid.device.interpolant import Interpolant
    >>> splines, one = Interpolant(AlignedGrid(example_sweep())), np.ones(2)
    >>> drive = Drive("gm_over_id", splines)
    >>> stack = splines.stack(drive.columns)
    >>> places = Places(stack, *stack.cells(np.log(1e-6 * one), np.sqrt(0.8 * one), 0 * one))
    >>> shift, goal = splines.threshold(1e-6 * one, 0 * one), np.array([-15.0, -10.0])
    >>> Windows(drive, places, goal, shift, one).solve().round(3)
    array([0.49 , 0.583])
    """

    drive: Drive
    places: Places
    goal: Array
    shift: Array
    factor: Array

    def solve(self) -> Array:
        """Find the gate voltages.

        Returns
        -------
        ndarray, shape (n,)
            Gate-source voltage [V]; nan where the bounds do not tell.
        """
        found = np.full(self.goal.size, np.nan)
        points, cells, left, right = self._narrow()
        if not points.size:
            return found
        gate = self.places.spline.gate
        top = right // _TOGETHER
        width = min(int(np.max(right - left)) + _TOGETHER, gate.spans)
        order = np.argsort(cells * (gate.spans // _TOGETHER + 1) + top, kind="stable")
        points, cells, top = points[order], cells[order], top[order]
        first = np.clip((top + 1) * _TOGETHER - width, 0, gate.spans - width)
        for start in range(0, points.size, _CHUNK):
            part = slice(start, start + _CHUNK)
            found[points[part]] = self._solve_part(points[part], cells[part], first[part], width)
        return found

    def _narrow(self) -> tuple[Indices, Indices, Indices, Indices]:
        """Give the points that bounds narrow down, their cells, and first and last span."""
        bounds = bound_drive(self.drive, self.places.spline)
        order, starts, corners = self.places.sorted
        goal = self.goal[order]
        padded = goal + _ROUNDING * (1.0 + np.abs(goal))
        left, right = np.empty((2, goal.size), dtype=np.intp)
        cells = np.ravel_multi_index(np.transpose(corners), self.places.spline.shape)
        for cell, start, stop in zip(cells, starts, [*starts[1:], goal.size], strict=True):
            here = slice(start, stop)
            right[here] = np.searchsorted(bounds[0][cell], padded[here], side="right") - 1
            left[here] = np.searchsorted(bounds[1][cell], goal[here], side="left") - 1
        good = (left >= 0) & (right < bounds[0].shape[1] - 1) & (right - left < _WIDEST)
        counts = np.diff([*starts, goal.size])
        return order[good], np.repeat(cells, counts)[good], left[good], right[good]

    def _solve_part(self, points: Indices, cells: Indices, first: Indices, width: int) -> Array:
        """Solve on the curves within the windows of some points, sorted by cell and window."""
        gate, sweep = self.places.spline.gate, self.drive.interpolant.grid.sweep
        factor, goal, shift = self.factor[points], self.goal[points], self.shift[points]
        lines = self._collapse(points, cells, first, width)
        nodes = (lines[..., :-2] + 4 * lines[..., 1:-1] + lines[..., 2:]) / 6
        curve = self.drive.sense * self.drive.values(nodes, factor[:, None])
        good = (curve[:, 0] <= goal) & (curve[:, -1] >= goal)
        good &= gate.points[first] >= sweep.vgs[0] - shift
        good &= gate.points[first + width] <= sweep.vgs[-1] - shift
        cell = find_last(curve, goal)
        rows = np.arange(points.size)
        low, high = curve[rows, cell], curve[rows, cell + 1]
        share = np.divide(goal - low, high - low, out=np.full(low.shape, 0.5), where=high > low)
        target = np.where(good, self.drive.sense * goal, np.nan)
        stencil, zero = pick_stencil(lines, cell), np.zeros(points.size)
        root = solve_span(
            self.drive, gate, first + cell, stencil, factor, target, (zero, zero + 1.0), share
        )
        return root + shift

    def _collapse(self, points: Indices, cells: Indices, first: Indices, width: int) -> Array:
        """Collapse points to the coefficients of their windows, (quantities, n, width + 3)."""
        places = self.places
        outer = multiply_weights([weight[points] for weight in places.weights])
        found = np.empty((len(self.drive.columns), points.size, width + 3))
        change = np.flatnonzero((np.diff(cells) != 0) | (np.diff(first) != 0)) + 1
        starts = [0, *change.tolist()]
        for start, stop in zip(starts, [*starts[1:], points.size], strict=True):
            corner = [int(span[points[start]]) for span in places.spans]
            at = int(first[start])
            block = places.spline.block(corner, slice(at, at + width + 3))
            lines = outer[start:stop] @ block.reshape(len(block), -1)
            found[:, start:stop] = lines.reshape(stop - start, len(found), -1).swapaxes(0, 1)
        return found


def pick_stencil(lines: Array, span: Indices) -> Array:
    """Take the coefficients that bear on one span of each curve.

    Parameters
    ----------
    lines : ndarray, shape (quantities, n, n_gate)
        Coefficients along the gate axis.
    span : ndarray of int, shape (n,)
        Which span.

    Returns
    -------
    ndarray, shape (quantities, n, 4)
        Coefficients.

    Examples
    --------
    >>> pick_stencil(np.arange(12.0).reshape(1, 2, 6), np.array([0, 2]))[0, 1]
    array([ 8.,  9., 10., 11.])
    """
    count, points, size = lines.shape
    first = size * np.arange(points) + span
    return lines.reshape(count, -1)[:, first[:, None] + np.arange(4)]


def solve_span(
    drive: Drive,
    gate: SplineAxis,
    span: Indices,
    stencil: Array,
    factor: Array,
    target: Array,
    ends: Sequence[Array],
    start: Array | None = None,
) -> Array:
    """Solve for a drive within one span of the gate axis.

    Parameters
    ----------
    drive : Drive
        The drive.
    gate : SplineAxis
        The shifted gate axis.
    span : ndarray of int, shape (n,)
        Span that holds the crossing.
    stencil : ndarray, shape (quantities, n, 4)
        Coefficients that bear on it.
    factor : ndarray, shape (n,)
        Saturation factor [-].
    target : ndarray, shape (n,)
        Scaled drive; nan is passed over.
    ends : sequence of ndarray, shape (n,)
        Bracket within the span, 0 to 1.
    start : ndarray, shape (n,), optional
        Where in it to begin; in the middle by default.

    Returns
    -------
    ndarray, shape (n,)
        Shifted gate voltage [V], nan where the target is.

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
    >>> from gmid.device.example import example_sweep
    >>> from gmid.device.interpolant import Interpolant
    >>> drive = Drive("gm_over_id", Interpolant(AlignedGrid(example_sweep())))
    >>> gate, one = drive.interpolant.axes[3], np.ones(1)
    >>> stencil = np.array([[[20.0, 18.0, 16.0, 14.0]]])
    >>> root = solve_span(drive, gate, np.array([3]), stencil, one, 17.5 * one, (0 * one, one))
    >>> ((root - gate.breaks[3]) / (gate.breaks[4] - gate.breaks[3])).round(9)
    array([0.25])
    """
    step = float(gate.breaks[1] - gate.breaks[0])
    powers = np.einsum("cp,qnc->pqn", gate.basis[0], stencil)

    def evaluate(t: Array) -> tuple[Array, Array]:
        values = ((powers[3] * t + powers[2]) * t + powers[1]) * t + powers[0]
        tilts = (3 * powers[3] * t + 2 * powers[2]) * t + powers[1]
        return drive.values(values, factor), drive.slopes(values, tilts, factor)

    root = solve_newton(evaluate, target, ends[0], ends[1], drive.sense, start=start)
    return np.where(np.isnan(target), np.nan, gate.breaks[span] + step * root)
