"""Grid data on a gate axis shifted to the threshold, the same for all lengths and body biases.

Along `length` and `vsb` a transistor mostly moves its threshold.  Read against
``u = vgs - threshold(length, vsb)`` its curves lie almost on each other, and few lengths and
body biases suffice.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.device.channel import Channel, fill_gaps, log_where
from gmid.device.coordinates import drain_coordinate, drain_stretch, refine_drain
from gmid.device.curves import (
    Curves,
    cubic_curves,
    follow_bent,
    monotone_curves,
    quintic_curves,
    slope_operator,
)
from gmid.device.gate_reader import GateReader, continue_current, make_reader
from gmid.device.grid import Lines
from gmid.device.reading import cubic_reading, quintic_reading, read_quintic
from gmid.device.roots import solve_newton
from gmid.device.smoothness import is_noisy, slopes_agree
from gmid.device.spline import Array, SplineAxis, uniform_axis
from gmid.sweep.model import Sweep

THRESHOLD_CURRENT = 100e-9
"""Constant-current threshold: this times W/L [A], common practice."""

_STEPS = (0.0125, 0.025)
"""Finest and coarsest step of the shifted gate axis [V]."""

_MOST_SPANS = 600


_LEAST_SHARE = 1e-3
"""Part of the least current of a device that conducts from which on gds tells its slope."""

_SMALL_SHARE = 1e-6
"""Part of gm below which that of the current at vds = 0 is none."""

AT_REST = ("rest", "rest_gm")
"""What does not know vds: the current at vds = 0 and its slope by vgs."""

LOGARITHMIC = frozenset({"gds", "noise_thermal"})
"""Quantities whose logarithm is interpolated."""


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
        self.sweep.fetch(("id", "gm", "gds"))
        return Channel(self.sweep)

    @cached_property
    def has_rest(self) -> bool:
        """Whether any current flows at vds = 0."""
        return bool(np.any(self.channel.rest != 0))

    @cached_property
    def has_rest_gm(self) -> bool:
        """Whether the current at vds = 0 follows the gate, as that of a leaking gate does."""
        if not self.has_rest or "gm" not in self.sweep:
            return False
        largest = np.abs(self.sweep["gm"]).max(axis=2)
        seen = np.abs(self.channel.rest_gm) > _SMALL_SHARE * largest
        return bool(np.any(seen & self._conducting[:, :, -1]))

    @cached_property
    def _conducting(self) -> NDArray[np.bool_]:
        return np.asarray(self.channel.strength > self._least_current)

    @cached_property
    def _least_current(self) -> Array:
        """Current from which on a device conducts [A], shape (n_length, 1, 1, 1)."""
        floor = 1e-3 * THRESHOLD_CURRENT * self.sweep.unit.width / self.sweep.length
        return np.asarray(floor[:, None, None, None])

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
            self.sweep.vgs, self.channel.logarithm, self.channel.gate_ratio, self._conducting
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
                return _cross(self._current_curves(middle), rises, target[..., 0])
        return np.zeros(strength.shape[:2])

    def _current_curves(self, drain: int) -> Curves:
        """Lay the smooth variable of the current along vgs, at one vds."""
        q, vgs = self.channel.logarithm[:, :, drain], self.sweep.vgs
        if self.sloped:
            return quintic_curves(vgs, q, self.channel.gate_ratio[:, :, drain])
        return self._lay(q)

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
    def refinement(self) -> Array:
        """Matrix from values on the sweep's vds to values on `drain`."""
        return _refine(self.sweep.vds.tobytes())

    @cached_property
    def _places(self) -> Array:
        """Gate voltages [V] at the points of the shifted axis, shape (n_length, n_vsb, m)."""
        return np.asarray(self.threshold[:, :, None] + self.gate.points)

    @cached_property
    def _reader(self) -> GateReader:
        return make_reader(self.sweep.vgs, self._places, self.gate.operator, self.threshold)

    @cached_property
    def _between(self) -> tuple[Array, Array] | None:
        """The smooth variable and its slope by vds on the finer drain axis, guided by gds.

        None where gds does not belong to id closely enough; vgs is the sweep's own.
        """
        if self.noisy or "gds" not in self.sweep or self.sweep.vds.size < 4:
            return None
        q, own = self.channel.logarithm, self.sweep.vds
        points, usable = drain_coordinate(own), self._conducting
        slopes = self.channel.drain_slope() / drain_stretch(own)[:, None]
        lines, tilts = (np.moveaxis(part, 2, 3) for part in (q, slopes))
        if not slopes_agree(points, lines, tilts, np.moveaxis(usable, 2, 3), share=0.5):
            return None
        flows = self.channel.strength > _LEAST_SHARE * self._least_current
        slopes = np.where(flows, slopes, slope_operator(points) @ q)
        reading = quintic_reading(points, drain_coordinate(self.drain))
        value, steep = (
            on_values @ q + on_slopes @ slopes
            for on_values, on_slopes in (reading.values, reading.slopes)
        )
        return value, steep * drain_stretch(self.drain)[:, None]

    @cached_property
    def _lift(self) -> Array | None:
        """What gds tells of the smooth variable between the points of vds."""
        if self._between is None:
            return None
        return np.asarray(self._between[0] - self.refinement @ self.channel.logarithm)

    @cached_property
    def _current(self) -> tuple[Array, Array]:
        """Coefficients of the smooth variable and of its slope by vgs, guided by gm."""
        vgs, places = self.sweep.vgs, self._places
        q, steep = self.channel.logarithm, self.channel.gate_ratio
        read = read_quintic(vgs, places, q, steep)
        beyond = places[:, :, None] - vgs[-1]
        first = int(np.argmax(np.append((beyond > 0).any(axis=(0, 1, 2)), True)))
        beyond = beyond[..., first:]
        end = (q[..., -1:], steep[..., -1:], steep @ slope_operator(vgs)[-1:].T)
        for part, bent in zip(read, follow_bent(*end, beyond), strict=True):
            part[..., first:] = np.where(beyond > 0, bent, part[..., first:])
        continue_current(vgs, places, self.threshold, (q, steep), read)
        found = read @ self.gate.operator.T
        return found[0], found[1]

    def lines(self, names: Sequence[str]) -> Iterator[Lines]:
        """Yield quantities in the variables in which they are smooth, along the shifted gate axis.

        Parameters
        ----------
        names : sequence of str
            Quantities of the sweep, ``rest`` for the current at vds = 0, and ``rest_gm`` for
            its slope.

        Yields
        ------
        Lines
            The last two have one drain point.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> next(AlignedGrid(example_sweep()).lines(["gmb"])).coarse.shape[:3]
        (3, 3, 13)
        """
        self.sweep.fetch([name for name in names if name not in AT_REST])
        yield from (self._line_up(name) for name in names)

    def _line_up(self, name: str) -> Lines:
        if name in AT_REST:
            rest = self.channel.rest if name == "rest" else self.channel.rest_gm
            return Lines(self._read(rest[:, :, None]))
        if name == "id" or (name == "gm" and self.sloped):
            return self._guided(name)
        values = self._transform(name)
        if name not in LOGARITHMIC:
            return Lines(self._read(values))
        if self.noisy:
            return Lines(fine=self._read(self.refinement @ values))
        beside = self._beside_current if self.sloped else None
        if name == "gds" and self._between is not None:
            return Lines(beside, self._read(self._conductance(values)))
        own = self._read(values)
        return Lines(own if beside is None else own + beside)

    def _guided(self, name: str) -> Lines:
        """Give the current, or gm where it is the current's slope."""
        fine = None
        if self._lift is not None:
            fine = self._reader.read(self._lift, slopes=name == "gm")
        if self.sloped:
            return Lines(self._current[0 if name == "id" else 1], fine)
        return Lines(self._read(self.channel.logarithm), fine)

    @cached_property
    def _beside_current(self) -> Array:
        """What gm tells of the current between the points of vgs: logarithms follow it."""
        return np.asarray(self._current[0] - self._read(self.channel.logarithm))

    def _conductance(self, values: Array) -> Array:
        """Refine ln gds by the slope of the current's curves, where that is positive."""
        assert self._between is not None
        assert self._lift is not None
        q, steep = (part[:, :, 1::2] for part in self._between)
        thermal_voltage, drain = self.condition.thermal_voltage, self.drain[1::2, None]
        fall = np.exp(-drain / thermal_voltage)
        slope = steep * -np.expm1(-drain / thermal_voltage) + fall / thermal_voltage
        found = np.asarray(self.refinement @ values)
        good = slope > 0
        known = q + np.log(np.where(good, slope, 1.0))
        found[:, :, 1::2] = np.where(good, known, found[:, :, 1::2])
        return found

    def _transform(self, name: str) -> Array:
        if name == "gm":
            return self.channel.gate_ratio
        if name == "gmb":
            return self.channel.bulk_ratio()
        if name == "noise_flicker":
            return self.channel.flicker_ratio()
        values = self.sweep[name]
        return fill_gaps(log_where(values > 0, values)) if name in LOGARITHMIC else values

    def _lay(self, values: Array) -> Curves:
        return (monotone_curves if self.noisy else cubic_curves)(self.sweep.vgs, values)

    def _read(self, values: Array) -> Array:
        """Read values over (length, vsb, vds, vgs) along the gate axis, as coefficients."""
        if not self.noisy:
            return self._reader.read(values)
        return self._lay(values).values(self._places[:, :, None]) @ self.gate.operator.T


@lru_cache(maxsize=32)
def _refine(raw: bytes) -> Array:
    """Make the refinement of some vds once, for every condition."""
    vds = np.frombuffer(raw)
    reading = cubic_reading(drain_coordinate(vds), drain_coordinate(refine_drain(vds)))
    reading.values[0].flags.writeable = False
    return reading.values[0]


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


def _cross(curves: Curves, rises: NDArray[np.bool_], target: Array) -> Array:
    """Find where curves last cross a target upwards, between the points marked for each."""
    last = rises.shape[-1] - 1 - np.argmax(rises[..., ::-1], axis=-1)
    picked = np.take_along_axis(curves.pieces, last[..., None, None], axis=-2)[..., 0, :]
    powers = picked.reshape(-1, picked.shape[-1]).T
    goal = np.broadcast_to(target, last.shape).ravel()

    def evaluate(t: Array) -> tuple[Array, Array]:
        value, slope = powers[-1], np.zeros(t.size)
        for coefficient in powers[-2::-1]:
            slope = slope * t + value
            value = value * t + coefficient
        return value, slope

    root = solve_newton(evaluate, goal, np.zeros(goal.size), np.ones(goal.size), 1.0)
    width = np.diff(curves.points)[last]
    return np.asarray(curves.points[last] + root.reshape(last.shape) * width)
