"""Splines read at a single point.

Arrays of one element cost ten times what their arithmetic does.  Here places and weights are
worked out in numbers, and arrays enter only where coefficients are summed.
"""

from __future__ import annotations

import math
from bisect import bisect_right
from struct import Struct
from typing import TYPE_CHECKING

import numpy as np
from numpy.lib.stride_tricks import as_strided

from gmid.device.coordinates import KNEE
from gmid.device.spline import Array, SplineAxis

if TYPE_CHECKING:
    from gmid.device.collapsed import Collapsed

Spot = tuple[int, Array, Array, Array]
"""First coefficient of a point, and the weights along vds, gate and vsb."""

Weights = tuple[float, float, float, float]

_PACK = Struct("12d").pack
_SIXTH = 1.0 / 6.0


class PlainAxis:
    """An axis in plain numbers.

    Parameters
    ----------
    axis : SplineAxis
        The axis.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis
    >>> PlainAxis(natural_axis(np.array([0.0, 1.0]))).weigh(0.25)
    (0, (0.75, 0.25, 0.0, 0.0))
    """

    def __init__(self, axis: SplineAxis) -> None:
        self.breaks: list[float] = axis.breaks.tolist()
        self._last = len(self.breaks) - 1
        self._rates = (1.0 / np.diff(axis.breaks)).tolist()
        padded = np.zeros((axis.spans, 4, 4))
        padded[:, : axis.order, : axis.order] = axis.basis
        self.rows: list[list[float]] = padded.reshape(axis.spans, 16).tolist()

    def weigh(self, x: float) -> tuple[int, Weights]:
        """Find the span that holds a place, and weigh its coefficients.

        Parameters
        ----------
        x : float
            Place; beyond the ends it belongs to the end spans.

        Returns
        -------
        span : int
            Index of the span.
        weights : tuple of float
            Four of them, those of coefficients that are not there zero.
        """
        breaks = self.breaks
        span = bisect_right(breaks, x, 1, self._last) - 1
        t = (x - breaks[span]) * self._rates[span]
        a, b, c, d, e, f, g, h, i, j, k, m, n, o, p, q = self.rows[span]
        return span, (
            ((d * t + c) * t + b) * t + a,
            ((h * t + g) * t + f) * t + e,
            ((m * t + k) * t + j) * t + i,
            ((q * t + p) * t + o) * t + n,
        )


class PointReader:
    """Splines at one length, read point by point.

    Parameters
    ----------
    spline : Collapsed
        Of which the first length is read.

    Examples
    --------
    >>> from gmid.device.collapsed import Collapsed
    >>> from gmid.device.spline import natural_axis, uniform_axis
    >>> one, gate = natural_axis(np.zeros(1)), uniform_axis(0.0, 1.0, 4)
    >>> spline = Collapsed(one, one, gate, np.ones((1, 1, 1, 7, 1, 2)), np.ones((1, 1, 1)), 0.8)
    >>> reader = PointReader(spline)
    >>> reader.read(reader.locate(1.0, 0.0, 0.0)).round(9)
    array([1., 1.])
    """

    def __init__(self, spline: Collapsed) -> None:
        self._bulk, self._drain = PlainAxis(spline.vsb), PlainAxis(spline.vds)
        _, _, drains, gates, order, count = spline.coefficients.shape
        threshold = np.zeros((spline.vsb.spans, 4))
        threshold[:, :order] = spline.threshold[0]
        self._threshold: list[list[float]] = threshold.tolist()
        self._offset, (self._low, high) = spline.offset, spline.gate.breaks[[0, -1]].tolist()
        self._rate, self._spans = spline.gate.spans / (high - self._low), spline.gate.spans
        self._drains, self._gates = drains, gates
        self._orders = (spline.vds.order, 8 + order)
        self._shapes = ((spline.gate.order, order * count), (order, count))
        flat, step = spline.coefficients.reshape(-1), order * count
        width, height = spline.gate.order * step, spline.vds.order
        count = (flat.size - (height - 1) * gates * step - width) // step + 1
        self._blocks = as_strided(
            flat, (count, height, width), (8 * step, 8 * gates * step, 8), writeable=False
        )

    def locate(self, vgs: float, vds: float, vsb: float) -> Spot:
        """Find a point among the coefficients.

        Parameters
        ----------
        vgs, vds, vsb : float
            Voltages [V], inside the table.

        Returns
        -------
        Spot
            Good for all splines of the same device and length.
        """
        bulk, by_bulk = self._bulk.weigh(math.sqrt(self._offset + vsb))
        drain, by_drain = self._drain.weigh(math.log(KNEE + vds))
        a, b, c, d = self._threshold[bulk]
        w, x, y, z = by_bulk
        at = (vgs - (a * w + b * x + c * y + d * z) - self._low) * self._rate
        if 0.0 <= at < self._spans:
            gate = int(at)
            t = at - gate
        else:
            gate, t = (0, 0.0) if at < 0.0 else (self._spans - 1, 1.0)
        u, square = 1.0 - t, t * t
        low, high = u * u * u * _SIXTH, square * t * _SIXTH
        inner = (0.5 * t - 1.0) * square + 4.0 * _SIXTH
        weights = np.frombuffer(
            _PACK(*by_drain, low, inner, 1.0 - low - inner - high, high, w, x, y, z)
        )
        drains, bulks = self._orders
        first = (bulk * self._drains + drain) * self._gates + gate
        return first, weights[:drains], weights[4:8], weights[8:bulks]

    def read(self, spot: Spot) -> Array:
        """Evaluate all quantities.

        Parameters
        ----------
        spot : Spot
            As `locate` gives it.

        Returns
        -------
        ndarray, shape (quantities,)
            Interpolated values.
        """
        first, by_drain, by_gate, by_bulk = spot
        lines = by_drain.dot(self._blocks[first]).reshape(self._shapes[0])
        found: Array = by_bulk.dot(by_gate.dot(lines).reshape(self._shapes[1]))
        return found
