"""Curves read at fixed places, as matrices: one product reads any number of lines.

Cubic and quintic curves are linear in what they pass through.  Where all lines are read at the
same places, the places are looked up once, and the rest is matrix products.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gmid.device.curves import bend_operators, slope_operator
from gmid.device.spline import Array, Indices

_CUBIC = np.array([[1, 0, -3, 2], [0, 0, 3, -2], [0, 1, -2, 1], [0, 0, -1, 1]], dtype=np.float64)
"""Weights of both values and both slopes of a piece, by powers of the place within it."""

_QUINTIC = np.array([
    [1, 0, 0, -10, 15, -6], [0, 0, 0, 10, -15, 6],
    [0, 1, 0, -6, 8, -3], [0, 0, 0, -4, 7, -3],
    [0, 0, 0.5, -1.5, 1.5, -0.5], [0, 0, 0, 0.5, -1, 0.5],
])  # fmt: skip
"""The same for values, slopes and second derivatives."""


@dataclass(frozen=True, eq=False)
class Reading:
    """Matrices that read curves, and their slopes, at fixed places.

    Parameters
    ----------
    values, slopes : tuple of ndarray, shape (..., m, n)
        By which the values at the n points, and the slopes there where those are given, are
        multiplied for the m values or slopes of the curves.

    Examples
    --------
    >>> reading = cubic_reading(np.array([0.0, 1.0]), np.array([0.5, 2.0]))
    >>> reading.values[0] @ np.array([0.0, 3.0])
    array([1.5, 6. ])
    """

    values: tuple[Array, ...]
    slopes: tuple[Array, ...]


def cubic_reading(points: Array, places: Array) -> Reading:
    """Read not-a-knot cubic splines; beyond the ends they are straight.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising.
    places : ndarray, shape (..., m)
        Where to read.

    Returns
    -------
    Reading
        One matrix each, to be applied to values.

    Examples
    --------
    >>> reading = cubic_reading(np.arange(5.0), np.array([1.5]))
    >>> float((reading.slopes[0] @ np.arange(5.0) ** 3)[0].round(9))
    6.75
    """
    if points.size == 1:
        one = np.ones((*places.shape, 1))
        return Reading((one,), (0.0 * one,))
    (on_values, on_slopes), (tilt_values, tilt_slopes) = _weigh(points, places, _CUBIC)
    follow = slope_operator(points)
    return Reading((on_values + on_slopes @ follow,), (tilt_values + tilt_slopes @ follow,))


def quintic_reading(points: Array, places: Array) -> Reading:
    """Read quintic splines through values and slopes; beyond the ends they are straight.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising, at least four.
    places : ndarray, shape (..., m)
        Where to read.

    Returns
    -------
    Reading
        Two matrices each, to be applied to values and slopes, and added.

    Examples
    --------
    >>> points = np.array([0.0, 1.0, 2.0, 4.0])
    >>> on_values, on_slopes = quintic_reading(points, np.array([3.0])).values
    >>> float((on_values @ points**4 + on_slopes @ (4 * points**3))[0].round(6))
    81.0
    """
    by_values, by_slopes = bend_operators(points)
    pairs = [
        (value + bend @ by_values, slope + bend @ by_slopes)
        for value, slope, bend in _weigh(points, places, _QUINTIC)
    ]
    return Reading(pairs[0], pairs[1])


def read_quintic(points: Array, places: Array, values: Array, slopes: Array) -> Array:
    """Read the quintic splines of `quintic_reading` and their slopes, many lines at once.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising, at least four.
    places : ndarray, shape (k, ..., m)
        Where to read, for each group of lines.
    values, slopes : ndarray, shape (k, ..., lines, n)
        What the lines pass through.

    Returns
    -------
    ndarray, shape (2, k, ..., lines, m)
        Values and slopes.

    Examples
    --------
    >>> points, places = np.array([0.0, 1.0, 2.0, 4.0]), np.array([[3.0]])
    >>> lines = (points**4)[None, None], (4 * points**3)[None, None]
    >>> read_quintic(points, places, *lines).round(6).ravel()
    array([ 81., 108.])
    """
    by_values, by_slopes = bend_operators(points)
    bends = values @ by_values.T + slopes @ by_slopes.T
    nodes = np.concatenate((values, slopes, bends), axis=-1)
    found = np.empty((2, *values.shape[:-1], places.shape[-1]))
    for group, there in enumerate(places):  # one by one, or fresh memory costs more than the sums
        for kind, weights in enumerate(_weigh(points, there, _QUINTIC)):
            rows = np.concatenate(weights, axis=-1)
            np.matmul(nodes[group], rows.swapaxes(-1, -2), out=found[kind, group])
    return found


def _weigh(points: Array, places: Array, basis: Array) -> tuple[list[Array], list[Array]]:
    """Weigh values and derivatives at all points, for the curve and for its slope."""
    within = np.clip(places, points[0], points[-1])
    cell = np.clip(np.searchsorted(points, within, side="right") - 1, 0, points.size - 2)
    width = np.diff(points)[cell]
    beyond, place = places - within, (within - points[cell]) / width
    order = basis.shape[1]
    powers, steep, scale = np.ones((3, *place.shape, order))
    steep[..., 0] = 0.0
    for power in range(1, order):
        np.multiply(powers[..., power - 1], place, out=powers[..., power])
        np.multiply(powers[..., power - 1], power, out=steep[..., power])
    for half in range(2, order):
        np.multiply(scale[..., half - 2], width, out=scale[..., half])
    tilts = (steep @ basis.T) * scale / width[..., None]
    weights = (powers @ basis.T) * scale + tilts * beyond[..., None]
    return _spread(weights, cell, points.size), _spread(tilts, cell, points.size)


def _spread(weights: Array, cell: Indices, count: int) -> list[Array]:
    """Put the weights of each piece's two ends into rows over all points."""
    first = count * np.arange(cell.size) + cell.ravel()
    rows = []
    for column in range(0, weights.shape[-1], 2):
        row = np.zeros(cell.size * count)
        row[first], row[first + 1] = weights[..., column].ravel(), weights[..., column + 1].ravel()
        rows.append(row.reshape(*cell.shape, count))
    return rows
