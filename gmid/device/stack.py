"""Spline coefficients of several quantities over all four axes.

Three ways lead down from here: to values at scattered points, to the curve along the gate
axis at given (length, vds, vsb), and to a `Collapsed` spline at a few lengths.  Points are
grouped by the cell they fall in, so that each group is one matrix product.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from gmid.device.collapsed import Collapsed, expand_spans
from gmid.device.spline import Array, Indices, SplineAxis, apply_along

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
    >>> from gmid.device.aligned import AlignedGrid, spline_axes
    >>> from gmid.device.example import example_sweep
    >>> grid = AlignedGrid(example_sweep())
    >>> Stack(*spline_axes(grid), solve_table(spline_axes(grid), grid.table("gds"))[..., None])
    Stack(3 x 25 x 102 x 3, 1 quantity)
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
        spans, weights = _place(axes, (length, vds, gate, vsb))
        order, starts, corners = _sort_cells(axes, spans)
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
                    outer = _outer([weight[base:end] for weight in weights])
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
        spans, weights = _place(axes, (length, vds, vsb))
        moved = self.coefficients.transpose(0, 1, 3, 2, 4)
        found = np.empty((length.size, *moved.shape[3:]))
        for members, corner in _groups(axes, spans):
            block = moved[
                tuple(slice(at, at + axis.order) for at, axis in zip(corner, axes, strict=True))
            ]
            outer = _outer([weight[members] for weight in weights])
            product = outer @ block.reshape(outer.shape[1], -1)
            found[members] = product.reshape(-1, *moved.shape[3:])
        return found

    def collapse(self, length: Array, threshold: Array, offset: float) -> Collapsed:
        """Settle the length, once for each that is in use.

        Parameters
        ----------
        length : ndarray, shape (k,)
            Lengths in spline coordinates.
        threshold : ndarray, shape (k, n_vsb)
            Coefficients of the threshold along vsb at those lengths [V].
        offset : float
            Phi of the body-bias coordinate [V].

        Returns
        -------
        Collapsed
            Splines over vsb, vds and vgs.

        Examples
        --------
        >>> from gmid.device.spline import natural_axis, uniform_axis
        >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
        >>> stack = Stack(one, one, one, gate, np.ones((1, 1, 7, 1, 1)))
        >>> stack.collapse(np.zeros(1), np.zeros((1, 1)), 0.8).lengths
        1
        """
        span, place = self.length.locate(length)
        weights = self.length.weights(span, place)
        columns = span[:, None] + np.arange(self.length.order)
        settled = np.einsum("kl,kldusq->kdusq", weights, self.coefficients[columns])
        return Collapsed(
            self.vsb,
            self.vds,
            self.gate,
            expand_spans(settled.transpose(0, 3, 1, 2, 4), self.vsb),
            expand_spans(threshold, self.vsb),
            offset,
        )

    def __repr__(self) -> str:
        *sizes, count = self.coefficients.shape
        word = "quantity" if count == 1 else "quantities"
        return f"Stack({' x '.join(map(str, sizes))}, {count} {word})"


def solve_table(axes: tuple[SplineAxis, SplineAxis, SplineAxis, SplineAxis], table: Array) -> Array:
    """Turn grid values into tensor-product coefficients.

    Parameters
    ----------
    axes : tuple of SplineAxis
        Length, vsb, vds and gate.
    table : ndarray, shape (n_length, n_vsb, n_vds, n_gate)
        Transformed values on the grid.

    Returns
    -------
    ndarray, shape (n_length, n_vds, coefficients along the gate, n_vsb)
        Coefficients, in the order in which they are read.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis, uniform_axis
    >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
    >>> solve_table((one, one, one, gate), np.ones((1, 1, 1, 5))).shape
    (1, 1, 7, 1)
    """
    found = table
    for position, axis in enumerate(axes):
        if axis.size > 1:
            found = apply_along(axis.operator, found, position)
    return np.ascontiguousarray(found.transpose(0, 2, 3, 1))


def _place(
    axes: tuple[SplineAxis, ...], points: tuple[Array, ...]
) -> tuple[list[Indices], list[Array]]:
    located = [axis.locate(point) for axis, point in zip(axes, points, strict=True)]
    weights = [axis.weights(*where) for axis, where in zip(axes, located, strict=True)]
    return [span for span, _ in located], weights


def _sort_cells(
    axes: tuple[SplineAxis, ...], spans: list[Indices]
) -> tuple[Indices, list[int], list[list[int]]]:
    """Sort points by cell: their order, where each cell begins in it, its first coefficients."""
    shape = tuple(axis.spans for axis in axes)
    keys = np.ravel_multi_index(tuple(spans), shape)
    order = np.argsort(keys, kind="stable")
    cells, starts = np.unique(keys[order], return_index=True)
    corners = np.stack(np.unravel_index(cells, shape), axis=1)
    return order, starts.tolist(), corners.tolist()


def _groups(
    axes: tuple[SplineAxis, ...], spans: list[Indices]
) -> Iterator[tuple[Indices, list[int]]]:
    """Yield the points of each cell together with the cell's first coefficients."""
    order, starts, corners = _sort_cells(axes, spans)
    yield from zip(np.split(order, starts[1:]), corners, strict=True)


def _outer(weights: list[Array]) -> Array:
    """Multiply the weights of all axes out, the last axis fastest."""
    found = weights[0]
    for weight in weights[1:]:
        found = (found[:, :, None] * weight[:, None, :]).reshape(found.shape[0], -1)
    return found
