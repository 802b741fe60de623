"""A device in one condition, ready for queries."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import ArrayLike

from gmid.condition import Condition
from gmid.device.aligned import AlignedGrid
from gmid.device.blend import BlendedGrid
from gmid.device.grid import Grid
from gmid.device.interpolant import Interpolant
from gmid.device.inverse import solve_diode, solve_drive
from gmid.device.model import DeviceModel
from gmid.device.operating_point import OperatingPoint
from gmid.device.quantities import derive_answer, list_needs, list_quantities
from gmid.device.reach import settle_axes
from gmid.device.spline import Array, Indices
from gmid.errors import DataFault, UnknownName, UsageFault
from gmid.sweep.model import Sweep, UnitTransistor

if TYPE_CHECKING:
    from gmid.device.single import SinglePoints

DRIVES = ("vgs", "gm_over_id", "current_density", "vdsat", "id")
"""What may set the gate voltage; exactly one in a query."""

_NUMBERS = frozenset({float, int, np.float64})
"""Types of a single number."""


class Device:
    """One device in one condition.

    Parameters
    ----------
    sweep : Sweep
        Its grid data, with `id` and no negative vds.

    Raises
    ------
    DataFault
        If the sweep cannot serve.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> Device(example_sweep())
    Device(nmos tt/27: L 500 nm to 2 um, vsb 0 V to 1 V, vds 0 V to 1.8 V, vgs -200 mV to 2 V)
    """

    def __init__(self, sweep: Sweep) -> None:
        _check(sweep)
        self._interpolant = Interpolant(AlignedGrid(sweep))

    @classmethod
    def between(cls, sweeps: Sequence[Sweep], temperature: float) -> Device:
        """Make a device at a temperature between those of a table.

        Parameters
        ----------
        sweeps : sequence of Sweep
            One device and corner at two or more temperatures, on the same axes.
        temperature : float
            Temperature [degC], within theirs.

        Returns
        -------
        Device
            Its `notes` say that it is interpolated.

        Raises
        ------
        DataFault
            If the sweeps do not belong together.
        OutOfReach
            If the temperature lies outside theirs.

        Examples
        --------
        >>> from dataclasses import replace
        >>> from gmid.device.example import example_sweep
        >>> cold = example_sweep()
        >>> hot = replace(cold, condition=Condition("tt", 28.0))
        >>> Device.between([cold, hot], 27.5).notes
        ('interpolated between 27 and 28 C',)
        """
        for sweep in sweeps:
            _check(sweep)
        device = cls.__new__(cls)
        device._interpolant = Interpolant(BlendedGrid.of(sweeps, temperature))
        return device

    @property
    def _grid(self) -> Grid:
        return self._interpolant.grid

    @property
    def sweep(self) -> Sweep:
        """The grid data behind it."""
        return self._grid.sweep

    @property
    def name(self) -> str:
        """Name of the device."""
        return self.sweep.device

    @property
    def condition(self) -> Condition:
        """Corner and temperature."""
        return self._grid.condition

    @property
    def conditions(self) -> tuple[Condition, ...]:
        """Corner and temperature, as the one condition that it is in."""
        return (self.condition,)

    @property
    def place(self) -> Indices:
        """Which of the conditions the items of a batch are in: all in the first."""
        return np.zeros((), dtype=np.intp)

    def at_place(self, place: ArrayLike) -> Device:
        """Give the same device for another batch.

        Parameters
        ----------
        place : array_like of int
            All zero: there is one condition.

        Returns
        -------
        Device
            Itself.
        """
        return self

    @property
    def unit(self) -> UnitTransistor:
        """The transistor that was characterised."""
        return self.sweep.unit

    @cached_property
    def fields(self) -> tuple[str, ...]:
        """Quantities that a query answers."""
        return list_quantities(self.sweep)

    @cached_property
    def _stored(self) -> frozenset[str]:
        return frozenset(self.sweep.values)

    @cached_property
    def _single(self) -> SinglePoints:
        from gmid.device.single import SinglePoints  # a terminal's query does without

        return SinglePoints(self._interpolant, self.fields)

    @property
    def notes(self) -> tuple[str, ...]:
        """What is out of the ordinary about these data and their interpolation."""
        return self._grid.notes

    def at(
        self,
        *,
        length: ArrayLike,
        vds: ArrayLike | Literal["diode"],
        vsb: ArrayLike = 0.0,
        vgs: ArrayLike | None = None,
        gm_over_id: ArrayLike | None = None,
        current_density: ArrayLike | None = None,
        vdsat: ArrayLike | None = None,
        id: ArrayLike | None = None,
        count: ArrayLike | None = None,
        width: ArrayLike | None = None,
    ) -> OperatingPoint:
        """Answer a query: operating points at a length, vds, vsb and one drive.

        All arguments broadcast against each other.

        Parameters
        ----------
        length : array_like
            Channel length [m].
        vds : array_like or "diode"
            Drain-source voltage [V]; ``"diode"`` is vds = vgs.
        vsb : array_like
            Source-bulk voltage [V].
        vgs, gm_over_id, current_density, vdsat, id : array_like, keyword-only
            Exactly one: gate-source voltage [V], gm/Id [1/V], current per width [A/m], edge of
            saturation [V], or current [A] of `count` units or of `width` [m].
        count, width : array_like, keyword-only
            With `id` alone, and one of them.

        Returns
        -------
        OperatingPoint
            For one unit; for `count` or `width` where those were given.

        Raises
        ------
        UsageFault
            If none or several drives are given.
        UnknownName
            If the table lacks what the drive needs.
        OutOfReach
            If the table does not cover the query; all that is out of reach is named.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> device = Device(example_sweep())
        >>> device.at(length=1e-6, vds=0.6, gm_over_id=[5, 15, 25]).vgs.round(3)
        array([0.799, 0.49 , 0.343])
        """
        if (
            type(vgs) in _NUMBERS and type(vds) in _NUMBERS
            and type(length) in _NUMBERS and type(vsb) in _NUMBERS
            and gm_over_id is None and current_density is None and vdsat is None
            and id is None and count is None and width is None
        ):  # fmt: skip
            point = self._single.at(length, vgs, vds, vsb, self._compute)
            if point is not None:
                return point
        drives = {
            "vgs": vgs, "gm_over_id": gm_over_id, "current_density": current_density,
            "vdsat": vdsat, "id": id,
        }  # fmt: skip
        name, value, units = self._choose(drives, count, width)
        diode = isinstance(vds, str)
        if diode and vds != "diode":
            raise UsageFault(f"vds is a voltage or 'diode', not {vds!r}.")
        parts = [value, length, 0.0 if diode else vds, vsb, 1.0 if units is None else units]
        arrays = np.broadcast_arrays(*(np.asarray(part, dtype=np.float64) for part in parts))
        shape = arrays[0].shape
        target, long, drain, bulk, number = (array.ravel() for array in arrays)
        if name == "id":
            target = target / number
        gate, long, drain, bulk = self._settle(name, target, long, drain, bulk, diode)
        return OperatingPoint(
            self.sweep.label,
            length=long.reshape(shape)[()],
            vgs=gate.reshape(shape)[()],
            vds=drain.reshape(shape)[()],
            vsb=bulk.reshape(shape)[()],
            count=number.reshape(shape)[()],
            unit_width=self.unit.width,
            known=self.fields,
            compute=self._compute,
        )

    def _choose(
        self,
        drives: dict[str, ArrayLike | None],
        count: ArrayLike | None,
        width: ArrayLike | None,
    ) -> tuple[str, ArrayLike, ArrayLike | None]:
        """Find the one drive, and how many units its current is for."""
        given = {name: value for name, value in drives.items() if value is not None}
        if len(given) != 1:
            what = " and ".join(given) or "none"
            raise UsageFault(
                f"a query needs exactly one drive, not {what}.",
                hint=f"Give one of {', '.join(DRIVES)}.",
            )
        ((name, value),) = given.items()
        for needed in {"gm_over_id": ("gm",), "vdsat": ("vdsat",)}.get(name, ()):
            if needed not in self._stored:
                raise UnknownName(
                    f"{self.sweep.label} has no {needed}, so {name} cannot drive a query.",
                    hint="Import it, or give vgs or a current.",
                )
        if name != "id":
            if count is not None or width is not None:
                raise UsageFault(
                    "count and width belong to the drive id.",
                    hint="Scale the answer instead: .scaled(count=...) or .scaled(width=...).",
                )
            return name, value, None
        if (count is None) == (width is None):
            raise UsageFault("the drive id needs either a count of units or a width.")
        units = count if width is None else np.divide(width, self.unit.width)
        if units is None or not np.all(np.asarray(units) > 0):
            raise UsageFault("count and width must be positive.")
        return name, value, units

    def _settle(
        self, name: str, target: Array, length: Array, vds: Array, vsb: Array, diode: bool
    ) -> tuple[Array, Array, Array, Array]:
        """Find vgs, with all of the bias checked against the table."""
        sweep = self.sweep
        if name == "vgs":
            drain = target if diode else vds
            length, gate, vds, vsb = settle_axes(sweep, length, target, drain, vsb)
            assert gate is not None
            return gate, length, vds, vsb
        if diode:
            vds = np.full(vds.shape, sweep.vds[0])
        length, _, vds, vsb = settle_axes(sweep, length, None, vds, vsb)
        if not target.size:
            return target, length, target if diode else vds, vsb
        if diode:
            gate = solve_diode(self._interpolant, name, target, length, vsb)
            return gate, length, gate, vsb
        return solve_drive(self._interpolant, name, target, length, vds, vsb), length, vds, vsb

    def _compute(self, point: OperatingPoint, names: Sequence[str]) -> dict[str, Array]:
        """Answer fields of an operating point, for one unit."""
        if isinstance(point.vgs, np.float64):
            return self._single.compute(point, names)
        if not np.size(point.vgs):
            return {name: np.zeros(point.shape) for name in names}
        needs = list_needs(names, self._stored)
        bias = [np.ravel(part) for part in (point.length, point.vgs, point.vds, point.vsb)]
        values = self._interpolant.quantities(needs, *bias)
        shape, width, stored = point.shape, self.unit.width, self._stored
        return {
            name: derive_answer(name, values, bias[0], width, stored).reshape(shape)[()]
            for name in names
        }

    def model(self, length: ArrayLike) -> DeviceModel:
        """Settle the length for a circuit's solver.

        Parameters
        ----------
        length : array_like, shape () or (k,)
            Channel lengths [m] in use.

        Returns
        -------
        DeviceModel
            Splines over the three voltages, one set for each length.

        Raises
        ------
        OutOfReach
            If a length lies outside the table.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> Device(example_sweep()).model([0.5e-6, 1e-6]).length
        array([5.e-07, 1.e-06])
        """
        lengths = np.atleast_1d(np.asarray(length, dtype=np.float64))
        zero = np.zeros(lengths.size)
        sweep = self.sweep
        settled, *_ = settle_axes(sweep, lengths, None, zero + sweep.vds[0], zero + sweep.vsb[0])
        return DeviceModel(self._interpolant, settled)

    def __repr__(self) -> str:
        from gmid.quantity import format_quantity

        ranges = []
        for symbol, name, unit in (
            ("L", "length", "m"), ("vsb", "vsb", "V"), ("vds", "vds", "V"), ("vgs", "vgs", "V"),
        ):  # fmt: skip
            axis = getattr(self.sweep, name)
            ends = [format_quantity(float(end), unit) for end in (axis[0], axis[-1])]
            ranges.append(f"{symbol} {' to '.join(dict.fromkeys(ends))}")
        return f"Device({self.name} {self.condition}: {', '.join(ranges)})"

    def _repr_html_(self) -> str:
        from gmid.device.telling import list_device

        return list_device(self)


def _check(sweep: Sweep) -> None:
    if "id" not in sweep:
        raise DataFault(f"{sweep.label} has no id, so nothing can be asked of it.")
    if sweep.vds[0] < -1e-9:
        raise DataFault(
            f"vds of {sweep.label} begins at {sweep.vds[0]:g} V.",
            hint="Import it from 0 V on; below, drain and source change places.",
        )
