"""Devices whose splines are settled once for all lengths of a search.

A circuit asks a device for a model of just the lengths it uses; every new set of lengths would
settle the splines anew.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.condition import Condition
from gmid.device.device import Device
from gmid.device.model import DeviceModel, SmallSignal

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PartModel(DeviceModel):
    """Some lengths of a model.

    Parameters
    ----------
    whole : DeviceModel
        At all lengths.
    position : ndarray of int, shape (k,)
        Which of them are `length`.
    """

    whole: DeviceModel
    position: NDArray[np.intp]

    def current_and_derivatives(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> tuple[Array, Array, Array, Array, NDArray[np.bool_]]:
        """Evaluate as `DeviceModel` does.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Which of `length`.

        Returns
        -------
        tuple of ndarray
            Current, its derivatives, and what lies inside the table.
        """
        return self.whole.current_and_derivatives(
            vgs, vds, vsb, self.position[np.asarray(which, dtype=np.intp)]
        )

    def small_signal(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> SmallSignal:
        """Read as `DeviceModel` does.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Which of `length`.

        Returns
        -------
        SmallSignal
            Of one unit.
        """
        return self.whole.small_signal(
            vgs, vds, vsb, self.position[np.asarray(which, dtype=np.intp)]
        )


class SharedDevice(Device):
    """A device with one model for all lengths of a search.

    Parameters
    ----------
    device : Device
        The device.
    lengths : sequence of float
        [m].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> shared = SharedDevice(example_devices()["nmos"], [0.5e-6, 1e-6, 2e-6])
    >>> shared.model([1e-6, 2e-6]).position
    array([1, 2])
    """

    def __init__(self, device: Device, lengths: Sequence[float]) -> None:
        self._interpolant = device._interpolant
        self._all = np.array(sorted(lengths), dtype=np.float64)

    def model(self, length: ArrayLike) -> DeviceModel:
        """Settle lengths for a circuit's solver.

        Parameters
        ----------
        length : array_like, shape () or (k,)
            Channel lengths [m]; others than those of the search are settled on their own.

        Returns
        -------
        DeviceModel
            Part of one for all lengths.
        """
        wanted = np.atleast_1d(np.asarray(length, dtype=np.float64))
        position = np.searchsorted(self._all, wanted).clip(0, self._all.size - 1)
        if not np.array_equal(self._all[position], wanted):
            return super().model(wanted)
        whole = super().model(self._all)
        return PartModel(whole.interpolant, whole.length[position], whole, position)


def share_devices(
    bench: Sequence[tuple[Condition, Mapping[str, Device]]], lengths: Sequence[float]
) -> tuple[tuple[Condition, dict[str, Device]], ...]:
    """Prepare the devices of a bench for a search.

    Parameters
    ----------
    bench : sequence of (Condition, mapping of str to Device)
        Every condition.
    lengths : sequence of float
        All that the search may use [m].

    Returns
    -------
    tuple of (Condition, dict of str to Device)
        The same devices, prepared.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> devices = example_devices()
    >>> ((_, shared),) = share_devices([(devices["nmos"].condition, devices)], [1e-6])
    >>> shared["pmos"].name
    'pmos'
    """
    return tuple(
        (condition, {
            name: SharedDevice(device, [
                one for one in lengths
                if device.sweep.length[0] * 0.9999 <= one <= device.sweep.length[-1] * 1.0001
            ])
            for name, device in devices.items()
        })
        for condition, devices in bench
    )  # fmt: skip
