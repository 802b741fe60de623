"""Piecewise polynomials along vgs, through values alone or values and slopes.

The gate axis is read through these before the spline sees it, so that every length and body
bias can be shifted to a common threshold.  Smooth data with slopes get a quintic, smooth data
without them a cubic spline, noisy data a monotone cubic that stays between its neighbours.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from gmid.device.spline import Array, Indices, apply_along, natural_axis


@dataclass(frozen=True, eq=False)
class Curves:
    """Many piecewise polynomials over the same points.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Ends of the pieces.
    pieces : ndarray, shape (..., n - 1, order)
        Coefficients by powers of the place within the piece, 0 to 1.

    Notes
    -----
    Beyond its ends a curve is straight.

    Examples
    --------
    >>> points = np.array([0.0, 1.0, 2.0, 3.0])
    >>> curves = cubic_curves(points, points[None] ** 2)
    >>> curves.values(np.array([[1.5, 4.0]]))
    array([[ 2.25, 15.  ]])
    """

    points: Array
    pieces: Array

    def values(self, x: Array) -> Array:
        """Evaluate each curve at its own places.

        Parameters
        ----------
        x : ndarray, shape (..., m)
            Places for each curve; the leading axes must match those of `pieces` or be 1.

        Returns
        -------
        ndarray, shape (..., m)
            Values.

        Examples
        --------
        >>> cubic_curves(np.arange(2.0), np.array([[0.0, 3.0]])).values(np.array([[0.5]]))
        array([[1.5]])
        """
        if self.points.size == 1:
            return self._flat(x)
        beyond, cell, place, _ = self._locate(x)
        powers = self._gather(cell)
        value: Array = powers[-1]
        for coefficient in powers[-2::-1]:
            value = value * place + coefficient
        if not beyond.any():
            return value
        sides = np.reshape([0, self.points.size - 2], (1,) * (cell.ndim - 1) + (2,))
        ends = self._tilt(sides, np.array([0.0, 1.0]), np.diff(self.points)[sides])
        return np.asarray(value + beyond * np.where(beyond > 0, ends[..., 1:], ends[..., :1]))

    def slopes(self, x: Array) -> Array:
        """Give the slope of each curve at its own places.

        Parameters
        ----------
        x : ndarray, shape (..., m)
            As for `values`.

        Returns
        -------
        ndarray, shape (..., m)
            First derivatives.

        Examples
        --------
        >>> cubic_curves(np.arange(2.0), np.array([[0.0, 3.0]])).slopes(np.array([[0.5]]))
        array([[3.]])
        """
        if self.points.size == 1:
            return np.zeros(self._flat(x).shape)
        _, cell, place, width = self._locate(x)
        return self._tilt(cell, place, width)

    def _flat(self, x: Array) -> Array:
        shape = np.broadcast_shapes((*self.pieces.shape[:-2], 1), x.shape)
        return np.broadcast_to(self.pieces[..., 0, :1], shape)

    def _locate(self, x: Array) -> tuple[Array, Indices, Array, Array]:
        """Give the way beyond the ends, and cell, place within it and its width."""
        points = self.points
        within = np.clip(x, points[0], points[-1])
        cell = np.clip(np.searchsorted(points, within, side="right") - 1, 0, points.size - 2)
        width = np.diff(points)[cell]
        return x - within, cell, (within - points[cell]) / width, width

    def _gather(self, cell: Indices) -> Array:
        """Take the coefficients of cells, the powers first."""
        *lead, count, order = self.pieces.shape
        first = count * np.arange(math.prod(lead)).reshape(*lead, 1)
        picked = np.take(self.pieces.reshape(-1, order), first + cell, axis=0)
        return np.moveaxis(picked, -1, 0)

    def _tilt(self, cell: Indices, place: Array, width: Array) -> Array:
        """Give slopes inside cells."""
        value = slope = np.zeros(1)
        for coefficient in reversed(self._gather(cell)):
            slope = slope * place + value
            value = value * place + coefficient
        return np.asarray(slope / width)


def follow_bent(value: Array, slope: Array, curve: Array, beyond: Array) -> tuple[Array, Array]:
    """Continue curves beyond their ends so that above, the slope falls as gm/Id does.

    Parameters
    ----------
    value, slope, curve : ndarray
        Value and two derivatives at the end; they broadcast.
    beyond : ndarray
        Way beyond the end, positive above the upper and negative below the lower one.

    Returns
    -------
    value, slope : ndarray
        ``slope / (1 - beyond * curve / slope)`` above, straight below; the value belongs to it.

    Examples
    --------
    >>> one = np.ones(1)
    >>> follow_bent(0 * one, one, -one, one)
    (array([0.69314718]), array([0.5]))
    """
    fall = np.divide(-curve, slope, out=np.zeros(slope.shape), where=slope > 0)
    reach = np.where((beyond > 0) & (fall > 1e-6), beyond * fall, 0.0)
    bent = reach > 0
    gain = np.divide(np.log1p(reach), reach, out=np.ones(reach.shape), where=bent)
    found = np.asarray(value + beyond * slope * gain)
    return found, np.asarray(slope / (1.0 + reach))


def cubic_curves(points: Array, values: Array) -> Curves:
    """Lay a not-a-knot cubic spline through values.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising.
    values : ndarray, shape (..., n)
        Values.

    Returns
    -------
    Curves
        Of degree 3, or less with fewer than four points.

    Examples
    --------
    >>> cubic_curves(np.arange(4.0), np.arange(4.0)[None]).slopes(np.array([[0.3]])).round(9)
    array([[1.]])
    """
    if points.size == 1:
        return Curves(points, values[..., None])
    return _hermite(points, values, apply_along(slope_operator(points), values, -1))


def slope_operator(points: Array) -> Array:
    """Make the matrix that gives the slopes of a cubic spline at its own points.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising, at least two.

    Returns
    -------
    ndarray, shape (n, n)
        Slopes = matrix times values.

    Examples
    --------
    >>> slope_operator(np.array([0.0, 2.0]))
    array([[-0.5,  0.5],
           [-0.5,  0.5]])
    """
    return _make_operator(np.asarray(points, dtype=np.float64).tobytes())


@lru_cache(maxsize=32)
def _make_operator(raw: bytes) -> Array:
    """Make the operator of some points once, for every quantity."""
    points = np.frombuffer(raw)
    axis = natural_axis(points)
    span, place = axis.locate(points)
    rows = np.zeros((points.size, axis.size))
    np.put_along_axis(rows, span[:, None] + np.arange(axis.order), axis.slopes(span, place), 1)
    operator = np.asarray(rows @ axis.operator)
    operator.flags.writeable = False
    return operator


def quintic_curves(points: Array, values: Array, slopes: Array) -> Curves:
    """Lay quintics through values and slopes, their second derivatives taken from near by.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising, at least four.
    values, slopes : ndarray, shape (..., n)
        Values and first derivatives.

    Returns
    -------
    Curves
        Of degree 5.

    Examples
    --------
    >>> points = np.array([0.0, 1.0, 2.0, 4.0])
    >>> curves = quintic_curves(points, points[None] ** 4, 4 * points[None] ** 3)
    >>> float(curves.values(np.array([[3.0]]))[0, 0].round(6))
    81.0

    References
    ----------
    Hermite interpolation; de Boor, A Practical Guide to Splines (1978), chapter I (from memory).
    """
    by_values, by_slopes = bend_operators(points)
    bends = values @ by_values.T + slopes @ by_slopes.T
    width = np.diff(points)
    rise = np.diff(values, axis=-1)
    d0, d1 = slopes[..., :-1] * width, slopes[..., 1:] * width
    b0, b1 = bends[..., :-1] * width**2, bends[..., 1:] * width**2
    pieces = np.stack(
        (
            values[..., :-1],
            d0,
            b0 / 2,
            10 * rise - 6 * d0 - 4 * d1 - 1.5 * b0 + 0.5 * b1,
            -15 * rise + 8 * d0 + 7 * d1 + 1.5 * b0 - b1,
            6 * rise - 3 * d0 - 3 * d1 - 0.5 * b0 + 0.5 * b1,
        ),
        axis=-1,
    )
    return Curves(points, pieces)


def bend_operators(points: Array) -> tuple[Array, Array]:
    """Make the matrices that give the second derivatives of `quintic_curves` at their points.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising, at least four.

    Returns
    -------
    by_values, by_slopes : ndarray, shape (n, n)
        Second derivatives = the one times values plus the other times slopes: those of the
        polynomial through values and slopes of a point and of its two neighbours.

    Notes
    -----
    A spline of continuous third derivative would carry the knee between triode and saturation,
    where that falls between two points, on to the cells around it.

    Examples
    --------
    >>> by_values, by_slopes = bend_operators(np.arange(4.0))
    >>> (by_values @ np.arange(4.0) ** 2 + by_slopes @ (2 * np.arange(4.0))).round(9)
    array([2., 2., 2., 2.])
    """
    return _make_bends(np.asarray(points, dtype=np.float64).tobytes())


@lru_cache(maxsize=32)
def _make_bends(raw: bytes) -> tuple[Array, Array]:
    """Solve for the second derivatives of some points once, for every quantity."""
    points = np.frombuffer(raw)
    count = points.size
    first = np.clip(np.arange(count) - 1, 0, count - 3)
    rows, near = np.arange(count)[:, None], first[:, None] + np.arange(3)
    width = points[first + 2] - points[first]
    place = (points[near] - points[:, None]) / width[:, None]
    power = np.arange(6)
    values = place[..., None] ** power
    slopes = power * place[..., None] ** np.maximum(power - 1, 0)
    weights = 2 * np.linalg.inv(np.concatenate((values, slopes), axis=1))[:, 2]
    by_values, by_slopes = np.zeros((2, count, count))
    by_values[rows, near] = weights[:, :3] / width[:, None] ** 2
    by_slopes[rows, near] = weights[:, 3:] / width[:, None]
    by_values.flags.writeable = by_slopes.flags.writeable = False
    return by_values, by_slopes


def monotone_curves(points: Array, values: Array) -> Curves:
    """Lay a cubic through values that never leaves the range of two neighbours.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising.
    values : ndarray, shape (..., n)
        Values, however rough.

    Returns
    -------
    Curves
        Of degree 3 with continuous slope.

    Examples
    --------
    >>> curves = monotone_curves(np.arange(4.0), np.array([[0.0, 0.0, 1.0, 1.0]]))
    >>> curves.values(np.array([[0.5, 1.5]]))
    array([[0. , 0.5]])

    References
    ----------
    Fritsch and Butland, SIAM J. Sci. Stat. Comput. 5 (1984) 300 (from memory).
    """
    if points.size < 3:
        return cubic_curves(points, values)
    width = np.diff(points)
    secant = np.diff(values, axis=-1) / width
    left, right = secant[..., :-1], secant[..., 1:]
    one, two = 2 * width[1:] + width[:-1], width[1:] + 2 * width[:-1]
    same = left * right > 0
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        mean = (one + two) / (one / left + two / right)
    slopes = np.zeros(values.shape)
    slopes[..., 1:-1] = np.where(same, mean, 0.0)
    slopes[..., 0], slopes[..., -1] = secant[..., 0], secant[..., -1]
    return _hermite(points, values, slopes)


def _hermite(points: Array, values: Array, slopes: Array) -> Curves:
    width = np.diff(points)
    rise = np.diff(values, axis=-1)
    d0, d1 = slopes[..., :-1] * width, slopes[..., 1:] * width
    pieces = np.stack((values[..., :-1], d0, 3 * rise - 2 * d0 - d1, d0 + d1 - 2 * rise), axis=-1)
    return Curves(points, pieces)
