"""The answer to a query: bias and everything that follows, computed when it is read."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from gmid.device.spline import Array
from gmid.errors import UnknownName, UsageFault, advise
from gmid.nomenclature import QUANTITIES
from gmid.quantity import format_quantity

Compute = Callable[["OperatingPoint", Sequence[str]], Mapping[str, Array]]

BIAS = ("length", "width", "count", "vgs", "vds", "vsb")
"""Fields that every operating point has from the start."""


class NoSuchField(UnknownName, AttributeError):
    """A quantity that the table does not hold and that does not follow from what it holds."""


@dataclass(frozen=True, eq=False)
class OperatingPoint:
    """Bias points of a device and their quantities, as attributes of the same shape.

    Parameters
    ----------
    label : str
        Device and condition.
    length, vgs, vds, vsb : ndarray, shape (...)
        Channel length [m] and voltages [V].
    count : ndarray, shape (...)
        Unit transistors in parallel [-].
    unit_width : float
        Width of one unit [m].
    known : tuple of str
        Quantities that can be computed.
    compute : callable
        Computes some of them for one unit.

    Notes
    -----
    Attributes besides the bias are ``id gm gds gmb gm_over_id current_density
    normalized_current intrinsic_gain ft vdsat vth``, all capacitances that follow from those
    stored, ``noise_thermal`` and ``noise_flicker``; see `fields`.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> point = Device(example_sweep()).at(length=1e-6, vds=0.6, gm_over_id=15)
    >>> float(point.scaled(id=10e-6).width.round(8))
    7.54e-06
    """

    label: str
    length: Array
    vgs: Array
    vds: Array
    vsb: Array
    count: Array
    unit_width: float
    known: tuple[str, ...]
    compute: Compute
    _found: dict[str, Array] = field(default_factory=dict, repr=False)

    @property
    def shape(self) -> tuple[int, ...]:
        """Shape that every field has."""
        return tuple(np.shape(self.vgs))

    @property
    def width(self) -> Array:
        """Total channel width [m]."""
        return np.multiply(self.unit_width, self.count)

    @property
    def fields(self) -> tuple[str, ...]:
        """Names of all that can be read: the bias first, then the quantities."""
        return (*BIAS, *self.known)

    def __getattr__(self, name: str) -> Array:
        if name.startswith("_") or "known" not in self.__dict__:
            raise AttributeError(name)
        return self.read([name])[name]

    def read(self, names: Sequence[str]) -> dict[str, Array]:
        """Read several fields at once, which costs less than one by one.

        Parameters
        ----------
        names : sequence of str
            Of `fields`.

        Returns
        -------
        dict of str to ndarray, shape (...)
            In SI, for all units together.

        Raises
        ------
        UnknownName
            If the table does not give one.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> point = Device(example_sweep()).at(length=1e-6, vds=0.6, vgs=0.5)
        >>> sorted(point.read(["id", "vgs"]))
        ['id', 'vgs']
        """
        for name in names:
            if name not in self.known and name not in BIAS:
                raise NoSuchField(
                    f"{self.label} has no quantity {name!r}.", hint=advise(name, self.fields)
                )
        missing = [name for name in names if name not in self._found and name not in BIAS]
        if missing:
            self._found.update(self.compute(self, missing))
        return {name: self._scaled(name) for name in names}

    def _scaled(self, name: str) -> Array:
        if name in BIAS:
            return np.asarray(getattr(self, name))[()]
        value = self._found[name]
        return np.multiply(value, self.count) if QUANTITIES[name].scaling else value

    def scaled(
        self,
        *,
        id: ArrayLike | None = None,
        gm: ArrayLike | None = None,
        width: ArrayLike | None = None,
        count: ArrayLike | None = None,
    ) -> OperatingPoint:
        """Take as many units as give a current, a gm, a width, or a number of them.

        Parameters
        ----------
        id, gm, width, count : array_like, keyword-only
            Exactly one: current [A], transconductance [S], width [m] or units [-].  All but
            `count` give a number of units that need not be whole.

        Returns
        -------
        OperatingPoint
            At the same bias; currents, conductances, capacitances and noise are scaled.

        Raises
        ------
        UsageFault
            If none or several are given, or one is not positive.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> point = Device(example_sweep()).at(length=1e-6, vds=0.6, vgs=0.5)
        >>> float(point.scaled(count=4).id / point.id)
        4.0
        """
        asked = {"id": id, "gm": gm, "width": width, "count": count}
        given = {name: value for name, value in asked.items() if value is not None}
        if len(given) != 1:
            what = " and ".join(given) or "nothing"
            raise UsageFault(
                f"scaling needs one of id, gm, width and count, not {what}.",
                hint="Give exactly one.",
            )
        ((name, raw),) = given.items()
        value = np.asarray(raw, dtype=np.float64)
        if not np.all(value > 0):
            raise UsageFault(f"{name} must be positive to scale by it, not {np.min(value):g}.")
        unit = replace(self, count=np.ones(self.shape)[()])
        if name == "count":
            return self._with_count(value)
        base = self.unit_width if name == "width" else unit.read([name])[name]
        if not np.all(np.asarray(base) > 0):
            raise UsageFault(
                f"a unit has no {name} at some of these bias points, so none can be scaled to.",
                hint="Choose a bias at which it conducts.",
            )
        return self._with_count(value / base)

    def _with_count(self, count: Array) -> OperatingPoint:
        """Broadcast everything to the shape that the count brings in."""
        shape = np.broadcast_shapes(self.shape, np.shape(count))
        if shape == self.shape:
            return replace(self, count=np.broadcast_to(count, shape)[()])
        return replace(
            self,
            length=np.broadcast_to(self.length, shape),
            vgs=np.broadcast_to(self.vgs, shape),
            vds=np.broadcast_to(self.vds, shape),
            vsb=np.broadcast_to(self.vsb, shape),
            count=np.broadcast_to(count, shape),
            _found={name: np.broadcast_to(value, shape) for name, value in self._found.items()},
        )

    def to_dict(self) -> dict[str, Any]:
        """Read every field.

        Returns
        -------
        dict of str to ndarray, shape (...)
            In the order of `fields`.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> list(Device(example_sweep()).at(length=1e-6, vds=0.6, vgs=0.5).to_dict())[:7]
        ['length', 'width', 'count', 'vgs', 'vds', 'vsb', 'id']
        """
        return self.read(self.fields)

    def __repr__(self) -> str:
        if self.shape:
            return f"OperatingPoint({self.label}: {self.shape}; {' '.join(self.fields)})"
        shown = ("length", "count", "vgs", "vds", "vsb", "id")
        more = ("gm_over_id", "vdsat", "intrinsic_gain", "ft")
        values = self.read([name for name in (*shown, *more) if name in self.fields])
        texts = [
            f"{name} {format_quantity(float(value), QUANTITIES[name].unit)}"
            for name, value in values.items()
        ]
        return f"OperatingPoint({self.label}: {', '.join(texts)})"
