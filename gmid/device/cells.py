"""Points grouped by the cell they fall in, so that each group is one matrix product."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from gmid.device.spline import Array, Indices, SplineAxis

_SHORT = 1 << 16
"""Up to so many cells their numbers are sorted digit by digit, which is ten times faster."""


def place_points(
    axes: tuple[SplineAxis, ...], points: tuple[Array, ...]
) -> tuple[list[Indices], list[Array]]:
    """Find spans and weights along each axis.

    Parameters
    ----------
    axes : tuple of SplineAxis
        Axes.
    points : tuple of ndarray, shape (n,)
        Places along each.

    Returns
    -------
    spans : list of ndarray of int, shape (n,)
        Span along each axis.
    weights : list of ndarray, shape (n, order)
        Weights of its coefficients.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis
    >>> place_points((natural_axis(np.array([0.0, 1.0])),), (np.array([0.25]),))
    ([array([0])], [array([[0.75, 0.25]])])
    """
    located = [axis.locate(point) for axis, point in zip(axes, points, strict=True)]
    weights = [axis.weights(*where) for axis, where in zip(axes, located, strict=True)]
    return [span for span, _ in located], weights


def sort_cells(
    shape: tuple[int, ...], spans: list[Indices]
) -> tuple[Indices, list[int], list[list[int]]]:
    """Sort points by cell.

    Parameters
    ----------
    shape : tuple of int
        Number of spans along each axis.
    spans : list of ndarray of int, shape (n,)
        Span of each point along each axis.

    Returns
    -------
    order : ndarray of int, shape (n,)
        Points in the order of their cells.
    starts : list of int
        Where each cell begins in it.
    corners : list of list of int
        The spans of each cell.

    Examples
    --------
    >>> order, starts, corners = sort_cells((2,), [np.array([1, 0, 1])])
    >>> order.tolist(), starts, corners
    ([1, 0, 2], [0, 1], [[0], [1]])
    """
    keys = np.ravel_multi_index(tuple(spans), shape)
    if math.prod(shape) <= _SHORT:
        keys = keys.astype(np.uint16)
    order = np.argsort(keys, kind="stable")
    keys = keys[order]
    starts = np.flatnonzero(np.append(keys[:1] == keys[:1], keys[1:] != keys[:-1]))
    corners = np.stack(np.unravel_index(keys[starts], shape), axis=1)
    return order, starts.tolist(), corners.tolist()


def multiply_weights(weights: list[Array]) -> Array:
    """Multiply the weights of all axes out, the last axis fastest.

    Parameters
    ----------
    weights : list of ndarray, shape (n, order)
        Weights along each axis.

    Returns
    -------
    ndarray, shape (n, product of the orders)
        Weights of a tensor product.

    Examples
    --------
    >>> multiply_weights([np.array([[1.0, 2.0]]), np.array([[3.0, 4.0]])])
    array([[3., 4., 6., 8.]])
    """
    found = weights[0]
    for weight in weights[1:]:
        found = (found[:, :, None] * weight[:, None, :]).reshape(found.shape[0], -1)
    return found


def slide(values: Array, axes: Mapping[int, SplineAxis], pick: np.ufunc) -> Array:
    """Take the least or largest of all coefficients that bear on each cell.

    Parameters
    ----------
    values : ndarray
        Coefficients.
    axes : mapping of int to SplineAxis
        Axes of `values` along which cells lie.
    pick : ufunc
        ``np.minimum`` or ``np.maximum``.

    Returns
    -------
    ndarray
        With spans in place of coefficients along those axes.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis
    >>> slide(np.array([1.0, 3.0, 2.0]), {0: natural_axis(np.arange(3.0))}, np.maximum)
    array([3.])
    """
    for position, axis in axes.items():
        lines = np.moveaxis(values, position, 0)
        found = lines[: axis.spans]
        for step in range(1, axis.order):
            found = pick(found, lines[step : step + axis.spans])
        values = np.moveaxis(found, 0, position)
    return values
