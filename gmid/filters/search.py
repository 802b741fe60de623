"""Search for the boundary of what is allowed, outward from the ideal filter.

What a filter tolerates is not monotone in gain and bandwidth: errors cancel and leave islands.
In the plane of reciprocals (1/gm, 1/A) the origin is the ideal filter, always allowed, and the
region around it is nearly a convex polygon. So the search goes outward along rays and stops at
the first boundary.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import NoSolution
from gmid.network.pencil import FloatArray

Usage = Callable[[FloatArray, FloatArray], FloatArray]
"""From two coordinates of shape (n,) to the used part of what is allowed, shape (n,)."""

_GROWTH = 1.5
_MARCHES = 80
_CLOSINGS = 60
_CLOSE = 1e-5


@dataclass(frozen=True, eq=False)
class Boundary:
    """Points of the boundary of the allowed region around the ideal filter.

    Parameters
    ----------
    u, v : ndarray of float, shape (n,)
        Coordinates; the last points lie on the axis u = 0.
    usage : ndarray of float, shape (n,)
        What is used of the allowed there, just below 1.

    Examples
    --------
    >>> Boundary(np.array([1.0, 0.0]), np.array([0.0, 1.0]), np.ones(2))
    Boundary(2 points, u to 1, v to 1)
    """

    u: FloatArray
    v: FloatArray
    usage: FloatArray

    def __repr__(self) -> str:
        return f"Boundary({self.u.size} points, u to {self.u.max():.4g}, v to {self.v.max():.4g})"


def march_outward(
    function: Callable[[FloatArray], FloatArray], start: ArrayLike, *, limit: float = np.inf
) -> FloatArray:
    """Find how far one may go along several rays before a usage reaches 1.

    From `start` inward until the usage is below 1, then outward in steps of one half, then
    closed by false position. The inner side of the last bracket is answered.

    Parameters
    ----------
    function : callable
        From distances, shape (n,), to usages, shape (n,); not-a-number counts as above 1.
    start : array_like of float, shape (n,)
        First guesses, positive.
    limit : float
        Largest distance; a ray that stays below 1 up to there answers infinity.

    Returns
    -------
    ndarray of float, shape (n,)
        Distances; infinity where nothing was found within the limit.

    Raises
    ------
    NoSolution
        If nothing on the way inward from `start` is allowed.

    Examples
    --------
    >>> march_outward(lambda x: np.array([2.0, 4.0]) * x, [1.0, 1.0]).round(4).tolist()
    [0.5, 0.25]
    """
    inner, used = _find_inside(function, np.asarray(start, dtype=np.float64))
    outer, over = inner.copy(), used.copy()
    active = np.ones(inner.shape, dtype=bool)
    for _ in range(_MARCHES):
        # grow in proportion to what is left, but never far: there may be islands outside
        step = np.clip(0.9 / np.maximum(used, 1e-3), 1.05, _GROWTH)
        tried = np.where(active, np.minimum(inner * step, limit), outer)
        value = _judge(function, tried)
        passed = active & (value < 1.0)
        outer, over = np.where(active, tried, outer), np.where(active, value, over)
        inner, used = np.where(passed, tried, inner), np.where(passed, value, used)
        active = passed & (tried < limit)
        if not active.any():
            break
    endless = over < 1.0
    found = _close(function, inner, used, outer, over)
    return np.where(endless, np.inf, found)


def _judge(function: Callable[[FloatArray], FloatArray], distance: FloatArray) -> FloatArray:
    value = np.asarray(function(distance), dtype=np.float64)
    return np.where(np.isnan(value), np.inf, value)


def _find_inside(
    function: Callable[[FloatArray], FloatArray], start: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Go inward until half of what the ideal leaves is used, with nothing forbidden inside."""
    distance = start.copy()
    base = np.minimum(_judge(function, np.zeros_like(start)), 1.0)
    deep = np.maximum(0.5 * (1.0 + base), np.minimum(1.05 * base, 0.999))
    for _ in range(40):
        used = _judge(function, distance)
        if np.all(used < deep):
            clear = _clear_way(function, distance)
            if np.all(clear == distance):
                return distance, used
            distance = clear
            continue
        over = np.where(np.isfinite(used), (used - base) / (deep - base + 1e-12), 10.0)
        distance = np.where(used < deep, distance, distance / np.clip(1.2 * over, 1.3, 4.0))
    raise NoSolution("even amplifiers that are close to ideal use more than is allowed.")


def _clear_way(function: Callable[[FloatArray], FloatArray], distance: FloatArray) -> FloatArray:
    """Return how far each ray is allowed all the way: a place beyond may be an island."""
    clear = distance.copy()
    for share in (0.8, 0.6, 0.4, 0.2):
        clear = np.where(_judge(function, share * distance) < 1.0, clear, 0.5 * share * distance)
    return clear


def _close(
    function: Callable[[FloatArray], FloatArray], inner: FloatArray, used: FloatArray,
    outer: FloatArray, over: FloatArray,
) -> FloatArray:  # fmt: skip
    # aim a little inside, so that a straight line ends there in one step
    target = 1.0 - 0.5 * _CLOSE
    a, b = inner.copy(), outer.copy()
    ya, yb = used - target, np.minimum(over, 10.0) - target
    for k in range(_CLOSINGS):
        if not np.any((b - a > 1e-12 * b) & (ya < -_CLOSE) & (yb > 0)):
            break
        share = -ya / np.where(yb - ya == 0, 1.0, yb - ya)
        x = a + (b - a) * (np.clip(share, 0.0, 1.0) if k % 3 != 2 else 0.5)
        y = np.minimum(_judge(function, x), 10.0) - target
        below = y < 1.0 - target
        a, ya = np.where(below, x, a), np.where(below, y, ya)
        b, yb = np.where(below, b, x), np.where(below, yb, y)
    return a


def trace_boundary(usage: Usage, *, rays: int = 13, start: tuple[float, float]) -> Boundary:
    """Follow the boundary of the allowed region around the origin of the reciprocal plane.

    Parameters
    ----------
    usage : callable
        The used part of what is allowed at (u, v).
    rays : int
        Number of directions, both axes among them.
    start : tuple of float
        Guesses of where the boundary crosses the axes.

    Returns
    -------
    Boundary
        From the u axis to the v axis.

    Raises
    ------
    NoSolution
        If the origin itself uses more than is allowed, or a ray has no boundary.

    Examples
    --------
    >>> trace_boundary(lambda u, v: u + 100 * v, rays=3, start=(0.7, 0.03)).u.round(3).tolist()
    [1.0, 0.5, 0.0]
    """
    zero = np.zeros(1)
    inside = float(_judge(lambda x: usage(x, x), zero)[0])
    if inside >= 1.0:
        raise NoSolution(
            f"the filter with ideal amplifiers already uses {100 * inside:.3g} % of the allowed."
        )
    ends = np.asarray(start, dtype=np.float64)
    flags = np.eye(2)
    axes = march_outward(
        lambda x: usage(flags[0] * ends[0] * x, flags[1] * ends[1] * x), np.ones(2)
    )
    if not np.isfinite(axes).all():
        raise NoSolution("no amplifier is bad enough to use up what is allowed.")
    size = ends * axes
    angle = np.linspace(0.0, 0.5 * np.pi, rays)
    du, dv = size[0] * np.cos(angle), size[1] * np.sin(angle)
    du[-1] = 0.0
    distance = march_outward(lambda x: usage(du * x, dv * x), np.full(rays, 0.75))
    u, v = du * distance, dv * distance
    return Boundary(u, v, _judge(lambda x: usage(du * x, dv * x), distance))


def split_error(costs: ArrayLike) -> FloatArray:
    """Share an error among amplifiers so that the sum of their gm becomes least.

    With errors ``c_k/gm_k`` that add up to at most one, the least sum of gm has gm_k in
    proportion to the square root of c_k.

    Parameters
    ----------
    costs : array_like of float, shape (n,)
        c_k: the gm at which amplifier k alone uses all that is allowed [S].

    Returns
    -------
    ndarray of float, shape (n,)
        gm_k [S].

    References
    ----------
    Lagrange multipliers on a sum of reciprocals.

    Examples
    --------
    >>> split_error([1.0, 4.0]).tolist()
    [3.0, 6.0]
    """
    root = np.sqrt(np.asarray(costs, dtype=np.float64))
    return np.asarray(root * root.sum())
