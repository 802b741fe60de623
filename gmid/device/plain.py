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


class PlainAxis:
    """An axis in plain numbers.

    Parameters
    ----------
    axis : SplineAxis
        The axis.

    Attributes
    ----------
    rows : list
        For each span and coefficient the weight by four powers of the place.

    Examples
    --------
    >>> from gmid.device.spline import natural_axis
    >>> PlainAxis(natural_axis(np.array([0.0, 1.0]))).find(0.25)
    (0, 0.25)
    """

    def __init__(self, axis: SplineAxis) -> None:
        self.breaks: list[float] = axis.breaks.tolist()
        self._last = len(self.breaks) - 1
        self._rates = (1.0 / np.diff(axis.breaks)).tolist()
        padded = np.zeros((axis.spans, axis.order, 4))
        padded[..., : axis.order] = axis.basis
        self.rows: list[list[list[float]]] = padded.tolist()

    def find(self, x: float) -> tuple[int, float]:
        """Find the span that holds a place, and where in it the place lies.

        Parameters
        ----------
        x : float
            Place; beyond the ends it belongs to the end spans.

        Returns
        -------
        span : int
            Index of the span.
        place : float
            Share of the span that lies before the place, 0 to 1 inside.
        """
        span = bisect_right(self.breaks, x, 1, self._last) - 1
        return span, (x - self.breaks[span]) * self._rates[span]


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
        self._gate = PlainAxis(spline.gate)
        rows = np.array(self._bulk.rows)
        self._threshold = np.einsum("so,sop->sp", spline.threshold[0], rows).tolist()
        self._offset, (self._low, self._high) = spline.offset, spline.gate.breaks[[0, -1]].tolist()
        _, _, drains, gates, order, count = spline.coefficients.shape
        self._drains, self._gates = drains, gates
        self._pack = Struct(f"{spline.vds.order + spline.gate.order + order}d").pack
        self._cuts = (spline.vds.order, spline.vds.order + spline.gate.order)
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
        bulk, t = self._bulk.find(math.sqrt(self._offset + vsb))
        by_bulk = [((d * t + c) * t + b) * t + a for a, b, c, d in self._bulk.rows[bulk]]
        a, b, c, d = self._threshold[bulk]
        at = vgs - (((d * t + c) * t + b) * t + a)
        gate, t = self._gate.find(min(max(at, self._low), self._high))
        by_gate = [((d * t + c) * t + b) * t + a for a, b, c, d in self._gate.rows[gate]]
        drain, t = self._drain.find(math.log(KNEE + vds))
        by_drain = [((d * t + c) * t + b) * t + a for a, b, c, d in self._drain.rows[drain]]
        weights = np.frombuffer(self._pack(*by_drain, *by_gate, *by_bulk))
        one, two = self._cuts
        first = (bulk * self._drains + drain) * self._gates + gate
        return first, weights[:one], weights[one:two], weights[two:]

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
