"""A device in several conditions at once, each item of a batch in its own.

A circuit is then solved in all conditions together: one Newton iteration for all of them costs
little more than one for a single condition where batches are small.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.condition import Condition
from gmid.device.circuit_device import CircuitModel
from gmid.device.device import Device
from gmid.device.merged import MergedModel
from gmid.device.model import DeviceModel
from gmid.device.small_signal import SmallSignal
from gmid.device.spline import Array, Indices
from gmid.errors import UsageFault
from gmid.sweep.model import UnitTransistor


class JointDevice:
    """One device in several conditions, side by side along a batch.

    Parameters
    ----------
    parts : sequence of Device
        The same device in different conditions.
    place : array_like of int, shape (...)
        Which of them each item of a batch is in; broadcasts with the batch. A last axis of
        supplies asks for shape (conditions, 1).

    Raises
    ------
    UsageFault
        If the parts are not one device, or a place has no part.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> device = Device(example_sweep())
    >>> JointDevice([device, device], [[0], [1]])
    JointDevice(nmos in tt/27, tt/27)
    """

    def __init__(self, parts: Sequence[Device], place: ArrayLike) -> None:
        self.parts = tuple(parts)
        self.place: Indices = np.asarray(place, dtype=np.intp)
        if len({(part.name, part.unit) for part in parts}) != 1:
            raise UsageFault("a joint device has the same device in every condition.")
        if self.place.size and not 0 <= self.place.min() <= self.place.max() < len(parts):
            raise UsageFault(f"there are {len(parts)} conditions; places go from 0 on.")

    @property
    def name(self) -> str:
        """Name of the device."""
        return self.parts[0].name

    @property
    def unit(self) -> UnitTransistor:
        """The transistor that was characterised."""
        return self.parts[0].unit

    @property
    def conditions(self) -> tuple[Condition, ...]:
        """The conditions in which it is known."""
        return tuple(part.condition for part in self.parts)

    @cached_property
    def fields(self) -> tuple[str, ...]:
        """Quantities that it knows in every condition."""
        return tuple(
            name for name in self.parts[0].fields if all(name in one.fields for one in self.parts)
        )

    def at_place(self, place: ArrayLike) -> JointDevice:
        """Give the same device for another batch.

        Parameters
        ----------
        place : array_like of int, shape (...)
            Which of the conditions each item is in.

        Returns
        -------
        JointDevice
            With the same parts.
        """
        return JointDevice(self.parts, place)

    def model(self, length: ArrayLike) -> CircuitModel:
        """Settle the length for a circuit's solver.

        Parameters
        ----------
        length : array_like, shape () or (k,)
            Channel lengths [m] in use.

        Returns
        -------
        CircuitModel
            Place ``c * k + l`` is length l in condition c.

        Raises
        ------
        OutOfReach
            If a length lies outside the table.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> device = Device(example_sweep())
        >>> model = JointDevice([device, device], [0, 1]).model([0.5e-6, 1e-6])
        >>> model.current_and_derivatives(0.6, 0.9, 0.0, [1, 3])[0].shape
        (2,)
        """
        return JointModel(tuple(part.model(length) for part in self.parts))

    def __repr__(self) -> str:
        return f"JointDevice({self.name} in {', '.join(map(str, self.conditions))})"


@dataclass(frozen=True, eq=False)
class JointModel:
    """Models of one device in several conditions, at the same lengths.

    Parameters
    ----------
    parts : tuple of DeviceModel
        One a condition.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> model = Device(example_sweep()).model([0.5e-6, 1e-6])
    >>> both = JointModel((model, model))
    >>> alone = model.current_and_derivatives(0.6, 0.9, 0.0, 1)[0]
    >>> bool(abs(both.current_and_derivatives(0.6, 0.9, 0.0, 3)[0] / alone - 1) < 1e-12)
    True
    """

    parts: tuple[DeviceModel, ...]

    @property
    def size(self) -> int:
        """Number of lengths."""
        return int(self.parts[0].length.size)

    @cached_property
    def _merged(self) -> MergedModel | None:
        return MergedModel.of(self.parts)

    @cached_property
    def _uniform(self) -> MergedModel | None:
        """The merged model where it can read small signals too."""
        return self._merged if self._merged is not None and self._merged.is_uniform else None

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
        if self._merged is not None:
            return self._merged.current_and_derivatives(vgs, vds, vsb, which)
        found = self._each(
            lambda model, *bias: model.current_and_derivatives(*bias), vgs, vds, vsb, which
        )
        return found[0], found[1], found[2], found[3], found[4].astype(bool)

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
        if self._uniform is not None:
            return self._uniform.small_signal(vgs, vds, vsb, which)
        names = [field.name for field in fields(SmallSignal)]

        def read(model: DeviceModel, *bias: Array) -> tuple[Array, ...]:
            small = model.small_signal(*bias)
            return tuple(getattr(small, name) for name in names)

        return SmallSignal(*self._each(read, vgs, vds, vsb, which))

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
        if self._uniform is not None:
            return self._uniform.vdsat(vgs, vds, vsb, which)
        return self._each(lambda model, *bias: (model.vdsat(*bias),), vgs, vds, vsb, which)[0]

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
        if self._merged is not None:
            return self._merged.covers(vgs, vds, vsb, which)
        found = self._each(lambda model, *bias: (model.covers(*bias),), vgs, vds, vsb, which)
        return np.asarray(found[0], dtype=bool)

    def part(self, which: int) -> tuple[DeviceModel, int]:
        """Give the model of one condition that a place belongs to, and the place in it.

        Parameters
        ----------
        which : int
            Place: condition times lengths, plus length.

        Returns
        -------
        model : DeviceModel
            Of the condition.
        which : int
            Which of its lengths.
        """
        return self.parts[which // self.size], which % self.size

    def _each(
        self, read: Callable[..., tuple[Array, ...]], vgs: ArrayLike, vds: ArrayLike,
        vsb: ArrayLike, which: ArrayLike,
    ) -> list[Array]:  # fmt: skip
        """Read from one condition after the other and put the answers in their places."""
        index, *bias = np.broadcast_arrays(np.asarray(which, dtype=np.intp), vgs, vds, vsb)
        shape, index = index.shape, index.ravel()
        condition, length = np.divmod(index, self.size)
        flat = [np.asarray(part, dtype=np.float64).ravel() for part in bias]
        found: list[Array] = []
        for k in np.unique(condition):
            here = np.flatnonzero(condition == k)
            answers = read(self.parts[k], *(part[here] for part in flat), length[here])
            if not found:
                found = [np.empty((index.size, *answer.shape[1:])) for answer in answers]
            for whole, answer in zip(found, answers, strict=True):
                whole[here] = answer
        return [whole.reshape(*shape, *whole.shape[1:]) for whole in found]
