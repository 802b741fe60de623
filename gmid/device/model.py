"""A device at settled lengths, as a circuit's solver uses it.

The solver may leave the table while it iterates.  There the smooth variable of the current is
continued in straight lines, the threshold too, and below vds = 0 drain and source change places,
so that the current stays smooth everywhere; a mask tells which points lie inside.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.device.capacitance import assemble_matrix
from gmid.device.channel import saturate
from gmid.device.collapsed import OFF_SLOPE, ON_SLOPE, Collapsed, Place
from gmid.device.interpolant import Interpolant
from gmid.device.restoring import restore
from gmid.device.small_signal import SmallSignal
from gmid.device.spline import Array, Indices
from gmid.errors import UnknownName

EDGE = 1e-6
"""How far outside the table a point still counts as inside [V]: rounding of a solver."""

DRAIN_SLOPE = 0.1
"""Slope of ln id by vds above the table, for a solver on its way [1/V]."""

_LARGEST_EXPONENT = 300.0

_SWAPPED = np.array([0, 2, 1, 3])
"""Gate, drain, source, bulk after drain and source have changed places."""


@dataclass(frozen=True, eq=False)
class DeviceModel:
    """A device at one or more lengths; `Device.model` makes it.

    Parameters
    ----------
    interpolant : Interpolant
        The splines.
    length : ndarray, shape (k,)
        Channel lengths [m].

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> model = Device(example_sweep()).model(1e-6)
    >>> id, by_vgs, by_vds, by_vsb, inside = model.current_and_derivatives(0.6, 0.9, 0.0)
    >>> bool(inside), float(by_vgs / id) < 38.7
    (True, True)
    """

    interpolant: Interpolant
    length: Array
    _made: dict[tuple[str, ...], Collapsed] = field(default_factory=dict, init=False, repr=False)

    def current_and_derivatives(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> tuple[Array, Array, Array, Array, NDArray[np.bool_]]:
        """Evaluate the current into the drain and its derivatives, inside the table or not.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V]; they broadcast.
        which : array_like of int
            Which of the model's lengths; broadcasts as well.

        Returns
        -------
        id : ndarray, shape (...)
            Drain current [A], negative below vds = 0.
        by_vgs, by_vds, by_vsb : ndarray, shape (...)
            Its exact derivatives [S].
        inside : ndarray of bool, shape (...)
            Where the table covers the point.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> model = Device(example_sweep()).model([0.5e-6, 1e-6])
        >>> model.current_and_derivatives(0.6, 5.0, 0.0, which=[0, 1])[4]
        array([False, False])
        """
        shape, index, bias = _flatten(which, vgs, vds, vsb)
        turned, bias = _turn(bias)
        within = self._clip(bias)
        beyond = [here - there for here, there in zip(bias, within, strict=True)]
        core = self.splines(("id",))
        place = core.locate(index, *within, beyond[2])
        q, *slopes = core.gradient(place)
        gate_slope = np.where(beyond[0] < 0, OFF_SLOPE, ON_SLOPE)
        q = q + gate_slope * beyond[0] + DRAIN_SLOPE * beyond[1]
        slopes[0] = np.where(beyond[0] == 0, slopes[0], gate_slope)
        slopes[1] = np.where(beyond[1] == 0, slopes[1], DRAIN_SLOPE)
        found = self._current(q, slopes, bias[1], self.thermal_voltage(index))
        if self.has_rest:
            found += self._rest(place, beyond[0])
        found = _turn_back(found, turned)
        inside = np.all([np.abs(far) <= EDGE for far in beyond], axis=0)
        id, by_vgs, by_vds, by_vsb = (row.reshape(shape) for row in found)
        return id, by_vgs, by_vds, by_vsb, inside.reshape(shape)

    def small_signal(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> SmallSignal:
        """Read conductances, capacitances and noise from their own tables.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V] inside the table, below vds = 0 with drain and source changed; a
            point outside takes the values at the edge.
        which : array_like of int
            Which of the model's lengths.

        Returns
        -------
        SmallSignal
            Of one unit.

        Raises
        ------
        UnknownName
            If the table lacks a conductance, or capacitances of the matrix.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> model = Device(example_sweep()).model(1e-6)
        >>> model.small_signal(0.6, 0.9, 0.0)  # doctest: +ELLIPSIS
        Traceback (most recent call last):
        ...
        gmid.errors.UnknownName: nmos tt/27 stores only the capacitances cgg: the whole matrix ...
        """
        sweep = self.interpolant.grid.sweep
        assemble_matrix(sweep)
        shape, index, bias = _flatten(which, vgs, vds, vsb)
        turned, bias = _turn(bias)
        within = self._clip(bias)
        names = ["id", *(name for name in sweep.values if name not in ("id", "vth", "vdsat"))]
        if self.interpolant.grid.has_rest_gm:
            names.append("rest_gm")
        spline = self.splines(names)
        table = spline.values(spline.locate(index, *within))
        raw = {name: table[:, column] for column, name in enumerate(names)}
        thermal_voltage = self.thermal_voltage(index)
        found = restore(raw, within[1], None, thermal_voltage, raw.pop("rest_gm", None))
        slopes = np.stack((found["id"], found["gm"], found["gds"], -found["gmb"]))
        _, gm, gds, by_vsb = _turn_back(slopes, turned)
        matrix = assemble_matrix(sweep, found)
        swapped = matrix[:, _SWAPPED][:, :, _SWAPPED]
        matrix = np.where(turned[:, None, None], swapped, matrix)
        zero = np.zeros(index.size)
        noise = [found.get(name, zero) for name in ("noise_thermal", "noise_flicker")]
        return SmallSignal(
            gm.reshape(shape), gds.reshape(shape), -by_vsb.reshape(shape),
            matrix.reshape(*shape, 4, 4), *(part.reshape(shape) for part in noise),
        )  # fmt: skip

    def vdsat(self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0) -> Array:
        """Read the edge of saturation.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V] as for `small_signal`.
        which : array_like of int
            Which of the model's lengths.

        Returns
        -------
        ndarray, shape (...)
            [V].

        Raises
        ------
        UnknownName
            If the table lacks it.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> Device(example_sweep()).model(1e-6).vdsat(0.7, 0.9, 0.0)
        Traceback (most recent call last):
        ...
        gmid.errors.UnknownName: nmos tt/27 has no vdsat. Import it with vdsat.
        """
        sweep = self.interpolant.grid.sweep
        if "vdsat" not in sweep:
            raise UnknownName(f"{sweep.label} has no vdsat.", hint="Import it with vdsat.")
        shape, index, bias = _flatten(which, vgs, vds, vsb)
        within = self._clip(_turn(bias)[1])
        spline = self.splines(("vdsat",))
        return spline.values(spline.locate(index, *within))[:, 0].reshape(shape)

    def covers(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> NDArray[np.bool_]:
        """Tell where the table covers a bias.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V]; below vds = 0 drain and source change places.
        which : array_like of int
            Which of the model's lengths.

        Returns
        -------
        ndarray of bool, shape (...)
            True inside.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> Device(example_sweep()).model(1e-6).covers(0.7, [0.9, 5.0], 0.0)
        array([ True, False])
        """
        shape, _, bias = _flatten(which, vgs, vds, vsb)
        bias = _turn(bias)[1]
        beyond = [here - there for here, there in zip(bias, self._clip(bias), strict=True)]
        inside = np.all([np.abs(far) <= EDGE for far in beyond], axis=0)
        return np.asarray(inside).reshape(shape)

    def part(self, which: int) -> tuple[DeviceModel, int]:
        """Give the model of one condition that a place belongs to, and the place in it: itself.

        Parameters
        ----------
        which : int
            Which of the model's lengths.

        Returns
        -------
        model : DeviceModel
            This one.
        which : int
            As given.
        """
        return self, which

    def splines(self, names: Sequence[str]) -> Collapsed:
        """Give the splines at the lengths of the model.

        Parameters
        ----------
        names : sequence of str
            Quantities of the sweep, and ``rest``; alone, that has no vds.

        Returns
        -------
        Collapsed
            Over the three voltages.
        """
        key = tuple(names)
        if key not in self._made:
            self._made[key] = self.interpolant.collapse(key, self.length)
        return self._made[key]

    def forget(self, names: Sequence[str]) -> None:
        """Give back the memory of splines, which are made again when asked for.

        Parameters
        ----------
        names : sequence of str
            As given to `splines`.
        """
        self._made.pop(tuple(names), None)

    @property
    def has_rest(self) -> bool:
        """Whether any current flows at vds = 0."""
        return self.interpolant.grid.has_rest

    def thermal_voltage(self, which: Indices) -> Array | float:
        """Give kT/q.

        Parameters
        ----------
        which : ndarray of int, shape (n,)
            Which of the model's lengths.

        Returns
        -------
        float
            The same for all [V].
        """
        return self.interpolant.grid.condition.thermal_voltage

    def _clip(self, bias: tuple[Array, Array, Array]) -> tuple[Array, Array, Array]:
        sweep = self.interpolant.grid.sweep
        axes = (sweep.vgs, sweep.vds, sweep.vsb)
        vgs, vds, vsb = (
            np.clip(values, axis[0], axis[-1]) for values, axis in zip(bias, axes, strict=True)
        )
        return vgs, vds, vsb

    def _current(
        self, q: Array, slopes: list[Array], vds: Array, thermal_voltage: Array | float
    ) -> Array:
        """Turn q and its derivatives into the channel's current and derivatives."""
        peak = np.exp(np.minimum(q, _LARGEST_EXPONENT))
        current = peak * saturate(vds, thermal_voltage)
        found = np.stack((current, *(current * slope for slope in slopes)))
        found[2] += peak * np.exp(-vds / thermal_voltage) / thermal_voltage
        return found

    def _rest(self, place: Place, past: Array) -> Array:
        """Give the current at vds = 0, which does not know vds, and its derivatives."""
        spline = self.splines(("id",))
        drains, gates = spline.vds.size, spline.gate.size
        line, gate = place.first // (drains * gates), place.first % gates
        one, none = np.ones((gate.size, 1)), np.zeros((gate.size, 1))
        steep = np.where(place.beyond[:, None] == 0, place.gate_slope, 0.0)
        found = self.splines(("rest",)).gradient(
            Place(
                line * gates + gate, one, place.gate, place.vsb, none, steep, place.vsb_slope,
                place.threshold_slope, np.zeros(gate.size),
            )
        )  # fmt: skip
        rest = np.stack(found)
        rest[1, past != 0] = 0.0
        return rest


def _flatten(
    which: ArrayLike, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike
) -> tuple[tuple[int, ...], Indices, tuple[Array, Array, Array]]:
    voltages = [np.asarray(values, dtype=np.float64) for values in (vgs, vds, vsb)]
    index, *bias = np.broadcast_arrays(np.asarray(which, dtype=np.intp), *voltages)
    flat = tuple(values.ravel() for values in bias)
    return index.shape, index.ravel(), (flat[0], flat[1], flat[2])


def _turn(
    bias: tuple[Array, Array, Array],
) -> tuple[NDArray[np.bool_], tuple[Array, Array, Array]]:
    """Call the lower of drain and source the source."""
    vgs, vds, vsb = bias
    turned = vds < 0
    if not turned.any():
        return turned, bias
    drop = np.where(turned, vds, 0.0)
    return turned, (vgs - drop, np.abs(vds), vsb + drop)


def _turn_back(found: Array, turned: NDArray[np.bool_]) -> Array:
    """Undo `_turn`: rows are the current and its derivatives by vgs, vds, vsb.

    With ``id(vgs, vds, vsb) = -id'(vgs - vds, -vds, vsb + vds)`` the chain rule gives them.
    """
    if not turned.any():
        return found
    current, by_vgs, by_vds, by_vsb = found
    back = np.stack((-current, -by_vgs, by_vgs + by_vds - by_vsb, -by_vsb))
    return np.where(turned, back, found)
