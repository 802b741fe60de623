"""Where curves cross a target: the bracket first, then the place within it."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from gmid.device.spline import Array

_ITERATIONS = 80
_RESIDUAL = 1e-13
_ROUNDING = 1e-9
"""Overshoot of the reachable range that counts as rounding."""


def bracket(
    sense: float, curve: Array, target: Array
) -> tuple[NDArray[np.intp], Array, Array, Array]:
    """Find the last cell in which each curve crosses its target in the right sense.

    Parameters
    ----------
    sense : float
        1 for curves that rise where the device is on, -1 for those that fall.
    curve : ndarray, shape (n, points)
        Values along each curve.
    target : ndarray, shape (n,)
        What is sought.

    Returns
    -------
    cell : ndarray of int, shape (n,)
        The crossing lies between this point and the next.
    target : ndarray, shape (n,)
        The same; beyond the range by rounding it is moved to its end, further out it is nan.
    low, high : ndarray, shape (n,)
        Range of the curve from its turning point upwards.

    Examples
    --------
    >>> bracket(-1.0, np.array([[1.0, 3.0, 2.0, 0.0]]), np.array([1.5]))[:2]
    (array([2]), array([1.5]))
    """
    rising = sense * curve
    start = np.argmin(rising, axis=1)
    on = np.arange(curve.shape[1]) >= start[:, None]
    branch = np.where(on, rising, -np.inf)
    low, high = np.take_along_axis(rising, start[:, None], 1)[:, 0], branch.max(axis=1)
    goal = sense * target
    slack = _ROUNDING * np.maximum(np.abs(low), np.abs(high))
    known = (goal >= low - slack) & (goal <= high + slack)
    goal = np.where(known, np.clip(goal, low, high), low)
    cell = find_last(np.where(on, rising, np.inf), goal)
    ends = np.sort(np.stack((sense * low, sense * high)), axis=0)
    return cell, np.where(known, sense * goal, np.nan), ends[0], ends[1]


def find_last(rising: Array, goal: Array) -> NDArray[np.intp]:
    """Find the last cell in which each curve rises through its goal.

    Parameters
    ----------
    rising : ndarray, shape (n, points)
        Values along each curve.
    goal : ndarray, shape (n,)
        What is sought.

    Returns
    -------
    ndarray of int, shape (n,)
        The crossing lies between this point and the next; the last cell where there is none.

    Examples
    --------
    >>> find_last(np.array([[0.0, 2.0, 1.0, 3.0, 4.0]]), np.array([1.5]))
    array([2])
    """
    crossing = (rising[:, :-1] <= goal[:, None]) & (rising[:, 1:] >= goal[:, None])
    return np.asarray(crossing.shape[1] - 1 - np.argmax(crossing[:, ::-1], axis=1))


def solve_newton(
    evaluate: Callable[[Array], tuple[Array, Array]],
    target: Array,
    low: Array,
    high: Array,
    sense: float,
    *,
    start: Array | None = None,
) -> Array:
    """Solve within brackets by Newton's steps, halving where one would leave the bracket.

    Parameters
    ----------
    evaluate : callable
        Gives values and slopes at places of shape (n,).
    target : ndarray, shape (n,)
        What is sought; nan is passed over.
    low, high : ndarray, shape (n,)
        Brackets.
    sense : float
        1 where the functions rise, -1 where they fall.
    start : ndarray, shape (n,), keyword-only
        Where to begin, within the brackets; in their middle by default.

    Returns
    -------
    ndarray, shape (n,)
        Places.

    Examples
    --------
    >>> solve_newton(lambda x: (x**2, 2 * x), np.array([2.0]), np.ones(1), 2 * np.ones(1), 1.0)
    array([1.41421356])
    """
    low, high = low.copy(), high.copy()
    goal = np.where(np.isnan(target), 0.0, target)
    root = 0.5 * (low + high) if start is None else start
    for _ in range(_ITERATIONS):
        value, slope = evaluate(root)
        error = value - goal
        above = sense * error > 0
        high, low = np.where(above, root, high), np.where(above, low, root)
        with np.errstate(divide="ignore", invalid="ignore"):
            step = error / slope
        trial = root - step
        good = np.isfinite(trial) & (trial >= low) & (trial <= high)
        done = np.abs(error) <= _RESIDUAL * np.maximum(np.abs(goal), 1e-3)
        done |= ((high - low) < 1e-16) | np.isnan(target)
        root = np.where(good, trial, np.where(done, root, 0.5 * (low + high)))
        if done.all():
            break
    return root


def solve_false_position(evaluate: Callable[[Array], Array], low: Array, high: Array) -> Array:
    """Solve for zeros of rising functions by the Illinois rule.

    Parameters
    ----------
    evaluate : callable
        Gives values at places of shape (n,).
    low, high : ndarray, shape (n,)
        Brackets.

    Returns
    -------
    ndarray, shape (n,)
        Places.

    Examples
    --------
    >>> solve_false_position(lambda x: x**2 - 2, np.ones(1), 2 * np.ones(1)).round(9)
    array([1.41421356])

    References
    ----------
    Dowell and Jarratt, BIT 11 (1971) 168 (from memory).
    """
    below, above = evaluate(low), evaluate(high)
    root, side = low, np.zeros(low.shape)
    for _ in range(_ITERATIONS):
        span = above - below
        share = np.divide(-below, span, out=np.full(span.shape, 0.5), where=span > 0)
        root = low + np.clip(share, 0.0, 1.0) * (high - low)
        value = evaluate(root)
        if np.all((np.abs(value) < 1e-12) | (high - low < 1e-15)):
            break
        up = value > 0
        above = np.where(up, value, np.where(side < 0, 0.5 * above, above))
        below = np.where(up, np.where(side > 0, 0.5 * below, below), value)
        high, low = np.where(up, root, high), np.where(up, low, root)
        side = np.where(up, 1.0, -1.0)
    return root
