"""The answer to a query: bias and everything that follows, computed when it is read."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from gmid.device.spline import Array
from gmid.errors import UnknownName, UsageFault, advise
from gmid.nomenclature import QUANTITIES

if TYPE_CHECKING:
    from gmid.sweep.listing import DataFrame

Compute = Callable[["OperatingPoint", Sequence[str]], Mapping[str, Array]]

BIAS = ("length", "width", "count", "vgs", "vds", "vsb")
"""Fields that every operating point has from the start."""

_BIAS = frozenset(BIAS)


@lru_cache(maxsize=64)
def _gather(names: tuple[str, ...]) -> frozenset[str]:
    return frozenset(names)


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
    >>> float(point.scaled(id=10e-6).width.round(9))
    7.545e-06
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

    @classmethod
    def take(cls, fields: dict[str, Any]) -> OperatingPoint:
        """Make an operating point of all its fields, faster than by its constructor.

        Parameters
        ----------
        fields : dict
            Every parameter, and ``_found``, a dict; it becomes the point's own.

        Returns
        -------
        OperatingPoint
            Just as the constructor makes it.

        Examples
        --------
        >>> names = ("label", "length", "vgs", "vds", "vsb", "count", "unit_width", "known")
        >>> fields = dict.fromkeys(names, 1.0) | {"compute": None, "_found": {"id": 1e-6}}
        >>> float(OperatingPoint.take(fields | {"known": ("id",)}).id)
        1e-06
        """
        point = cls.__new__(cls)
        object.__setattr__(point, "__dict__", fields)
        return point

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
        held = self.__dict__
        single = held.get("_single")
        if single is not None and single.fill(held, name):
            value: Array = held[name]
            return value
        if name.startswith("_") or "known" not in held:
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
        found = self._found
        single = self.__dict__.get("_single")
        if single is not None and not found:
            answer: dict[str, Array] | None = single.read(self.__dict__, names)
            if answer is not None:
                return answer
        missing = names
        if found or not _BIAS.isdisjoint(names):
            missing = [name for name in names if name not in found and name not in _BIAS]
        if missing:
            self._check(missing)
            for name, value in self.compute(self, missing).items():
                found.setdefault(name, value)
        if isinstance(self.count, np.float64) and self.count == 1.0:
            if _BIAS.isdisjoint(names):
                return {name: found[name] for name in names}
            return {name: found[name] if name in found else self._scaled(name) for name in names}
        return {name: self._scaled(name) for name in names}

    def _check(self, names: Sequence[str]) -> None:
        """Refuse quantities that cannot be computed."""
        if _gather(self.known).issuperset(names):
            return
        name = next(name for name in names if name not in self.known)
        raise NoSuchField(f"{self.label} has no quantity {name!r}.", hint=advise(name, self.fields))

    def _scaled(self, name: str) -> Array:
        if name in _BIAS:
            held: Array = getattr(self, name)
            return held if isinstance(held, np.float64) else np.asarray(held)[()]
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

    def to_frame(self) -> DataFrame:
        """Read every field into a data frame.

        Returns
        -------
        DataFrame
            One row a point, last axis fastest; SI, with ``attrs["units"]`` by column and
            ``attrs["label"]`` the device and condition.

        Examples
        --------
        >>> from gmid.device.device import Device
        >>> from gmid.device.example import example_sweep
        >>> point = Device(example_sweep()).at(length=[1e-6, 2e-6], vds=0.6, gm_over_id=15)
        >>> point.to_frame()[["length", "vgs"]].round(9).to_dict("list")["length"]
        [1e-06, 2e-06]
        """
        from gmid.device.telling import frame_point

        return frame_point(self)

    def __repr__(self) -> str:
        from gmid.device.telling import spell_point

        return spell_point(self)

    def _repr_html_(self) -> str:
        from gmid.device.telling import list_point

        return list_point(self)
