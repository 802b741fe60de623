"""The checked, gridded sweep of one device in one condition.

`Sweep` is what the import makes of text, what a table stores, and what a device is built
from.  Everything is source-referenced and a magnitude: a p-channel device is held as if it
were n-channel.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any, Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.errors import DataFault, UnknownName, advise
from gmid.nomenclature import AXES, find_quantity

Array = NDArray[np.float64]


@runtime_checkable
class ReadTogether(Protocol):
    """Quantities that cost less when several are read at once."""

    def read_all(self, names: Iterable[str]) -> None:
        """Read several.

        Parameters
        ----------
        names : iterable of str
            Those not held are passed over.
        """


@dataclass(frozen=True)
class UnitTransistor:
    """The device that was characterised: the unit in which every other one is counted.

    Parameters
    ----------
    polarity : str
        ``n`` or ``p``.
    width : float
        Total width of one unit [m].
    fingers : int
        Number of gate fingers of one unit.
    netlist : str, optional
        Template of a SPICE device line with ``{name} {d} {g} {s} {b} {width} {length} {count}``.

    Examples
    --------
    >>> UnitTransistor("n", 2e-6, 1).polarity
    'n'
    """

    polarity: str
    width: float
    fingers: int = 1
    netlist: str | None = None

    def __post_init__(self) -> None:
        if self.polarity not in ("n", "p"):
            raise DataFault(f"polarity must be 'n' or 'p', not {self.polarity!r}.")
        if not 1e-9 < self.width < 1e-2:
            raise DataFault(
                f"a unit width of {self.width:g} m is not plausible.",
                hint="Give the total width of the simulated device, such as '2 um'.",
            )
        if self.fingers < 1:
            raise DataFault(f"fingers must be at least 1, not {self.fingers}.")


@dataclass(frozen=True, eq=False)
class Sweep:
    """Grid data of one unit transistor in one condition.

    Parameters
    ----------
    device : str
        Name of the device, such as ``nmos``.
    condition : Condition
        Corner and temperature.
    unit : UnitTransistor
        What was simulated.
    length, vsb, vds, vgs : ndarray, shape (n,)
        Strictly rising axes [m] and [V]; any of them may have one point.
    values : mapping of str to ndarray, shape (n_length, n_vsb, n_vds, n_vgs)
        Quantities by name in SI, of ONE unit.  May be lazy (read from a file when asked).
    derived : mapping of str to str
        Quantities that the text did not hold, and how they were found.
    nominal : bool
        Whether this is the condition a query takes by default.
    provenance : mapping
        Sources, hashes, recipe and conversions, as plain JSON values.

    Examples
    --------
    >>> import numpy as np
    >>> one = np.array([1.0])
    >>> sweep = Sweep("nmos", Condition("tt", 27.0), UnitTransistor("n", 2e-6),
    ...               one * 1e-6, one * 0, one * 0.6, one * 0.5, {"id": np.ones((1, 1, 1, 1))})
    >>> sweep
    Sweep(nmos tt/27: 1 length x 1 vsb x 1 vds x 1 vgs; id)
    """

    device: str
    condition: Condition
    unit: UnitTransistor
    length: Array
    vsb: Array
    vds: Array
    vgs: Array
    values: Mapping[str, Array]
    derived: Mapping[str, str] = field(default_factory=dict)
    nominal: bool = False
    provenance: Mapping[str, Any] = field(default_factory=dict)

    def __post_init__(self) -> None:
        for name in AXES:
            axis = getattr(self, name)
            if axis.ndim != 1 or axis.size == 0 or not np.all(np.diff(axis) > 0):
                raise DataFault(f"axis {name} of {self.label} must rise strictly.")
        for name in self.values:
            find_quantity(name)

    @property
    def shape(self) -> tuple[int, int, int, int]:
        """Number of points along length, vsb, vds and vgs."""
        return (self.length.size, self.vsb.size, self.vds.size, self.vgs.size)

    @property
    def axes(self) -> dict[str, Array]:
        """The four axes by name, in the order of the arrays."""
        return {name: getattr(self, name) for name in AXES}

    @property
    def label(self) -> str:
        """Device and condition in words, for messages."""
        return f"{self.device} {self.condition}"

    def __getitem__(self, name: str) -> Array:
        if name not in self.values:
            raise UnknownName(
                f"{self.label} has no quantity {name!r}.", hint=advise(name, self.values)
            )
        return self.values[name]

    def __contains__(self, name: object) -> bool:
        return name in self.values

    def fetch(self, names: Iterable[str]) -> None:
        """Read quantities together, where they are read from a file when asked for.

        Parameters
        ----------
        names : iterable of str
            Those that are not there are passed over.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> example_sweep().fetch(["id", "gm"])
        """
        if isinstance(self.values, ReadTogether):
            self.values.read_all(names)

    def __repr__(self) -> str:
        sizes = " x ".join(f"{getattr(self, name).size} {name}" for name in AXES)
        return f"Sweep({self.label}: {sizes}; {' '.join(self.values)})"
