"""Splines at settled lengths: the hot path of a circuit's bias and small-signal solution.

The length is collapsed once for each that is in use.  What is left are three axes, and for
each point a stencil of at most 4 x 4 x 4 coefficients for each quantity, read as four runs of
consecutive numbers.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.lib.stride_tricks import as_strided

from gmid.device.cells import place_points, slide
from gmid.device.coordinates import drain_coordinate, drain_stretch
from gmid.device.spline import Array, Indices, SplineAxis

if TYPE_CHECKING:
    from gmid.device.plain import PointReader

OFF_SLOPE, ON_SLOPE = 10.0, 1.0
"""Slopes of ln id by vgs below and above the table, for a solver on its way [1/V]."""

_CHUNK = 1 << 18
"""Numbers gathered at a time, so that they stay in the cache."""

_POINTS = 1024
"""Points whose stencils are gathered at a time for the gradient."""


@dataclass(frozen=True, eq=False)
class Place:
    """Where points lie among the coefficients, and with which weights.

    Parameters
    ----------
    first : ndarray of int, shape (n,)
        First run of coefficients.
    vds, gate, vsb : ndarray, shape (n, order)
        Weights along each axis.
    vds_slope, gate_slope, vsb_slope : ndarray, shape (n, order)
        Weights of derivatives by vds, by the shifted gate voltage, and by vsb [1/V].
    threshold_slope : ndarray, shape (n,)
        Derivative of the threshold by vsb [-].
    beyond : ndarray, shape (n,)
        How far the shifted gate voltage lies outside its axis [V].

    Examples
    --------
    >>> empty = np.empty((0, 4))
    >>> Place(np.empty(0, int), *[empty] * 6, np.empty(0), np.empty(0)).first.size
    0
    """

    first: Indices
    vds: Array
    gate: Array
    vsb: Array
    vds_slope: Array
    gate_slope: Array
    vsb_slope: Array
    threshold_slope: Array
    beyond: Array


@dataclass(frozen=True, eq=False)
class Collapsed:
    """Splines of several quantities over vsb, vds and vgs, at one or more lengths.

    Parameters
    ----------
    vsb, vds, gate : SplineAxis
        Axes; vsb and vds in their coordinates, the gate shifted by the threshold.
    coefficients : ndarray, shape (lengths, vsb spans, n_vds, n_gate, vsb order, quantities)
        As `expand_spans` gives them.
    threshold : ndarray, shape (lengths, vsb spans, vsb order)
        Coefficients of the threshold [V].
    offset : float
        Phi of the body-bias coordinate [V].

    Examples
    --------
    >>> from gmid.device.spline import natural_axis, uniform_axis
    >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
    >>> spline = Collapsed(one, one, gate, (gate.operator @ gate.points).reshape(1, 1, 1, 7, 1, 1),
    ...                    np.zeros((1, 1, 1)), 0.8)
    >>> place = spline.locate(np.zeros(1, int), np.array([0.3]), np.zeros(1), np.zeros(1))
    >>> spline.values(place).round(12)
    array([[0.3]])
    """

    vsb: SplineAxis
    vds: SplineAxis
    gate: SplineAxis
    coefficients: Array
    threshold: Array
    offset: float

    @property
    def lengths(self) -> int:
        """Number of lengths."""
        return int(self.coefficients.shape[0])

    @cached_property
    def _runs(self) -> Array:
        """Overlapping rows: all that one point needs at one vds, side by side."""
        lengths, spans, drains, gates, order, count = self.coefficients.shape
        flat = self.coefficients.reshape(-1)
        step = order * count
        rows = lengths * spans * drains * gates - self.gate.order + 1
        return as_strided(flat, (rows, self.gate.order * step), (step * 8, 8), writeable=False)

    @cached_property
    def _leading(self) -> Array:
        """Coefficients of the first quantity: for each place of the vsb order one block."""
        return np.ascontiguousarray(np.moveaxis(self.coefficients[..., 0], -1, 0)).reshape(-1)

    @cached_property
    def _offsets(self) -> Indices:
        """From a point's first coefficient to all that bear on it, in `_leading`."""
        block = self._leading.size // self.vsb.order
        drain, gate, bulk = np.ogrid[: self.vds.order, : self.gate.order, : self.vsb.order]
        return np.asarray((drain * self.gate.size + gate + bulk * block).ravel())

    def locate(
        self, which: Indices, vgs: Array, vds: Array, vsb: Array, past: Array | None = None
    ) -> Place:
        """Find points among the coefficients.

        Parameters
        ----------
        which : ndarray of int, shape (n,)
            Which of the lengths.
        vgs, vds, vsb : ndarray, shape (n,)
            Voltages [V], inside the table.
        past : ndarray, shape (n,), optional
            How far vsb really lies past the edge at which it is given [V]; the threshold
            follows it in a straight line, all else stays.

        Returns
        -------
        Place
            To be used with any spline of the same axes.

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> spline = Collapsed(one, one, gate, np.ones((1, 1, 1, 7, 1, 1)), np.ones((1, 1, 1)), 0.8)
        >>> spline.locate(np.zeros(1, int), np.ones(1), np.zeros(1), np.zeros(1)).first
        array([0])
        """
        coordinate = np.sqrt(self.offset + vsb)
        bulk, bulk_place = self.vsb.locate(coordinate)
        w_bulk, d_bulk = self.vsb.both(bulk, bulk_place)
        d_bulk = (d_bulk.T * (0.5 / coordinate)).T
        lines = self.threshold[which, bulk]
        shift, tilt = (np.einsum("ns,ns->n", lines, weights) for weights in (w_bulk, d_bulk))
        if past is not None:
            shift = shift + tilt * past
            d_bulk = (d_bulk.T * (past == 0)).T
        gate_at, last, width = self._along_gate(which, vgs - shift)
        gate_in = np.clip(gate_at, self.gate.breaks[0], last)
        drain, drain_place = self.vds.locate(drain_coordinate(vds))
        w_drain, d_drain = self.vds.both(drain, drain_place)
        d_drain = (d_drain.T * drain_stretch(vds)).T
        gate, gate_place = self.gate.locate(gate_in)
        w_gate, d_gate = self.gate.both(gate, gate_place)
        d_gate = (d_gate.T / width).T
        first = ((which * self.vsb.spans + bulk) * self.vds.size + drain) * self.gate.size + gate
        return Place(
            first,
            w_drain,
            w_gate,
            w_bulk,
            d_drain,
            d_gate,
            d_bulk,
            tilt,
            (gate_at - gate_in) * width,
        )

    def _along_gate(
        self, which: Indices, gate: Array
    ) -> tuple[Array, Array | float, Array | float]:
        """Give places on the gate axis, its upper end there, and a unit of it in volts."""
        return gate, float(self.gate.breaks[-1]), 1.0

    def values(self, place: Place) -> Array:
        """Evaluate all quantities.

        Parameters
        ----------
        place : Place
            Where, as `locate` gave it.

        Returns
        -------
        ndarray, shape (n, quantities)
            Interpolated values.

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> spline = Collapsed(one, one, gate, np.ones((1, 1, 1, 7, 1, 2)), np.ones((1, 1, 1)), 0.8)
        >>> place = spline.locate(np.zeros(1, int), np.ones(1), np.zeros(1), np.zeros(1))
        >>> spline.values(place).round(9)
        array([[1., 1.]])
        """
        count = self.coefficients.shape[-1]
        found = np.empty((place.first.size, count))
        for part in self._chunks(place):
            runs = self._gather(place, part)
            by_gate = np.matmul(place.vds[part, None, :], runs)
            by_bulk = np.matmul(
                place.gate[part, None, :], by_gate.reshape(len(runs), self.gate.order, -1)
            ).reshape(len(runs), self.vsb.order, count)
            found[part] = np.einsum("nsq,ns->nq", by_bulk, place.vsb[part])
        return found

    @cached_property
    def reader(self) -> PointReader:
        """Reads single points, of the first length."""
        from gmid.device.plain import PointReader  # a terminal's query does without

        return PointReader(self)

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of cells along length, vsb and vds."""
        return (self.lengths, self.vsb.spans, self.vds.spans)

    def cells(self, which: Indices, vsb: Array, vds: Array) -> tuple[list[Indices], list[Array]]:
        """Find the cells of length, vsb and vds in which points lie, as `Stack.cells` does.

        Parameters
        ----------
        which : ndarray of int, shape (n,)
            Which of the lengths.
        vsb, vds : ndarray, shape (n,)
            Voltages [V], inside the table.

        Returns
        -------
        spans : list of ndarray of int, shape (n,)
            Length, span along vsb and along vds.
        weights : list of ndarray, shape (n, order)
            Weights along vsb and vds, for the rows of `block`.
        """
        points = (np.sqrt(self.offset + vsb), drain_coordinate(vds))
        spans, weights = place_points((self.vsb, self.vds), points)
        return [which, *spans], weights

    def block(self, corner: Sequence[int], gates: slice = slice(None)) -> Array:
        """Give the coefficients that bear on one cell, as `Stack.block` does.

        Parameters
        ----------
        corner : sequence of int
            Its length and spans.
        gates : slice
            Which of the coefficients along the gate axis.

        Returns
        -------
        ndarray, shape (products of the weights, quantities, n_gate)
            Coefficients.
        """
        length, low, left = corner
        block = self.coefficients[length, low, left : left + self.vds.order, gates]
        rows = self.vsb.order * self.vds.order
        return block.transpose(2, 0, 3, 1).reshape(rows, block.shape[-1], -1)

    def extremes(self) -> tuple[Array, Array]:
        """Give the least and largest coefficient that bear on each cell.

        Returns
        -------
        least, most : ndarray, shape (*shape, gate spans, quantities)
            Bounds of the splines.
        """
        axes = {2: self.vds, 3: self.gate}
        low = slide(self.coefficients.min(axis=4), axes, np.minimum)
        return low, slide(self.coefficients.max(axis=4), axes, np.maximum)

    def gradient(self, place: Place) -> tuple[Array, Array, Array, Array]:
        """Evaluate the first quantity and its derivatives.

        Parameters
        ----------
        place : Place
            Where, as `locate` gave it.

        Returns
        -------
        value, by_vgs, by_vds, by_vsb : ndarray, shape (n,)
            The value and its derivatives by the three voltages [1/V].

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> spline = Collapsed(one, one, gate, (gate.operator @ gate.points)
        ...                    .reshape(1, 1, 1, 7, 1, 1), np.zeros((1, 1, 1)), 0.8)
        >>> place = spline.locate(np.zeros(1, int), np.array([0.3]), np.zeros(1), np.zeros(1))
        >>> float(spline.gradient(place)[1][0].round(9))
        1.0
        """
        found = np.empty((4, place.first.size))
        weights = place.vds.T, place.gate.T, place.vsb.T
        tilts = place.vds_slope.T, place.gate_slope.T, place.vsb_slope.T
        shape = (self.vds.order, self.gate.order, self.vsb.order)
        for start in range(0, place.first.size, _POINTS):
            part = slice(start, start + _POINTS)
            stencil = self._leading.take(self._offsets[:, None] + place.first[part])
            stencil = stencil.reshape(*shape, -1)
            drain, gate, bulk = (weight[:, part] for weight in weights)
            flat = np.einsum("dusn,dn->usn", stencil, drain)
            tilt = np.einsum("dusn,dn->usn", stencil, tilts[0][:, part])
            line = np.einsum("usn,un->sn", flat, gate)
            rise = np.einsum("usn,un->sn", flat, tilts[1][:, part])
            lean = np.einsum("usn,un->sn", tilt, gate)
            found[0, part] = np.einsum("sn,sn->n", line, bulk)
            found[1, part] = np.einsum("sn,sn->n", rise, bulk)
            found[2, part] = np.einsum("sn,sn->n", lean, bulk)
            found[3, part] = np.einsum("sn,sn->n", line, tilts[2][:, part])
        if np.any(place.beyond):
            outer = np.where(place.beyond < 0, OFF_SLOPE, ON_SLOPE)
            found[0] += outer * place.beyond
            found[1] = np.where(place.beyond == 0, found[1], outer)
        found[3] -= found[1] * place.threshold_slope
        return found[0], found[1], found[2], found[3]

    def _chunks(self, place: Place) -> list[slice]:
        width = self.vds.order * self._runs.shape[1]
        step = max(64, _CHUNK // width)
        return [slice(at, at + step) for at in range(0, place.first.size, step)]

    def _gather(self, place: Place, part: slice) -> Array:
        rows = place.first[part, None] + np.arange(self.vds.order) * self.gate.size
        return np.asarray(self._runs[rows])


def expand_spans(solved: Array, vsb: SplineAxis) -> Array:
    """Lay coefficients out as `Collapsed` reads them.

    Parameters
    ----------
    solved : ndarray, shape (lengths, n_vds, n_gate, n_vsb, quantities)
        Coefficients.
    vsb : SplineAxis
        The axis of body bias.

    Returns
    -------
    ndarray, shape (lengths, vsb spans, n_vds, n_gate, vsb order, quantities)
        For each span of vsb those that bear on it, all quantities side by side.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis
    >>> expand_spans(np.arange(5.0).reshape(1, 1, 1, 5, 1), natural_axis(np.arange(5.0))).ravel()
    array([0., 1., 2., 3., 1., 2., 3., 4.])
    """
    if vsb.spans == 1:
        return solved[:, None]
    spans = [solved[:, :, :, start : start + vsb.order] for start in range(vsb.spans)]
    return np.stack(spans, axis=1)
