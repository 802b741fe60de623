"""The quantities that may set a gate voltage, made of what the splines hold."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

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
    def tables(self) -> tuple[str, ...]:
        """Transformed quantities that it is made of."""
        if self.name == "vdsat":
            return ("vdsat",)
        if self.name != "gm_over_id":
            return ("id",)
        return ("gm", "id") if self.has_rest else ("gm",)

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

    def evaluate(self, values: Array, slopes: Array, factor: Array) -> tuple[Array, Array]:
        """Compute the scaled drive and its slope from transformed quantities.

        Parameters
        ----------
        values, slopes : ndarray, shape (..., columns)
            Transformed quantities and their derivatives, in the order of `tables`; where
            `has_rest`, the current at vds = 0 [A] comes last.
        factor : ndarray
            Saturation factor 1 - exp(-vds/vt), broadcasting.

        Returns
        -------
        value, slope : ndarray, shape (...)
            The scaled drive and its derivative.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> Drive("id", spline).evaluate(np.zeros((1, 1)), np.ones((1, 1)), np.ones(1))
        (array([0.]), array([1.]))
        """
        first, slope = values[..., 0], slopes[..., 0]
        if self.tables == ("id",):
            return self._current(first, slope, values[..., -1], slopes[..., -1], factor)
        if not self.has_rest:
            return first, slope
        rest, rest_slope = values[..., 2], slopes[..., 2]
        channel = np.exp(values[..., 1]) * factor
        total = channel + rest
        good = total > 0
        safe = np.where(good, total, 1.0)
        share = np.where(good, channel / safe, 1.0)
        tilt = channel * (slopes[..., 1] * rest - rest_slope) / safe**2
        return first * share, slope * share + first * np.where(good, tilt, 0.0)

    def _current(
        self, q: Array, slope: Array, rest: Array, rest_slope: Array, factor: Array
    ) -> tuple[Array, Array]:
        """Give the logarithm of the current and its slope."""
        if not self.has_rest:
            with np.errstate(divide="ignore"):
                return q + np.log(factor), slope
        channel = np.exp(q) * factor
        total = np.maximum(channel + rest, SMALLEST)
        return np.log(total), (channel * slope + rest_slope) / total
