"""Spline coefficients of several quantities over all four axes.

Two ways lead down from here: to values at scattered points, and to the curve along the gate
axis at given (length, vds, vsb).  Points are grouped by the cell they fall in, so that each
group is one matrix product.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gmid.device.cells import group_points, multiply_weights, place_points, sort_cells
from gmid.device.spline import Array, SplineAxis

_TOGETHER = 512
"""Points whose weights are multiplied out at a time, so that they stay in the cache."""


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
        axes = (self.length, self.vds, self.gate, self.vsb)
        spans, weights = place_points(axes, (length, vds, gate, vsb))
        order, starts, corners = sort_cells(tuple(axis.spans for axis in axes), spans)
        weights = [weight[order] for weight in weights]
        sizes = [axis.order for axis in axes]
        found = np.empty((length.size, self.coefficients.shape[-1]))
        base, outer = 0, np.empty((0, int(np.prod(sizes))))
        for start, stop, (a, b, c, d) in zip(
            starts, [*starts[1:], length.size], corners, strict=True
        ):
            block = self.coefficients[
                a : a + sizes[0], b : b + sizes[1], c : c + sizes[2], d : d + sizes[3]
            ].reshape(outer.shape[1], -1)
            for first in range(start, stop, _TOGETHER):
                last = min(first + _TOGETHER, stop)
                if last > base + len(outer):
                    base, end = first, max(first + _TOGETHER, last)
                    outer = multiply_weights([weight[base:end] for weight in weights])
                found[first:last] = outer[first - base : last - base] @ block
        back = np.empty_like(found)
        back[order] = found
        return back

    def curves(self, length: Array, vsb: Array, vds: Array) -> Array:
        """Collapse to coefficients along the gate axis alone.

        Parameters
        ----------
        length, vsb, vds : ndarray, shape (n,)
            Points in spline coordinates.

        Returns
        -------
        ndarray, shape (n, n_gate, quantities)
            Coefficients of one curve for each point and quantity.

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> stack = Stack(one, one, one, gate, np.ones((1, 1, 7, 1, 1)))
        >>> stack.curves(np.zeros(2), np.zeros(2), np.zeros(2)).shape
        (2, 7, 1)
        """
        axes = (self.length, self.vds, self.vsb)
        spans, weights = place_points(axes, (length, vds, vsb))
        moved = self.coefficients.transpose(0, 1, 3, 2, 4)
        found = np.empty((length.size, *moved.shape[3:]))
        for members, corner in group_points(tuple(axis.spans for axis in axes), spans):
            block = moved[
                tuple(slice(at, at + axis.order) for at, axis in zip(corner, axes, strict=True))
            ]
            outer = multiply_weights([weight[members] for weight in weights])
            product = outer @ block.reshape(outer.shape[1], -1)
            found[members] = product.reshape(-1, *moved.shape[3:])
        return found

    def __repr__(self) -> str:
        *sizes, count = self.coefficients.shape
        word = "quantity" if count == 1 else "quantities"
        return f"Stack({' x '.join(map(str, sizes))}, {count} {word})"
