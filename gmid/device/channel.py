"""What of the drain current is the channel's, and in which variables it is smooth.

The current is split as ``id = rest + exp(q) (1 - exp(-vds/vt))``: `rest` is what still flows
at vds = 0 (junctions, gate), and `q` stays finite and smooth from there through triode and
saturation, over all decades of weak inversion.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gmid.device.curves import slope_operator
from gmid.device.spline import Array, apply_along
from gmid.sweep.model import Sweep

ZERO_VDS = 1e-9
"""Largest vds that counts as zero [V]."""

_ROUNDING = 3e-6
"""Part of the rest current below which a channel current is rounding."""

_SMALLEST = 1e-21
"""Smallest channel current that is told from none [A]."""

_STEEPEST = 2.0
"""Bound of gm over the channel's current, in units of q/kT: beyond it data are noise."""


@dataclass(frozen=True, eq=False)
class Channel:
    """The channel's part of a sweep.

    Parameters
    ----------
    sweep : Sweep
        Grid data with `id`; its vds must not be negative.

    Examples
    --------
    >>> from gmid.condition import Condition
    >>> from gmid.sweep.model import UnitTransistor
    >>> vds, one = np.array([0.1, 0.2]), np.ones(1)
    >>> sweep = Sweep("n", Condition("tt", 27.0), UnitTransistor("n", 2e-6), one * 1e-6, one * 0,
    ...               vds, one, {"id": np.full((1, 1, 2, 1), 1e-6)})
    >>> Channel(sweep).logarithm[0, 0, :, 0].round(3)
    array([-13.794, -13.815])
    """

    sweep: Sweep

    @property
    def begins_at_zero(self) -> bool:
        """Whether the first vds is zero, where currents vanish and limits stand for ratios."""
        return bool(abs(self.sweep.vds[0]) < ZERO_VDS)

    @cached_property
    def saturation(self) -> Array:
        """The factor 1 - exp(-vds/vt) [-], shape (n_vds, 1)."""
        return saturate(self.sweep.vds, self.sweep.condition.thermal_voltage)[:, None]

    @cached_property
    def rest(self) -> Array:
        """Current at vds = 0 [A], shape (n_length, n_vsb, n_vgs); zero where it is unknown."""
        current = self.sweep["id"][:, :, 0]
        return np.array(current) if self.begins_at_zero else np.zeros(current.shape)

    @cached_property
    def rest_gm(self) -> Array:
        """Slope of `rest` by vgs, which is gm at vds = 0 [S]; zero where it is unknown."""
        gm = self.sweep["gm"][:, :, 0]
        return np.array(gm) if self.begins_at_zero else np.zeros(gm.shape)

    @cached_property
    def logarithm(self) -> Array:
        """The smooth variable q = ln(channel current / saturation factor), shape of the grid."""
        current = self.sweep["id"] - self.rest[:, :, None]
        floor = np.maximum(_SMALLEST, _ROUNDING * np.abs(self.rest))[:, :, None]
        start = int(self.begins_at_zero)
        known = current > 0 if self.begins_at_zero else current > _SMALLEST
        q = log_where(known[:, :, start:], np.maximum(current, floor)[:, :, start:])
        q = fill_gaps(
            fall_off(
                q - np.log(self.saturation[start:]),
                self.sweep.vgs,
                1.0 / self.sweep.condition.thermal_voltage,
            )
        )
        return q if start == 0 else np.concatenate((self._at_zero(q), q), axis=2)

    def _at_zero(self, inner: Array) -> Array:
        """Take q at vds = 0 from gds there, which is exp(q)/vt, or from beyond."""
        beyond = extrapolate_first(inner, self.sweep.vds)
        if "gds" not in self.sweep:
            return beyond
        gds = self.sweep["gds"][:, :, :1]
        limit = log_where(gds > 0, gds * self.sweep.condition.thermal_voltage)
        return np.where(np.isnan(limit), beyond, limit)

    @cached_property
    def strength(self) -> Array:
        """The channel's current [A], never zero: at vds = 0 it is exp(q)."""
        factor = np.where(self.saturation > 0, self.saturation, 1.0)
        return np.asarray(np.exp(self.logarithm) * factor)

    @cached_property
    def gate_ratio(self) -> Array:
        """Ratio of the channel's gm to its current [1/V]; at vds = 0 the limit dq/dvgs."""
        gm = self.sweep["gm"] - self.rest_gm[:, :, None]
        return self._ratio(gm, 3, self.sweep.vgs)

    def bulk_ratio(self) -> Array:
        """Divide gmb by the channel's current; the limit -dq/dvsb stands at vds = 0.

        Returns
        -------
        ndarray, shape of the grid
            Ratio [1/V].

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> Channel(example_sweep()).bulk_ratio()[:, :, 1:].max().round(2)
        np.float64(7.44)
        """
        return self._ratio(self.sweep["gmb"], 1, -self.sweep.vsb)

    def drain_slope(self) -> Array:
        """Give the slope dq/dvds that gds stands for; at vds = 0 that of a spline.

        Returns
        -------
        ndarray, shape of the grid
            Slope [1/V].

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> Channel(example_sweep()).drain_slope()[0, 0, 5, 10].round(4)
        np.float64(0.1018)
        """
        start = int(self.begins_at_zero)
        thermal_voltage = self.sweep.condition.thermal_voltage
        slope = self.sweep["gds"] / self.strength
        slope[:, :, start:] -= 1.0 / (
            thermal_voltage * np.expm1(self.sweep.vds[start:, None] / thermal_voltage)
        )
        if start:
            first = slope_operator(self.sweep.vds)[:1]
            slope[:, :, :1] = apply_along(first, self.logarithm, 2)
        return slope

    def _ratio(self, conductance: Array, position: int, voltage: Array) -> Array:
        bound = _STEEPEST / self.sweep.condition.thermal_voltage
        ratio = np.clip(conductance / self.strength, -bound, bound)
        if not self.begins_at_zero:
            return ratio
        if voltage.size > 1:
            sense = 1.0 if voltage[-1] > voltage[0] else -1.0
            slopes = sense * slope_operator(sense * voltage)
            limit = apply_along(slopes, self.logarithm[:, :, :1], position)
            ratio[:, :, :1] = np.clip(limit, -bound, bound)
        elif ratio.shape[2] > 1:
            ratio[:, :, 0] = ratio[:, :, 1]
        return ratio

    def flicker_ratio(self) -> Array:
        """Take the logarithm of flicker noise over the square of the channel's current.

        Returns
        -------
        ndarray, shape of the grid
            ``ln(noise_flicker / current**2)``, extrapolated to vds = 0.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> Channel(example_sweep()).flicker_ratio().shape
        (3, 3, 13, 45)
        """
        noise = self.sweep["noise_flicker"]
        start = int(self.begins_at_zero)
        logs = log_where(noise > 0, noise) - 2 * np.log(self.strength)
        inner = fill_gaps(logs[:, :, start:])
        if start == 0:
            return inner
        return np.concatenate((extrapolate_first(inner, self.sweep.vds), inner), axis=2)


def saturate(vds: Array, thermal_voltage: Array | float) -> Array:
    """Give the factor by which weak inversion falls towards vds = 0.

    Parameters
    ----------
    vds : ndarray
        Drain-source voltage [V].
    thermal_voltage : float or ndarray, shape of vds
        kT/q [V].

    Returns
    -------
    ndarray
        1 - exp(-vds/vt) [-].

    Examples
    --------
    >>> float(saturate(np.array(0.0), 0.026))
    0.0
    """
    return np.asarray(-np.expm1(-vds / thermal_voltage) + 0.0)


def log_where(known: NDArray[np.bool_], values: Array) -> Array:
    """Take logarithms where values are known, and put nan elsewhere.

    Parameters
    ----------
    known : ndarray of bool
        Where a value is usable.
    values : ndarray
        Values, positive where known.

    Returns
    -------
    ndarray
        Natural logarithms.

    Examples
    --------
    >>> log_where(np.array([True, False]), np.array([1.0, -1.0]))
    array([ 0., nan])
    """
    return np.asarray(np.log(values, where=known, out=np.full(values.shape, np.nan)))


def fall_off(values: Array, vgs: Array, slope: float) -> Array:
    """Continue logarithms of current below the first gate voltage at which any flows.

    Parameters
    ----------
    values : ndarray, shape (..., n)
        Logarithms, nan where no current flows.
    vgs : ndarray, shape (n,)
        Gate axis [V].
    slope : float
        Steepest that a transistor can be, q/kT [1/V].

    Returns
    -------
    ndarray, shape (..., n)
        With the nan before the first known value replaced by a falling line.

    Examples
    --------
    >>> fall_off(np.array([[np.nan, -3.0, np.nan]]), np.array([0.0, 0.1, 0.2]), 20.0)
    array([[-5., -3., nan]])
    """
    known = ~np.isnan(values)
    first = np.argmax(known, axis=-1)[..., None]
    leading = (np.arange(vgs.size) < first) & known.any(axis=-1, keepdims=True)
    if not leading.any():
        return values
    line = np.take_along_axis(values, first, axis=-1) - slope * (vgs[first] - vgs)
    return np.where(leading, np.maximum(line, np.log(_SMALLEST)), values)


def fill_gaps(values: Array) -> Array:
    """Replace nan along the last axis by what stands beside it.

    Parameters
    ----------
    values : ndarray
        With nan where nothing usable was found.

    Returns
    -------
    ndarray
        Linear between known neighbours, constant at the ends; a line without any known value
        takes the smallest of all.

    Examples
    --------
    >>> fill_gaps(np.array([[np.nan, 1.0, np.nan, 3.0]]))
    array([[1., 1., 2., 3.]])
    """
    gaps = np.isnan(values)
    if not gaps.any():
        return values
    lowest = float(np.min(values[~gaps], initial=np.inf))
    lines = values.reshape(-1, values.shape[-1]).copy()
    places = np.arange(lines.shape[1])
    lowest = lowest if np.isfinite(lowest) else float(np.log(_SMALLEST))
    for row in np.flatnonzero(gaps.reshape(lines.shape).any(axis=1)):
        known = ~np.isnan(lines[row])
        found = np.interp(places, places[known], lines[row, known]) if known.any() else lowest
        lines[row] = found
    return lines.reshape(values.shape)


def extrapolate_first(inner: Array, vds: Array) -> Array:
    """Continue values to the first vds from the next ones.

    Parameters
    ----------
    inner : ndarray, shape (n_length, n_vsb, n_vds - 1, n_vgs)
        Values at all vds but the first.
    vds : ndarray, shape (n_vds,)
        All of the axis [V].

    Returns
    -------
    ndarray, shape (n_length, n_vsb, 1, n_vgs)
        Value of the parabola through the next three, or of what fewer points allow.

    Examples
    --------
    >>> inner = np.array([1.0, 2.0, 3.0]).reshape(1, 1, 3, 1)
    >>> float(extrapolate_first(inner, np.array([0.0, 1.0, 2.0, 3.0]))[0, 0, 0, 0])
    0.0
    """
    used = vds[1:4]
    weights = [
        np.prod([(vds[0] - other) / (here - other) for other in used if other != here])
        for here in used
    ]
    return np.asarray(np.einsum("d,ijdk->ijk", np.array(weights), inner[:, :, : used.size]))[
        :, :, None
    ]
