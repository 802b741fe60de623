"""What a circuit asks of a device, be it in one condition or in several."""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.condition import Condition
from gmid.device.model import DeviceModel
from gmid.device.small_signal import SmallSignal
from gmid.device.spline import Array, Indices
from gmid.sweep.model import UnitTransistor


class CircuitModel(Protocol):
    """What a circuit's solver asks of a device at settled lengths; `DeviceModel` has it all."""

    def current_and_derivatives(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> tuple[Array, Array, Array, Array, NDArray[np.bool_]]:
        """Evaluate the current into the drain and its derivatives.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Length, and condition, among those of the model.

        Returns
        -------
        tuple of ndarray
            Current [A], its derivatives by vgs, vds and vsb [S], and what lies inside the table.
        """

    def small_signal(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> SmallSignal:
        """Read conductances, capacitances and noise.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Length, and condition, among those of the model.

        Returns
        -------
        SmallSignal
            Of one unit.
        """

    def vdsat(self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0) -> Array:
        """Read the edge of saturation.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Length, and condition, among those of the model.

        Returns
        -------
        ndarray, shape (...)
            [V].
        """

    def covers(
        self, vgs: ArrayLike, vds: ArrayLike, vsb: ArrayLike, which: ArrayLike = 0
    ) -> NDArray[np.bool_]:
        """Tell where the table covers a bias.

        Parameters
        ----------
        vgs, vds, vsb : array_like, shape (...)
            Voltages [V].
        which : array_like of int
            Length, and condition, among those of the model.

        Returns
        -------
        ndarray of bool, shape (...)
            True inside.
        """

    def part(self, which: int) -> tuple[DeviceModel, int]:
        """Give the model of one condition that a place belongs to, and the place in it.

        Parameters
        ----------
        which : int
            Length, and condition, among those of the model.

        Returns
        -------
        model : DeviceModel
            Of the condition.
        which : int
            Which of its lengths.
        """


class CircuitDevice(Protocol):
    """What a circuit asks of a device: `Device` and `JointDevice` have it."""

    @property
    def name(self) -> str:
        """Name of the device."""

    @property
    def unit(self) -> UnitTransistor:
        """The transistor that was characterised."""

    @property
    def conditions(self) -> tuple[Condition, ...]:
        """The conditions in which it is known."""

    @property
    def place(self) -> Indices:
        """Which of them each item of a batch is in; broadcasts with the batch."""

    @property
    def fields(self) -> tuple[str, ...]:
        """Quantities that it knows in every condition."""

    def at_place(self, place: ArrayLike) -> CircuitDevice:
        """Give the same device for another batch.

        Parameters
        ----------
        place : array_like of int, shape (...)
            Which of the conditions each item is in.

        Returns
        -------
        CircuitDevice
            With the same data.
        """

    def model(self, length: ArrayLike) -> CircuitModel:
        """Settle the length; places are those of each condition's lengths, one after another.

        Parameters
        ----------
        length : array_like, shape () or (k,)
            Channel lengths [m] in use.

        Returns
        -------
        CircuitModel
            At those lengths.
        """
