"""Whether grid data are smooth enough for splines, decided once for a sweep.

A spline through noisy data wiggles between the points, and slopes that disagree with the
values make it worse.  Noise shows as an error of prediction from the neighbours that changes
its sign from point to point; the curvature of a transistor does not.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gmid.device.spline import Array

NOISE_FLOOR = 5e-4
"""Noise of ln id below which a spline does no harm: 0.05 % of the current."""

_ALTERNATION = 0.57
"""Share of neighbouring errors of opposite signs above which they are noise (white: 0.8)."""

_SLOPE_MISMATCH = 0.01
"""Largest mismatch of slopes and values, per step of ln id, of data that belong together."""


def estimate_noise(points: Array, values: Array, usable: NDArray[np.bool_]) -> tuple[float, float]:
    """Estimate the point-to-point noise of lines over their last axis.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Axis.
    values : ndarray, shape (..., n)
        Lines.
    usable : ndarray of bool, shape (..., n)
        Points to look at.

    Returns
    -------
    noise : float
        Standard deviation from the median error of prediction, as if all of it were noise.
    alternation : float
        Share of neighbouring errors of opposite signs: 0.8 for noise, below 0.5 for curvature.

    Examples
    --------
    >>> x = np.arange(30.0)
    >>> bumps = 0.01 * np.random.default_rng(1).standard_normal((50, 30))
    >>> noise, alternation = estimate_noise(x, np.sqrt(x + 1) + bumps, np.ones((50, 30), bool))
    >>> 0.009 < noise < 0.011, alternation > 0.7
    (True, True)
    """
    count = points.size
    if count < 7:
        return 0.0, 0.0
    centre = np.arange(2, count - 2)
    around = centre[:, None] + np.array([-2, -1, 1, 2])
    weights = np.empty(around.shape)
    for column in range(4):
        others = np.delete(around, column, axis=1)
        here = points[around[:, column], None]
        weights[:, column] = np.prod(
            (points[centre, None] - points[others]) / (here - points[others]), axis=1
        )
    errors = values[..., centre] - np.einsum("...ck,ck->...c", values[..., around], weights)
    errors = errors / np.sqrt(1 + np.sum(weights**2, axis=1))
    counted = usable[..., centre] & usable[..., around].all(axis=-1)
    pairs = counted[..., 1:] & counted[..., :-1]
    if np.count_nonzero(pairs) < 20:
        return 0.0, 0.0
    opposite = (errors[..., 1:] * errors[..., :-1] < 0)[pairs]
    return _quantile(np.abs(errors[counted]), 0.5) / 0.6745, float(np.mean(opposite))


def _quantile(values: Array, share: float) -> float:
    """Interpolate a quantile; numpy's own loads its masked arrays, which costs 25 ms cold."""
    place = share * (values.size - 1)
    low = int(place)
    high = min(low + 1, values.size - 1)
    ordered = np.partition(values, [low, high])
    return float(ordered[low] + (place - low) * (ordered[high] - ordered[low]))


def is_noisy(points: Array, values: Array, usable: NDArray[np.bool_]) -> bool:
    """Decide whether lines over their last axis are too rough for a spline.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Axis.
    values : ndarray, shape (..., n)
        Logarithms of current.
    usable : ndarray of bool, shape (..., n)
        Points that conduct.

    Returns
    -------
    bool
        True for noise above 0.05 %.

    Examples
    --------
    >>> x = np.arange(30.0)
    >>> is_noisy(x, np.sqrt(x + 1)[None], np.ones((1, 30), bool))
    False
    """
    noise, alternation = estimate_noise(points, values, usable)
    return noise > NOISE_FLOOR and alternation > _ALTERNATION


def slopes_agree(
    points: Array,
    values: Array,
    slopes: Array,
    usable: NDArray[np.bool_],
    *,
    share: float = 0.9,
) -> bool:
    """Decide whether given slopes belong to the values, within one per cent.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Axis.
    values, slopes : ndarray, shape (..., n)
        Lines and what should be their derivatives.
    usable : ndarray of bool, shape (..., n)
        Points to look at.
    share : float, keyword-only
        Share of the cells in which slopes must integrate to the values; half of them where a
        knee may lie between two points.

    Returns
    -------
    bool
        True when they do.

    Examples
    --------
    >>> x = np.linspace(0.0, 1.0, 30)
    >>> slopes_agree(x, x[None] ** 2, 2 * x[None], np.ones((1, 30), bool))
    True
    >>> slopes_agree(x, x[None] ** 2, 3 * x[None], np.ones((1, 30), bool))
    False
    """
    from gmid.device.curves import cubic_curves

    width = np.diff(points)
    lines = cubic_curves(points, slopes)
    powers = 1.0 / np.arange(1, lines.pieces.shape[-1] + 1)
    integral = (lines.pieces @ powers) * width
    counted = usable[..., 1:] & usable[..., :-1]
    if not counted.any():
        return False
    rise = np.diff(values, axis=-1)
    mismatch = np.abs(integral - rise)[counted] / np.maximum(np.abs(rise), 0.05)[counted]
    return _quantile(mismatch, share) < _SLOPE_MISMATCH
