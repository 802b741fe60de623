"""Spline coefficients of several quantities over all four axes.

Two ways lead down from here: to values at scattered points, and to curves along the gate
axis at given (length, vsb, vds), see `gmid.device.windows`.  Points are grouped by the cell
they fall in, so that each group is one matrix product.
"""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby

import numpy as np

from gmid.device.cells import multiply_weights, place_points, slide, sort_cells
from gmid.device.spline import Array, Indices, SplineAxis

_TOGETHER = 512
"""Points whose partial sums are held at a time, so that they stay in the cache."""


@dataclass(frozen=True, eq=False)
class Stack:
    """Coefficients of quantities that share their axes.

    Parameters
    ----------
    length, vsb, vds, gate : SplineAxis
        Axes in spline coordinates.
    coefficients : ndarray, shape (n_length, n_vds, n_gate, n_vsb, quantities)
        Tensor-product coefficients.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis, uniform_axis
    >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
    >>> Stack(one, one, one, gate, np.ones((1, 1, 7, 1, 2)))
    Stack(1 x 1 x 7 x 1, 2 quantities)
    """

    length: SplineAxis
    vsb: SplineAxis
    vds: SplineAxis
    gate: SplineAxis
    coefficients: Array

    def values(self, length: Array, vsb: Array, vds: Array, gate: Array) -> Array:
        """Evaluate all quantities at scattered points.

        Parameters
        ----------
        length, vsb, vds, gate : ndarray, shape (n,)
            Points in spline coordinates.

        Returns
        -------
        ndarray, shape (n, quantities)
            Interpolated values.

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> stack = Stack(one, one, one, gate, (gate.operator @ gate.points).reshape(1, 1, 7, 1, 1))
        >>> zero = np.zeros(1)
        >>> stack.values(zero, zero, zero, zero + 0.3).round(12)
        array([[0.3]])
        """
        axes = (self.length, self.vds, self.vsb, self.gate)
        points = (length, vds, vsb, gate)
        located = [axis.locate(point) for axis, point in zip(axes, points, strict=True)]
        order, starts, corners = sort_cells(
            tuple(axis.spans for axis in axes), [span for span, _ in located]
        )
        weights = [
            axis.weights(span[order], place[order])
            for axis, (span, place) in zip(axes, located, strict=True)
        ]
        bounds, corners = _split(starts, corners, length.size)
        found = np.empty((length.size, self.coefficients.shape[-1]))
        first = 0
        while first < len(corners):
            last = bisect_right(bounds, bounds[first] + _TOGETHER) - 1
            part = slice(bounds[first], bounds[last])
            found[order[part]] = self._multiply(
                [weight[part] for weight in weights], bounds[first : last + 1], corners[first:last]
            )
            first = last
        return found

    def _multiply(
        self, weights: list[Array], bounds: list[int], corners: list[list[int]]
    ) -> Array:  # fmt: skip
        """Sum up points sorted by cell: length and vds for each cell, the others point by point."""
        a, b, d, c = (axis.order for axis in (self.length, self.vds, self.vsb, self.gate))
        outer, inner = multiply_weights(weights[:2]), multiply_weights(weights[:1:-1])
        size = d * self.coefficients.shape[-1]
        lines = np.empty((len(outer), c * size))
        cells = zip(bounds, bounds[1:], corners, strict=False)
        for (i, j, m), run in groupby(cells, key=lambda cell: cell[2][:3]):
            members = list(run)
            left, right = members[0][2][3], members[-1][2][3] + c
            row = self.coefficients[i : i + a, j : j + b, left:right, m : m + d]
            row = row.reshape(a * b, -1)
            for start, stop, corner in members:
                here = slice(start - bounds[0], stop - bounds[0])
                k = corner[3] - left
                np.dot(outer[here], row[:, k * size : (k + c) * size], out=lines[here])
        return np.asarray(np.matmul(inner[:, None], lines.reshape(*inner.shape, -1))[:, 0])

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of cells along length, vsb and vds."""
        return (self.length.spans, self.vsb.spans, self.vds.spans)

    def cells(self, length: Array, vsb: Array, vds: Array) -> tuple[list[Indices], list[Array]]:
        """Find the cells of length, vsb and vds in which points lie.

        Parameters
        ----------
        length, vsb, vds : ndarray, shape (n,)
            Points in spline coordinates.

        Returns
        -------
        spans : list of ndarray of int, shape (n,)
            Span along length, vsb and vds.
        weights : list of ndarray, shape (n, order)
            Weights along each, for the rows of `block`.

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> stack = Stack(one, one, one, gate, np.ones((1, 1, 7, 1, 1)))
        >>> stack.cells(np.zeros(1), np.zeros(1), np.zeros(1))[0]
        [array([0]), array([0]), array([0])]
        """
        return place_points((self.length, self.vsb, self.vds), (length, vsb, vds))

    def block(self, corner: Sequence[int], gates: slice = slice(None)) -> Array:
        """Give the coefficients that bear on one cell of length, vsb and vds.

        Parameters
        ----------
        corner : sequence of int
            Its spans.
        gates : slice
            Which of the coefficients along the gate axis.

        Returns
        -------
        ndarray, shape (products of the weights, quantities, n_gate)
            Coefficients.

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> Stack(one, one, one, gate, np.ones((1, 1, 7, 1, 2))).block([0, 0, 0]).shape
        (1, 2, 7)
        """
        i, m, j = corner
        a, d, b = self.length.order, self.vsb.order, self.vds.order
        block = self.coefficients[i : i + a, j : j + b, gates, m : m + d]
        return block.transpose(0, 3, 1, 4, 2).reshape(a * d * b, block.shape[-1], -1)

    def extremes(self) -> tuple[Array, Array]:
        """Give the least and largest coefficient that bear on each cell.

        Returns
        -------
        least, most : ndarray, shape (*shape, gate spans, quantities)
            Bounds of the splines.
        """
        axes = {0: self.length, 1: self.vds, 3: self.vsb, 2: self.gate}
        low, high = (slide(self.coefficients, axes, pick) for pick in (np.minimum, np.maximum))
        return low.transpose(0, 3, 1, 2, 4), high.transpose(0, 3, 1, 2, 4)

    def __repr__(self) -> str:
        *sizes, count = self.coefficients.shape
        word = "quantity" if count == 1 else "quantities"
        return f"Stack({' x '.join(map(str, sizes))}, {count} {word})"


def _split(
    starts: list[int], corners: list[list[int]], total: int
) -> tuple[list[int], list[list[int]]]:
    """Give the bounds of cells, those of too many points cut into several."""
    if max(np.diff(starts, append=total), default=0) <= _TOGETHER:
        return [*starts, total], corners
    bounds: list[int] = []
    cells: list[list[int]] = []
    for start, stop, corner in zip(starts, [*starts[1:], total], corners, strict=True):
        pieces = range(start, stop, _TOGETHER)
        bounds += pieces
        cells += [corner] * len(pieces)
    return [*bounds, total], cells
