"""Numerical parts of measuring a deviation: interpolation, tuning steps, delays, grids."""

from __future__ import annotations

import numpy as np

from gmid.network.pencil import ComplexArray, FloatArray

REACH = 0.16
"""How far tuning may move a response, logarithm of a frequency ratio [-]."""

_GOLDEN = 0.5 * (np.sqrt(5.0) - 1.0)
_SECTIONS = 20


def find_group_delay(
    low: FloatArray, before: ComplexArray, high: FloatArray, after: ComplexArray
) -> FloatArray:
    """Return the group delay between two frequencies, shape (..., n) [s].

    Parameters
    ----------
    low, high : ndarray of float, shape (n,)
        Close together [Hz].
    before, after : ndarray of complex, shape (..., n)
        Responses there.

    Returns
    -------
    ndarray of float, shape (..., n)
        [s].

    Examples
    --------
    >>> one, two = np.array([1.0]), np.array([1.001])
    >>> find_group_delay(one, np.exp(-1j * one), two, np.exp(-1j * two)).round(4).tolist()
    [0.1592]
    """
    return np.asarray(-np.angle(after * np.conj(before)) / (2 * np.pi * (high - low)))


def find_step(error: FloatArray, slope: FloatArray) -> FloatArray:
    """Find the step y with the least range of ``error - y slope``; the range is convex in y.

    Parameters
    ----------
    error, slope : ndarray of float, shape (..., n)
        Over the passband.

    Returns
    -------
    ndarray of float, shape (...)
        y, between -0.08 and 0.08 around the least squares [-].

    Examples
    --------
    >>> slope = np.linspace(0.0, 1.0, 5)
    >>> round(float(find_step(0.02 * slope, slope)), 6)
    0.02
    """
    pull = slope - slope.mean(axis=-1, keepdims=True)
    guess = (error * pull).sum(axis=-1) / np.maximum((pull * pull).sum(axis=-1), 1e-30)
    room = np.minimum(0.5 * np.abs(guess) + 0.3 * np.ptp(error, axis=-1), 0.5 * REACH)

    def spread(y: FloatArray) -> FloatArray:
        return np.asarray(np.ptp(error - y[..., None] * slope, axis=-1))

    low, high = guess - room, guess + room
    one, two = high - _GOLDEN * (high - low), low + _GOLDEN * (high - low)
    first, second = spread(one), spread(two)
    for _ in range(_SECTIONS):
        left = first < second
        low, high = np.where(left, low, one), np.where(left, two, high)
        new = np.where(left, high - _GOLDEN * (high - low), low + _GOLDEN * (high - low))
        value = spread(new)
        one, two = np.where(left, new, two), np.where(left, one, new)
        first, second = np.where(left, value, second), np.where(left, first, value)
    return np.asarray(0.5 * (low + high))


def interpolate(
    grid: FloatArray, values: FloatArray, slope: FloatArray, place: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Interpolate by Hermite cubics.

    Parameters
    ----------
    grid : ndarray of float, shape (n,)
        Ascending.
    values, slope : ndarray of float, shape (..., n)
        There.
    place : ndarray of float, shape (..., m)
        Where to interpolate.

    Returns
    -------
    value, rate : ndarray of float, shape (..., m)
        Values and slopes at the places.

    Examples
    --------
    >>> grid = np.array([0.0, 1.0, 2.0])
    >>> value, rate = interpolate(grid, grid**3, 3 * grid**2, np.array([1.5]))
    >>> value.tolist(), rate.tolist()
    ([3.375], [6.75])
    """
    k = np.clip(np.searchsorted(grid, place) - 1, 0, grid.size - 2)
    width = grid[k + 1] - grid[k]
    t = (place - grid[k]) / width
    y0, y1, m0, m1 = (
        np.take_along_axis(np.broadcast_to(part, values.shape), at, axis=-1)
        for part in (values, slope) for at in (k, k + 1)
    )  # fmt: skip
    step = y1 - y0
    a, b = m0 * width - step, step - m1 * width
    value = y0 + t * step + t * (1.0 - t) * (a * (1.0 - t) + b * t)
    rate = step + (1.0 - 2.0 * t) * (a * (1.0 - t) + b * t) + t * (1.0 - t) * (b - a)
    return np.asarray(value), np.asarray(rate / width)


def read_between(grid: FloatArray, values: FloatArray, place: FloatArray) -> FloatArray:
    """Interpolate along straight lines, which never overshoot next to a zero of the response.

    Parameters
    ----------
    grid : ndarray of float, shape (n,)
        Ascending.
    values : ndarray of float, shape (..., n)
        There.
    place : ndarray of float, shape (...)
        One place for each row.

    Returns
    -------
    ndarray of float, shape (...)
        Values at the places.

    Examples
    --------
    >>> grid = np.array([0.0, 1.0, 2.0])
    >>> read_between(grid, np.array([[0.0, 1.0, 5.0]]), np.array([1.5])).tolist()
    [3.0]
    """
    k = np.clip(np.searchsorted(grid, place) - 1, 0, grid.size - 2)
    share = (place - grid[k]) / (grid[k + 1] - grid[k])
    before, after = (
        np.take_along_axis(values, at[..., None], axis=-1)[..., 0] for at in (k, k + 1)
    )
    return np.asarray(before + share * (after - before))


def spread_points(band: tuple[float, float], points: int, near: float) -> FloatArray:
    """Spread points over a stopband, and around its ends, where tuning may move them.

    Parameters
    ----------
    band : tuple of float
        [Hz].
    points : int
        Fineness.
    near : float
        How far tuning may move, logarithm of a ratio; 0 for none [-].

    Returns
    -------
    ndarray of float, shape (n,)
        Ascending [Hz].

    Examples
    --------
    >>> spread_points((1.0, 10.0), 36, 0.0).size
    12
    """
    grid = [np.geomspace(*band, max(12, points // 3))]
    if near:
        steps = np.linspace(-near, near, 2 * max(8, points // 10) + 1)
        grid += [end * np.exp(steps) for end in band]
    return np.unique(np.concatenate(grid))
