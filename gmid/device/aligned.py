"""Grid data on a gate axis shifted to the threshold, the same for all lengths and body biases.

Along `length` and `vsb` a transistor mostly moves its threshold.  Read against
``u = vgs - threshold(length, vsb)`` its curves lie almost on each other, and few lengths and
body biases suffice.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.device.channel import Channel, fill_gaps, log_where
from gmid.device.coordinates import (
    bulk_coordinate,
    drain_coordinate,
    drain_stretch,
    length_coordinate,
    refine_drain,
)
from gmid.device.curves import Curves, cubic_curves, monotone_curves, quintic_curves
from gmid.device.smoothness import is_noisy, slopes_agree
from gmid.device.spline import Array, SplineAxis, natural_axis, uniform_axis
from gmid.sweep.model import Sweep

THRESHOLD_CURRENT = 100e-9
"""Constant-current threshold: this times W/L [A], common practice."""

_STEPS = (0.0125, 0.025)
"""Finest and coarsest step of the shifted gate axis [V]."""

_MOST_SPANS = 600

LOGARITHMIC = frozenset({"gds", "noise_thermal"})
"""Quantities whose logarithm is interpolated."""


class Grid(Protocol):
    """What the interpolant needs: transformed values on shifted axes."""

    @property
    def sweep(self) -> Sweep:
        """The sweep behind it, for names, unit and axes."""

    @property
    def condition(self) -> Condition:
        """The condition it stands for."""

    @property
    def threshold(self) -> Array:
        """Shift of the gate axis [V], shape (n_length, n_vsb)."""

    @property
    def gate(self) -> SplineAxis:
        """The shifted gate axis [V]."""

    @property
    def drain(self) -> Array:
        """Points of the drain axis [V]."""

    @property
    def notes(self) -> tuple[str, ...]:
        """What was decided for these data."""

    @property
    def has_rest(self) -> bool:
        """Whether any current flows at vds = 0."""

    def table(self, name: str) -> Array:
        """Give a transformed quantity.

        Parameters
        ----------
        name : str
            A quantity of the sweep, or ``rest``.

        Returns
        -------
        ndarray, shape (n_length, n_vsb, n_drain, n_gate)
            In the variable in which it is smooth.
        """


@dataclass(frozen=True, eq=False)
class AlignedGrid:
    """One sweep on shifted axes.

    Parameters
    ----------
    sweep : Sweep
        Grid data with `id`.
    reach : tuple of float, optional
        Ends of the shifted gate axis [V]; as far as the data need by default.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> AlignedGrid(example_sweep()).threshold.shape
    (3, 3)
    """

    sweep: Sweep
    reach: tuple[float, float] | None = None

    @property
    def condition(self) -> Condition:
        """The sweep's condition."""
        return self.sweep.condition

    @cached_property
    def channel(self) -> Channel:
        """The channel's part of the current."""
        return Channel(self.sweep)

    @cached_property
    def has_rest(self) -> bool:
        """Whether any current flows at vds = 0."""
        return bool(np.any(self.channel.rest != 0))

    @cached_property
    def _conducting(self) -> NDArray[np.bool_]:
        floor = 1e-3 * THRESHOLD_CURRENT * self.sweep.unit.width / self.sweep.length
        return np.asarray(self.channel.strength > floor[:, None, None, None])

    @cached_property
    def noisy(self) -> bool:
        """Whether the current is too rough along vgs for a spline."""
        return is_noisy(self.sweep.vgs, self.channel.logarithm, self._conducting)

    @cached_property
    def sloped(self) -> bool:
        """Whether gm belongs to id closely enough to guide its curve."""
        if self.noisy or "gm" not in self.sweep or self.sweep.vgs.size < 4:
            return False
        return slopes_agree(
            self.sweep.vgs, self.channel.logarithm, self.channel.gate_ratio(), self._conducting
        )

    @property
    def notes(self) -> tuple[str, ...]:
        """How the data are interpolated, where that is not the usual way."""
        found = []
        if self.noisy:
            found.append("id is noisy along vgs: monotone cubics stand in for splines")
        elif not self.sloped and "gm" in self.sweep:
            found.append("gm is not the slope of id: each is interpolated alone")
        if not np.any(self.threshold):
            found.append("no common threshold was found: the gate axis is not aligned")
        return tuple(found)

    @cached_property
    def current_curves(self) -> Curves:
        """The smooth variable of the current along vgs."""
        q, vgs = self.channel.logarithm, self.sweep.vgs
        if self.noisy:
            return monotone_curves(vgs, q)
        if self.sloped:
            return quintic_curves(vgs, q, self.channel.gate_ratio())
        return cubic_curves(vgs, q)

    @cached_property
    def threshold(self) -> Array:
        """Constant-current threshold [V], shape (n_length, n_vsb); zero where there is none."""
        vds = self.sweep.vds
        middle = int(np.argmin(np.abs(vds - 0.5 * vds[-1])))
        strength = np.log(self.channel.strength[:, :, middle])
        offset = strength - self.channel.logarithm[:, :, middle]
        for part in (1.0, 0.1, 0.01):
            level = np.log(part * THRESHOLD_CURRENT * self.sweep.unit.width / self.sweep.length)
            target = level[:, None, None] - offset
            rises = (strength - offset)[..., :-1] < target[..., :-1]
            rises &= (strength - offset)[..., 1:] >= target[..., 1:]
            if rises.any(axis=-1).all():
                curves = Curves(self.sweep.vgs, self.current_curves.pieces[:, :, middle])
                return _bisect(curves, rises, target[..., :1])
        return np.zeros(strength.shape[:2])

    @cached_property
    def gate(self) -> SplineAxis:
        """The shifted gate axis, equal steps from the lowest to the highest need."""
        vgs = self.sweep.vgs
        low, high = self.reach or gate_reach(self)
        step = np.clip(0.5 * np.min(np.diff(vgs), initial=1.0), *_STEPS)
        spans = int(np.clip(np.ceil((high - low) / step), 8, _MOST_SPANS))
        return uniform_axis(low, high if high > low else low + 1.0, spans)

    @cached_property
    def drain(self) -> Array:
        """The drain axis, with a point between any two of its own."""
        return refine_drain(self.sweep.vds)

    @cached_property
    def _between(self) -> tuple[Array, Array] | None:
        """The smooth variable and its slope by vds on the finer drain axis, guided by gds.

        None where gds does not belong to id closely enough; vgs is the sweep's own.
        """
        if self.noisy or "gds" not in self.sweep or self.sweep.vds.size < 4:
            return None
        q, own = self.channel.logarithm, self.sweep.vds
        points, usable = drain_coordinate(own), np.moveaxis(self._conducting, 2, 3)
        lines = np.moveaxis(q, 2, 3)
        slopes = np.moveaxis(self.channel.drain_slope(), 2, 3) / drain_stretch(own)
        if not slopes_agree(points, lines, slopes, usable, share=0.5):
            return None
        plain = cubic_curves(points, lines).slopes(np.broadcast_to(points, lines.shape))
        curves = quintic_curves(points, lines, np.where(usable, slopes, plain))
        places = drain_coordinate(self.drain)
        places = np.broadcast_to(places, (*lines.shape[:3], places.size))
        steep = curves.slopes(places) * drain_stretch(self.drain)
        return np.moveaxis(curves.values(places), 3, 2), np.moveaxis(steep, 3, 2)

    @cached_property
    def _lift(self) -> Curves | None:
        """What gds tells of the smooth variable between the points, as curves along vgs."""
        if self._between is None:
            return None
        return self._lay(self._between[0] - self._refine(self.channel.logarithm))

    def table(self, name: str) -> Array:
        """Give a quantity in the variable in which it is smooth, on the shifted axes.

        Parameters
        ----------
        name : str
            A quantity of the sweep, or ``rest`` for the current at vds = 0.

        Returns
        -------
        ndarray, shape (n_length, n_vsb, n_drain, n_gate)
            ``rest`` has one drain point.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> AlignedGrid(example_sweep()).table("gm").shape[:3]
        (3, 3, 25)
        """
        shifted = self.threshold[:, :, None, None] + self.gate.points
        places = np.broadcast_to(shifted, (*self.sweep.shape[:3], shifted.shape[-1]))
        if name == "rest":
            return self._lay(self.channel.rest[:, :, None]).values(shifted)
        if name == "id":
            found = self._refine(self.current_curves.values(places))
            return found if self._lift is None else found + self._lift.values(shifted)
        if name == "gm" and self.sloped:
            found = self._refine(self.current_curves.slopes(places))
            return found if self._lift is None else found + self._lift.slopes(shifted)
        values = self._transform(name)
        if name == "gds" and self._between is not None:
            values = self._conductance(values)
        elif name in LOGARITHMIC or self.sloped:
            values = self._refine(values)
        if name in LOGARITHMIC and self.sloped:
            q = self._refine(self.channel.logarithm) if self._between is None else self._between[0]
            return self._lay(values - q).values(shifted) + self.table("id")
        if values.shape[2] == self.drain.size:
            return self._lay(values).values(shifted)
        return self._refine(self._lay(values).values(places))

    def _conductance(self, values: Array) -> Array:
        """Refine ln gds by the slope of the current's curves, where that is positive."""
        assert self._between is not None
        q, steep = self._between
        thermal_voltage = self.sweep.condition.thermal_voltage
        fall = np.exp(-self.drain / thermal_voltage)[:, None]
        slope = steep * -np.expm1(-self.drain / thermal_voltage)[:, None] + fall / thermal_voltage
        found = self._refine(values)
        between = np.zeros(found.shape, dtype=bool)
        between[:, :, 1::2] = True
        between &= slope > 0
        return np.where(between, q + np.log(np.where(between, slope, 1.0)), found)

    def _transform(self, name: str) -> Array:
        if name == "gm":
            return self.channel.gate_ratio()
        if name == "gmb":
            return self.channel.bulk_ratio()
        if name == "noise_flicker":
            return self.channel.flicker_ratio()
        values = self.sweep[name]
        return fill_gaps(log_where(values > 0, values)) if name in LOGARITHMIC else values

    def _lay(self, values: Array) -> Curves:
        return (monotone_curves if self.noisy else cubic_curves)(self.sweep.vgs, values)

    def _refine(self, values: Array) -> Array:
        """Read values over the third axis, on the sweep's vds, on the finer drain axis."""
        own, fine = drain_coordinate(self.sweep.vds), drain_coordinate(self.drain)
        curves = cubic_curves(own, np.moveaxis(values, 2, 3))
        places = np.broadcast_to(fine, (*curves.pieces.shape[:3], fine.size))
        return np.ascontiguousarray(np.moveaxis(curves.values(places), 3, 2))


def gate_reach(grid: AlignedGrid) -> tuple[float, float]:
    """Give the ends of the shifted gate axis that a grid needs.

    Parameters
    ----------
    grid : AlignedGrid
        The grid.

    Returns
    -------
    low, high : float
        With room for a threshold that overshoots between its points [V].

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> low, high = gate_reach(AlignedGrid(example_sweep()))
    >>> low < -0.7 and high > 1.5
    True
    """
    vgs, threshold = grid.sweep.vgs, grid.threshold
    room = 0.02 * float(np.ptp(threshold)) + 1e-9
    low, high = float(threshold.min()) - room, float(threshold.max()) + room
    return float(vgs[0]) - high, float(vgs[-1]) - low


def _bisect(curves: Curves, rises: NDArray[np.bool_], target: Array) -> Array:
    """Find where curves last cross a target upwards, between the points marked for each."""
    last = rises.shape[-1] - 1 - np.argmax(rises[..., ::-1], axis=-1)
    low, high = curves.points[last], curves.points[last + 1]
    for _ in range(50):
        middle = 0.5 * (low + high)
        below = curves.values(middle[..., None])[..., 0] < target[..., 0]
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return np.asarray(0.5 * (low + high))


def spline_axes(grid: Grid) -> tuple[SplineAxis, SplineAxis, SplineAxis, SplineAxis]:
    """Make the four axes of a grid's tensor-product spline.

    Parameters
    ----------
    grid : Grid
        The grid.

    Returns
    -------
    length, vsb, vds, gate : SplineAxis
        In the coordinates of this module.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> [axis.order for axis in spline_axes(AlignedGrid(example_sweep()))]
    [3, 3, 4, 4]
    """
    sweep = grid.sweep
    return (
        natural_axis(length_coordinate(sweep.length)),
        natural_axis(bulk_coordinate(sweep.vsb, float(sweep.vsb[0]))),
        natural_axis(drain_coordinate(grid.drain)),
        grid.gate,
    )
