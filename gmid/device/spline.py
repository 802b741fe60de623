"""Cubic splines of one axis in numpy alone: knots, bases and interpolating coefficients.

A tensor-product spline is a chain of such axes.  Each axis knows the matrix that turns
values at its points into coefficients, and the few weights by which coefficients become the
value, or its slope, at any place.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Indices = NDArray[np.intp]

_UNIFORM = np.array([[1, -3, 3, -1], [4, 0, -6, 3], [1, 3, 3, -3], [0, 0, 0, 1]]) / 6.0
"""Cubic B-spline basis on uniform knots, one row for each coefficient, by powers of t."""

_FEW = 32
"""Places up to which the least number of calls is the fastest."""


@dataclass(frozen=True, eq=False)
class SplineAxis:
    """One axis of an interpolating spline.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Where values are given; strictly rising.
    breaks : ndarray, shape (spans + 1,)
        Ends of the polynomial pieces.
    basis : ndarray, shape (spans, order, order)
        Weight of each coefficient by powers of the place within the span, 0 to 1.
    operator : ndarray, shape (coefficients, n)
        Turns values at the points into coefficients.
    uniform : bool
        Whether all spans are equally wide and share one basis.

    Examples
    --------
    >>> axis = natural_axis(np.array([0.0, 1.0, 2.0, 4.0]))
    >>> coefficients = axis.operator @ axis.points**3
    >>> span, place = axis.locate(np.array([3.0]))
    >>> float((axis.weights(span, place) @ coefficients)[0].round(9))
    27.0

    References
    ----------
    de Boor, A Practical Guide to Splines (1978), chapters IX to XIII (from memory).
    """

    points: Array
    breaks: Array
    basis: Array
    operator: Array
    uniform: bool = False

    @property
    def order(self) -> int:
        """Number of coefficients that bear on one place: degree plus one."""
        return int(self.basis.shape[1])

    @property
    def spans(self) -> int:
        """Number of polynomial pieces."""
        return int(self.basis.shape[0])

    @property
    def size(self) -> int:
        """Number of coefficients."""
        return int(self.operator.shape[0])

    def locate(self, x: Array) -> tuple[Indices, Array]:
        """Find the span that holds each place, and where in it the place lies.

        Parameters
        ----------
        x : ndarray
            Places; those beyond the ends belong to the end spans.

        Returns
        -------
        span : ndarray of int
            Index of the span, which is that of its first coefficient as well.
        place : ndarray
            Share of the span that lies before the place, 0 to 1 inside.

        Examples
        --------
        >>> natural_axis(np.array([0.0, 1.0])).locate(np.array([0.25]))
        (array([0]), array([0.25]))
        """
        if self.spans == 1:
            span = np.zeros(x.shape, dtype=np.intp)
        elif self.uniform:
            step = (self.breaks[-1] - self.breaks[0]) / self.spans
            share = (x - self.breaks[0]) * (1.0 / step)
            span = np.clip(share.astype(np.intp), 0, self.spans - 1)
            return span, share - span
        else:
            span = np.searchsorted(self.breaks[1:-1], x, side="right")
        left = self.breaks[span]
        return span, (x - left) / (self.breaks[span + 1] - left)

    def weights(self, span: Indices, place: Array) -> Array:
        """Weigh the coefficients of a span for the value at a place.

        Parameters
        ----------
        span, place : ndarray
            As `locate` gives them.

        Returns
        -------
        ndarray, shape (..., order)
            Weights [-].

        Examples
        --------
        >>> axis = natural_axis(np.array([0.0, 1.0]))
        >>> axis.weights(np.array([0]), np.array([0.25]))
        array([[0.75, 0.25]])
        """
        if place.ndim == 1 and place.size > _FEW:
            return self._weigh(span, place, slopes=False)[0]
        return self._apply(span, place[..., None] ** np.arange(self.order))

    def slopes(self, span: Indices, place: Array) -> Array:
        """Weigh the coefficients of a span for the slope at a place.

        Parameters
        ----------
        span, place : ndarray
            As `locate` gives them.

        Returns
        -------
        ndarray, shape (..., order)
            Weights [1/unit of the axis].

        Examples
        --------
        >>> axis = natural_axis(np.array([0.0, 2.0]))
        >>> axis.slopes(np.array([0]), np.array([0.25]))
        array([[-0.5,  0.5]])
        """
        powers = np.zeros((*place.shape, self.order))
        for power in range(1, self.order):
            powers[..., power] = power * place ** (power - 1)
        width = self.breaks[span + 1] - self.breaks[span]
        return self._apply(span, powers) / width[..., None]

    def both(self, span: Indices, place: Array) -> tuple[Array, Array]:
        """Give `weights` and `slopes` together, for less than the price of two.

        Parameters
        ----------
        span, place : ndarray, shape (n,)
            As `locate` gives them.

        Returns
        -------
        weights, slopes : ndarray, shape (n, order)
            Weights [-] and [1/unit of the axis].

        Examples
        --------
        >>> axis = natural_axis(np.array([0.0, 2.0]))
        >>> axis.both(np.array([0]), np.array([0.25]))
        (array([[0.75, 0.25]]), array([[-0.5,  0.5]]))
        """
        if place.size <= _FEW:
            return self.weights(span, place), self.slopes(span, place)
        return self._weigh(span, place, slopes=True)

    def _weigh(self, span: Indices, place: Array, *, slopes: bool) -> tuple[Array, Array]:
        """Run Horner's rule over all places at once, one coefficient after the other."""
        weights = np.empty((self.order, place.size))
        steep = np.zeros((self.order, place.size if slopes else 0))
        shared = self.uniform or self.spans == 1
        for column in range(self.order):
            powers: Sequence[Any] = self.basis[0, column]
            if not shared:
                powers = [table.take(span, mode="clip") for table in self.basis[:, column].T]
            value, slope = weights[column], steep[column]
            value[:] = powers[-1]
            for power in range(self.order - 2, -1, -1):
                if slopes:
                    slope *= place
                    slope += value
                value *= place
                value += powers[power]
        if slopes and self.uniform:
            steep *= self.spans / (self.breaks[-1] - self.breaks[0])
        elif slopes:
            steep /= (self.breaks[1:] - self.breaks[:-1])[span]
        return weights.T, steep.T

    def _apply(self, span: Indices, powers: Array) -> Array:
        if self.uniform:
            return np.asarray(powers @ self.basis[0].T)
        return np.asarray(np.einsum("...jp,...p->...j", self.basis[span], powers))


def natural_axis(points: Array) -> SplineAxis:
    """Make an axis from points at any spacing: a cubic not-a-knot spline.

    Three points give a parabola, two a straight line, one a constant.

    Parameters
    ----------
    points : ndarray, shape (n,)
        Strictly rising.

    Returns
    -------
    SplineAxis
        With as many coefficients as points.

    Examples
    --------
    >>> natural_axis(np.array([0.0, 1.0, 2.0])).order
    3
    """
    return _make_natural(np.asarray(points, dtype=np.float64).tobytes())


@lru_cache(maxsize=64)
def _make_natural(raw: bytes) -> SplineAxis:
    """Make an axis once for all conditions that share it; nobody may change it."""
    axis = _solve_natural(np.frombuffer(raw))
    axis.operator.flags.writeable = axis.basis.flags.writeable = False
    return axis


def _solve_natural(points: Array) -> SplineAxis:
    degree = min(3, points.size - 1)
    if degree == 0:
        breaks = np.array([points[0] - 0.5, points[0] + 0.5])
        return SplineAxis(points, breaks, np.ones((1, 1, 1)), np.ones((1, 1)))
    inner = points[2:-2] if degree == 3 else points[:0]
    breaks = np.concatenate((points[:1], inner, points[-1:]))
    knots = np.concatenate((np.repeat(points[0], degree), breaks, np.repeat(points[-1], degree)))
    basis = _span_bases(knots, degree)
    axis = SplineAxis(points, breaks, basis, np.empty((0, 0)))
    span, place = axis.locate(points)
    rows = np.zeros((points.size, points.size))
    columns = span[:, None] + np.arange(degree + 1)
    np.put_along_axis(rows, columns, axis.weights(span, place), axis=1)
    return SplineAxis(points, breaks, basis, np.asarray(np.linalg.inv(rows), dtype=np.float64))


def uniform_axis(start: float, stop: float, spans: int) -> SplineAxis:
    """Make an axis of equal spans, with two coefficients more than points.

    Parameters
    ----------
    start, stop : float
        First and last point.
    spans : int
        Number of spans, at least 4; points stand at their ends.

    Returns
    -------
    SplineAxis
        A cubic spline whose third derivative is continuous at the outermost inner points.

    Examples
    --------
    >>> axis = uniform_axis(0.0, 1.0, 4)
    >>> span, place = axis.locate(np.array([0.3]))
    >>> coefficients = (axis.operator @ axis.points**3)[span[0] : span[0] + 4]
    >>> float((axis.weights(span, place) @ coefficients)[0].round(9))
    0.027
    """
    points = np.linspace(start, stop, spans + 1)
    basis = np.broadcast_to(_UNIFORM, (spans, 4, 4))
    return SplineAxis(points, points, basis, _solve_uniform(spans), uniform=True)


@lru_cache(maxsize=32)
def _solve_uniform(spans: int) -> Array:
    """Make the operator of so many equal spans; nobody may change it."""
    rows = np.zeros((spans + 3, spans + 3))
    here = np.arange(spans + 1)
    for offset, weight in enumerate(_UNIFORM[:3, 0]):
        rows[here + 1, here + offset] = weight
    rows[0, :5] = rows[-1, -5:] = (1.0, -4.0, 6.0, -4.0, 1.0)
    operator = np.ascontiguousarray(np.linalg.inv(rows)[:, 1:-1])
    operator.flags.writeable = False
    return operator


def _span_bases(knots: Array, degree: int) -> Array:
    """Write the basis functions of each span as polynomials of the place within it."""
    left, right = knots[degree : -degree - 1], knots[degree + 1 : -degree]
    places = 0.5 - 0.5 * np.cos(np.pi * np.arange(degree + 1) / degree)
    samples = _cox_de_boor(knots, degree, left[:, None] + places * (right - left)[:, None])
    powers = places[:, None] ** np.arange(degree + 1)
    return np.swapaxes(np.linalg.solve(powers, samples), 1, 2)


def _cox_de_boor(knots: Array, degree: int, x: Array) -> Array:
    """Evaluate the degree + 1 B-splines that live on each span [de Boor, chapter X].

    Rows of x are the places within one span each; the functions come last.
    """
    found = np.ones((*x.shape, 1))
    home = degree + np.arange(len(x))[:, None]
    for order in range(1, degree + 1):
        grown = np.zeros((*x.shape, order + 1))
        for index in range(order):
            low, high = knots[home - order + 1 + index], knots[home + 1 + index]
            grown[..., index] += found[..., index] * (high - x) / (high - low)
            grown[..., index + 1] += found[..., index] * (x - low) / (high - low)
        found = grown
    return found


def apply_along(operator: Array, values: Array, axis: int) -> Array:
    """Multiply one axis of an array by a matrix and leave it in its place.

    Parameters
    ----------
    operator : ndarray, shape (m, n)
        The matrix.
    values : ndarray
        With n entries along `axis`.
    axis : int
        Position of the axis.

    Returns
    -------
    ndarray
        With m entries along `axis`.

    Examples
    --------
    >>> apply_along(np.ones((1, 2)), np.array([[1.0, 2.0], [3.0, 4.0]]), 0)
    array([[4., 6.]])
    """
    moved = np.moveaxis(values, axis, -1)
    return np.ascontiguousarray(np.moveaxis(moved @ operator.T, -1, axis))
