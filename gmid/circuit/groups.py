"""The units of a circuit by device: lengths and conditions settled."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Transistor
from gmid.condition import Condition
from gmid.device.circuit_device import CircuitDevice, CircuitModel
from gmid.errors import UnknownName, UsageFault, advise

Array = NDArray[np.float64]
Indices = NDArray[np.intp]
Number = TypeVar("Number", bound=np.generic)


@dataclass(frozen=True, eq=False)
class Group:
    """The units of one device.

    Parameters
    ----------
    device : CircuitDevice
        The device.
    model : CircuitModel
        At all lengths in use.
    units : ndarray of int, shape (k,)
        Positions among the units of the circuit.
    which : ndarray of int, shape (k, n)
        Length, and condition, of each among those of the model.
    """

    device: CircuitDevice
    model: CircuitModel
    units: Indices
    which: Indices


def take(values: NDArray[Number], items: Indices | None) -> NDArray[Number]:
    """Take some items of the batch.

    Parameters
    ----------
    values : ndarray, shape (..., n) or (..., 1)
        Values.
    items : ndarray of int, or None
        Items wanted; None for all.

    Returns
    -------
    ndarray, shape (..., items) or (..., 1)
        A value that is the same for all items stays as it is.

    Examples
    --------
    >>> take(np.array([[1.0, 2.0]]), np.array([1])).tolist(), take(np.ones((2, 1)), None).shape
    ([[2.0]], (2, 1))
    """
    return values if items is None or values.shape[-1] == 1 else values[..., items]


def settle_conditions(
    circuit: Circuit, devices: Mapping[str, CircuitDevice]
) -> tuple[tuple[Condition, ...], Indices]:
    """Make sure that all devices are there, and in the same conditions.

    Parameters
    ----------
    circuit : Circuit
        The circuit.
    devices : mapping of str to Device or JointDevice
        At least those that it uses.

    Returns
    -------
    conditions : tuple of Condition
        Those of the devices; empty for a circuit without transistors.
    place : ndarray of int, shape (...)
        Which of them each item of the batch is in.

    Raises
    ------
    UnknownName
        If a device is missing.
    UsageFault
        If conditions differ.

    Examples
    --------
    >>> settle_conditions(Circuit(), {})
    ((), array(0))
    """
    for name in circuit.devices:
        if name not in devices:
            users = [t.name for t in circuit.transistors if t.device == name]
            raise UnknownName(
                f"{', '.join(users)}: there is no device {name}.", hint=advise(name, devices)
            )
    used = {name: devices[name] for name in circuit.devices}
    if len({device.conditions for device in used.values()}) > 1:
        listed = ", ".join(
            f"{name} {' '.join(map(str, one.conditions))}" for name, one in used.items()
        )
        raise UsageFault(f"the devices are of different conditions: {listed}.")
    for device in used.values():
        return device.conditions, device.place
    return (), np.zeros((), dtype=np.intp)


def group_units(
    device: CircuitDevice, units: Sequence[Transistor], members: Indices, lengths: Array,
    place: Indices,
) -> Group:  # fmt: skip
    """Settle the lengths of a device's units.

    Parameters
    ----------
    device : Device or JointDevice
        The device.
    units : sequence of Transistor
        Those that are of it.
    members : ndarray of int, shape (k,)
        Their positions among the units of the circuit.
    lengths : ndarray, shape (k, n) or (k, 1)
        [m].
    place : ndarray of int, shape (n,) or (1,)
        Condition of each item of the batch.

    Returns
    -------
    Group
        With its model.

    Raises
    ------
    UsageFault
        If the device has the other polarity.
    OutOfReach
        If a length lies outside its table.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> none = np.zeros(0, dtype=np.intp)
    >>> length, here = np.full((0, 1), 1e-6), np.zeros(1, dtype=np.intp)
    >>> group_units(Device(example_sweep()), [], none, length, here).which.shape
    (0, 1)
    """
    for unit in units:
        if unit.polarity != device.unit.polarity:
            raise UsageFault(
                f"{unit.name} is {unit.polarity}-channel, {device.name} is "
                f"{device.unit.polarity}-channel."
            )
    used, which = np.unique(lengths, return_inverse=True)
    where = place * used.size + which.reshape(lengths.shape)
    return Group(device, device.model(used), members, np.asarray(where, dtype=np.intp))
