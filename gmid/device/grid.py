"""What splines are made of: transformed quantities along a shifted gate axis."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Protocol

from gmid.condition import Condition
from gmid.device.coordinates import bulk_coordinate, drain_coordinate, length_coordinate
from gmid.device.spline import Array, SplineAxis, natural_axis
from gmid.sweep.model import Sweep


@dataclass(frozen=True, eq=False)
class Lines:
    """Spline coefficients along the gate axis alone, of one transformed quantity.

    Parameters
    ----------
    coarse : ndarray, shape (n_length, n_vsb, n_vds, n_gate), or None
        On the sweep's own vds, to be refined.
    fine : ndarray, shape (n_length, n_vsb, n_drain, n_gate), or None
        On the finer drain axis, to be added.

    Examples
    --------
    >>> Lines().parts
    ()
    """

    coarse: Array | None = None
    fine: Array | None = None

    @property
    def parts(self) -> tuple[Array, ...]:
        """Those that are there."""
        return tuple(part for part in (self.coarse, self.fine) if part is not None)


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

    @property
    def has_rest_gm(self) -> bool:
        """Whether that current follows the gate."""

    @property
    def refinement(self) -> Array:
        """Matrix from values on the sweep's vds to values on `drain`."""

    def lines(self, names: Sequence[str]) -> Iterator[Lines]:
        """Yield transformed quantities along the shifted gate axis.

        Parameters
        ----------
        names : sequence of str
            Quantities of the sweep, ``rest`` and ``rest_gm``.

        Yields
        ------
        Lines
            Each in the variable in which it is smooth.
        """


def spline_axes(grid: Grid) -> tuple[SplineAxis, SplineAxis, SplineAxis, SplineAxis]:
    """Make the four axes of a grid's tensor-product spline.

    Parameters
    ----------
    grid : Grid
        The grid.

    Returns
    -------
    length, vsb, vds, gate : SplineAxis
        In the coordinates of `gmid.device.coordinates`.

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
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
