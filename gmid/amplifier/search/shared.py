"""Devices of a whole bench whose splines are settled once for all lengths of a search.

A circuit asks a device for a model of just the lengths it uses; every new set of lengths would
settle the splines anew.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.condition import Condition
from gmid.device.circuit_device import CircuitModel
from gmid.device.device import Device
from gmid.device.joint import JointDevice
from gmid.device.model import DeviceModel
from gmid.device.small_signal import SmallSignal

Array = NDArray[np.float64]
Indices = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class PartModel:
    """Some lengths of a model, in all of its conditions.

    Parameters
    ----------
    whole : CircuitModel
        At all lengths.
    size : int
        How many those are.
    position : ndarray of int, shape (k,)
        Which of them belong to this model.
    """

    whole: CircuitModel
    size: int
    position: Indices

    def _place(self, which: ArrayLike) -> Indices:
        condition, length = np.divmod(np.asarray(which, dtype=np.intp), self.position.size)
        return np.asarray(condition * self.size + self.position[length])

    def current_and_derivatives(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> tuple[Array, Array, Array, Array, NDArray[np.bool_]]:
        """Evaluate as `DeviceModel` does.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Place: condition times lengths, plus length.

        Returns
        -------
        tuple of ndarray
            Current, its derivatives, and what lies inside the table.
        """
        return self.whole.current_and_derivatives(vgs, vds, vsb, self._place(which))

    def small_signal(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> SmallSignal:
        """Read as `DeviceModel` does.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Place: condition times lengths, plus length.

        Returns
        -------
        SmallSignal
            Of one unit.
        """
        return self.whole.small_signal(vgs, vds, vsb, self._place(which))

    def vdsat(self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0) -> Array:
        """Read the edge of saturation.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Place: condition times lengths, plus length.

        Returns
        -------
        ndarray, shape (...)
            [V].
        """
        return self.whole.vdsat(vgs, vds, vsb, self._place(which))

    def covers(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> NDArray[np.bool_]:
        """Tell where the table covers a bias.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Place: condition times lengths, plus length.

        Returns
        -------
        ndarray of bool, shape (...)
            True inside.
        """
        return self.whole.covers(vgs, vds, vsb, self._place(which))

    def part(self, which: int) -> tuple[DeviceModel, int]:
        """Give the model of one condition that a place belongs to, and the place in it.

        Parameters
        ----------
        which : int
            Place: condition times lengths, plus length.

        Returns
        -------
        model : DeviceModel
            Of the condition, at all lengths.
        which : int
            Which of them.
        """
        return self.whole.part(int(self._place(which)))


class SharedDevice(JointDevice):
    """A device in all conditions of a bench, with one model for all lengths of a search.

    Parameters
    ----------
    parts : sequence of Device
        One a condition.
    lengths : sequence of float
        [m].
    place : array_like of int, shape (...)
        In which condition each item of a batch is.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> shared = SharedDevice([example_devices()["nmos"]], [0.5e-6, 1e-6, 2e-6])
    >>> shared.model([1e-6, 2e-6]).position
    array([1, 2])
    """

    def __init__(
        self, parts: Sequence[Device], lengths: Sequence[float], place: ArrayLike = 0
    ) -> None:
        super().__init__(parts, place)
        low = max(float(part.sweep.length[0]) for part in parts)
        high = min(float(part.sweep.length[-1]) for part in parts)
        inside = [one for one in sorted(lengths) if low * 0.9999 <= one <= high * 1.0001]
        self._all = np.array(inside, dtype=np.float64)

    @cached_property
    def _whole(self) -> CircuitModel:
        return super().model(self._all)

    def settle(self) -> None:
        """Settle every spline that a search reads, in every condition and at every length."""
        each = np.arange(len(self.parts) * self._all.size)
        if each.size:
            model, none = self.model(self._all), np.zeros(each.size)
            model.current_and_derivatives(none, none, none, each)
            model.small_signal(none, none, none, each)
            model.vdsat(none, none, none, each)

    def at_place(self, place: ArrayLike) -> SharedDevice:
        """Give the same device for another batch.

        Parameters
        ----------
        place : array_like of int, shape (...)
            In which condition each item is.

        Returns
        -------
        SharedDevice
            With the same model.
        """
        other = SharedDevice(self.parts, self._all.tolist(), place)
        other.__dict__["_whole"] = self._whole
        return other

    def model(self, length: ArrayLike) -> CircuitModel:
        """Settle lengths for a circuit's solver.

        Parameters
        ----------
        length : array_like, shape () or (k,)
            Channel lengths [m]; others than those of the search are settled on their own.

        Returns
        -------
        CircuitModel
            Part of one for all lengths.
        """
        wanted = np.atleast_1d(np.asarray(length, dtype=np.float64))
        position = np.searchsorted(self._all, wanted).clip(0, max(self._all.size - 1, 0))
        if not self._all.size or not np.array_equal(self._all[position], wanted):
            return super().model(wanted)
        return PartModel(self._whole, self._all.size, position)


def share_devices(
    bench: Sequence[tuple[Condition, Mapping[str, Device]]], lengths: Sequence[float]
) -> dict[str, SharedDevice]:
    """Prepare the devices of a bench for a search.

    Parameters
    ----------
    bench : sequence of (Condition, mapping of str to Device)
        Every condition.
    lengths : sequence of float
        All that the search may use [m].

    Returns
    -------
    dict of str to SharedDevice
        Each device in all conditions.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> devices = example_devices()
    >>> share_devices([(devices["nmos"].condition, devices)], [1e-6])["pmos"].name
    'pmos'
    """
    names = bench[0][1]
    return {name: SharedDevice([one[name] for _, one in bench], lengths) for name in names}
