"""What an import found on its way, also where it ends in an error: grids and their gaps."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.nomenclature import AXES
from gmid.sweep.model import Array, Sweep


@dataclass(frozen=True, eq=False)
class Coverage:
    """Which bias points of a grid a text holds.

    Parameters
    ----------
    device : str
        Name of the device.
    condition : Condition
        Corner and temperature.
    axes : mapping of str to ndarray, shape (n,)
        Every value found on ``length vsb vds vgs``, rising [m], [V].
    missing : ndarray of bool, shape (n_length, n_vsb, n_vds, n_vgs)
        True where there is no row, or one with a value that is no finite number.

    Examples
    --------
    >>> axes = {"length": np.ones(1), "vsb": np.ones(1), "vds": np.ones(1), "vgs": np.arange(2.0)}
    >>> Coverage("n", Condition("tt", 27.0), axes, np.array([[[[False, True]]]])).count
    1
    """

    device: str
    condition: Condition
    axes: Mapping[str, Array]
    missing: NDArray[np.bool_]

    @property
    def count(self) -> int:
        """Number of missing points."""
        return int(np.count_nonzero(self.missing))

    @property
    def label(self) -> str:
        """Device and condition in words."""
        return f"{self.device} {self.condition}"

    def __repr__(self) -> str:
        sizes = " x ".join(f"{self.axes[name].size} {name}" for name in AXES)
        return f"Coverage({self.label}: {sizes}; {self.count} missing)"


@dataclass(eq=False)
class Trail:
    """Filled by an import as it goes, and kept where the import fails.

    Parameters
    ----------
    coverages : list of Coverage
        One for each device and condition that came as far as its grid.
    sweeps : list of Sweep
        Those that came as far as the checks of their physics, passed or not.

    Examples
    --------
    >>> Trail().sweeps
    []
    """

    coverages: list[Coverage] = field(default_factory=list)
    sweeps: list[Sweep] = field(default_factory=list)
