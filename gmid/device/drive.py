"""The quantities that may set a gate voltage, made of what the splines hold."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gmid.device.aligned import AT_REST
from gmid.device.interpolant import Interpolant
from gmid.device.spline import Array

FALLING = frozenset({"gm_over_id"})
"""Drives that fall with vgs."""

SMALLEST = 1e-30
"""What stands for a current that is not positive, so that it has a logarithm [A]."""


@dataclass(frozen=True, eq=False)
class Drive:
    """A quantity that sets the gate voltage.

    Parameters
    ----------
    name : str
        ``gm_over_id``, ``id``, ``current_density`` or ``vdsat``.
    interpolant : Interpolant
        The splines.

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
    >>> from gmid.device.example import example_sweep
    >>> Drive("id", Interpolant(AlignedGrid(example_sweep()))).tables
    ('id',)
    """

    name: str
    interpolant: Interpolant

    @property
    def sense(self) -> float:
        """1 where the drive rises with vgs, -1 where it falls."""
        return -1.0 if self.name in FALLING else 1.0

    @property
    def has_rest(self) -> bool:
        """Whether the current at vds = 0 enters."""
        return self.name != "vdsat" and self.interpolant.grid.has_rest

    @property
    def has_rest_gm(self) -> bool:
        """Whether the slope of that current enters as well."""
        return self.name == "gm_over_id" and self.interpolant.grid.has_rest_gm

    @property
    def tables(self) -> tuple[str, ...]:
        """Transformed quantities that it is made of."""
        if self.name == "vdsat":
            return ("vdsat",)
        if self.name != "gm_over_id":
            return ("id",)
        return ("gm", "id") if self.has_rest else ("gm",)

    @property
    def columns(self) -> tuple[str, ...]:
        """The same, with the current at vds = 0 and its slope where those enter."""
        if not self.has_rest:
            return self.tables
        return (*self.tables, *(AT_REST if self.has_rest_gm else AT_REST[:1]))

    def scale(self, value: Array) -> Array:
        """Map the drive to the variable that is solved for: currents by their logarithm.

        Parameters
        ----------
        value : ndarray
            The drive; of one unit where it is a current.

        Returns
        -------
        ndarray
            The same, or its logarithm.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> Drive("id", spline).scale(np.ones(1))
        array([0.])
        """
        if self.tables != ("id",):
            return value
        unit = self.interpolant.grid.sweep.unit.width if self.name == "current_density" else 1.0
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.log(np.where(value > 0, value, np.nan) * unit)

    def unscale(self, value: Array) -> Array:
        """Undo `scale`.

        Parameters
        ----------
        value : ndarray
            As `scale` gives it.

        Returns
        -------
        ndarray
            The drive.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> Drive("current_density", spline).unscale(np.zeros(1))
        array([500000.])
        """
        if self.tables != ("id",):
            return value
        unit = self.interpolant.grid.sweep.unit.width if self.name == "current_density" else 1.0
        return np.asarray(np.exp(value) / unit)

    def values(self, columns: Array, factor: Array) -> Array:
        """Compute the scaled drive from transformed quantities.

        Parameters
        ----------
        columns : ndarray, shape (columns, ...)
            Transformed quantities, in the order of `columns`.
        factor : ndarray
            Saturation factor 1 - exp(-vds/vt), broadcasting.

        Returns
        -------
        ndarray, shape (...)
            The scaled drive.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> Drive("id", spline).values(np.zeros((1, 1)), np.ones(1))
        array([0.])
        """
        first: Array = columns[0]
        if self.tables == ("id",):
            with np.errstate(divide="ignore"):
                if not self.has_rest:
                    return np.asarray(first + np.log(factor))
            return np.asarray(np.log(np.maximum(np.exp(first) * factor + columns[1], SMALLEST)))
        if not self.has_rest:
            return first
        channel = np.exp(columns[1])
        channel *= factor
        total = channel + columns[2]
        share: Array = np.divide(channel, total, out=np.ones(total.shape), where=total > 0)
        if not self.has_rest_gm:
            return first * share
        part: Array = np.divide(columns[3], total, out=np.zeros(total.shape), where=total > 0)
        return first * share + part

    def bounds(
        self, low: Array, high: Array, least_factor: Array, most_factor: Array
    ) -> tuple[Array, Array]:
        """Bound the scaled drive where transformed quantities are known within bounds.

        Parameters
        ----------
        low, high : ndarray, shape (columns, ...)
            Bounds of the transformed quantities, in the order of `columns`.
        least_factor, most_factor : ndarray
            Bounds of the saturation factor, broadcasting.

        Returns
        -------
        low, high : ndarray, shape (...)
            The drive lies between them; infinite where nothing can be said.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> one = np.ones((1, 1))
        >>> Drive("id", spline).bounds(0 * one, one, one[0], one[0])
        (array([0.]), array([1.]))
        """
        if self.name != "gm_over_id" or not self.has_rest:
            return self.values(low, least_factor), self.values(high, most_factor)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            least, most = np.exp(low[1]) * least_factor, np.exp(high[1]) * most_factor
            parts = low[2] / np.where(low[2] > 0, most, least)
            more = high[2] / np.where(high[2] > 0, least, most)
            shares = (1.0 / (1.0 + more), 1.0 / (1.0 + parts))
            corners = np.stack([ratio * share for ratio in (low[0], high[0]) for share in shares])
        good = (parts > -1.0) & np.isfinite(corners).all(axis=0)
        found = np.where(good, corners.min(axis=0), -np.inf)
        top = np.where(good, corners.max(axis=0), np.inf)
        if not self.has_rest_gm:
            return found, top
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            totals = (least + low[2], most + high[2])
            parts = np.stack([gm / total for gm in (low[3], high[3]) for total in totals])
        good = (totals[0] > 0) & np.isfinite(parts).all(axis=0)
        found = np.where(good, found + parts.min(axis=0), -np.inf)
        return found, np.where(good, top + parts.max(axis=0), np.inf)

    def slopes(self, columns: Array, slopes: Array, factor: Array) -> Array:
        """Give the derivative of the scaled drive.

        Parameters
        ----------
        columns, slopes : ndarray, shape (columns, ...)
            Transformed quantities and their derivatives, in the order of `columns`.
        factor : ndarray
            Saturation factor 1 - exp(-vds/vt), broadcasting.

        Returns
        -------
        ndarray, shape (...)
            The derivative of `values`.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> Drive("id", spline).slopes(np.zeros((1, 1)), np.ones((1, 1)), np.ones(1))
        array([1.])
        """
        slope: Array = slopes[0]
        if not self.has_rest:
            return slope
        if self.tables == ("id",):
            channel = np.exp(columns[0]) * factor
            total = np.maximum(channel + columns[1], SMALLEST)
            return np.asarray((channel * slope + slopes[1]) / total)
        first, rest = columns[0], columns[2]
        channel = np.exp(columns[1]) * factor
        total = channel + rest
        good = total > 0
        safe = np.where(good, total, 1.0)
        tilt = channel * (slopes[1] * rest - slopes[2]) / safe**2
        found = slope * channel / safe + first * tilt
        if self.has_rest_gm:
            growth = (channel * slopes[1] + slopes[2]) / safe
            found += (slopes[3] - columns[3] * growth) / safe
        return np.where(good, found, slope)
