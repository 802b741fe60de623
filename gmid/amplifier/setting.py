"""What surrounds an amplifier and its search: supply, choices, mismatch of devices."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Level:
    """A voltage that follows the supply, or one that does not.

    Parameters
    ----------
    ratio : float
        Share of the supply [-].
    offset : float
        What is added [V].

    Examples
    --------
    >>> float(Level(0.5).at(1.8)), float(Level(0.0, 0.7).at(1.8))
    (0.9, 0.7)
    """

    ratio: float = 0.5
    offset: float = 0.0

    def at(self, voltage: ArrayLike) -> Array:
        """Give the voltage at a supply.

        Parameters
        ----------
        voltage : array_like, shape (...)
            Supply [V].

        Returns
        -------
        ndarray, shape (...)
            [V].
        """
        return np.asarray(self.ratio * np.asarray(voltage, dtype=np.float64) + self.offset)


@dataclass(frozen=True)
class Supply:
    """What an amplifier is fed with.

    Parameters
    ----------
    voltage : float
        Nominal supply [V].
    reference_current : float
        Into the `iref` port, or out of it for a p-type reference [A].
    tolerance : float
        Of the supply, up and down [-].
    common_mode : Level
        Output common mode: the voltage of port `vcm`.
    input_common_mode : Level, optional
        Input common mode; the same by default.
    reference_tolerance : float
        Of the reference current, up and down [-].

    Examples
    --------
    >>> Supply(1.8, 2e-6, tolerance=0.1).voltages.round(3)
    array([1.62, 1.8 , 1.98])
    """

    voltage: float
    reference_current: float
    tolerance: float = 0.0
    common_mode: Level = Level()
    input_common_mode: Level | None = None
    reference_tolerance: float = 0.0

    @property
    def voltages(self) -> Array:
        """Low, nominal and high supply, shape (3,) [V]."""
        return self.voltage * np.array([1 - self.tolerance, 1.0, 1 + self.tolerance])

    @property
    def input_level(self) -> Level:
        """Input common mode."""
        return self.common_mode if self.input_common_mode is None else self.input_common_mode


@dataclass(frozen=True)
class Choices:
    """What a search may choose, and the margins it has to keep.

    Parameters
    ----------
    input_pair, output, common_mode_sense : str
        One form, or ``auto``.
    largest_sense_resistor : float
        [ohm].
    loop_phase_margin, common_mode_phase_margin : float
        [deg].
    saturation_margin : float
        By which vds exceeds vdsat in every condition [V].
    lengths : tuple of float
        Lengths to choose from [m]; empty for those of the table.
    smallest_length : mapping of str to float
        By place [m].
    largest_count, largest_stack : int
        Units of one instance [-].
    even_counts : bool
        Whether matched places have even counts.
    minimise : {"current", "area"}
        What the search makes small.

    Examples
    --------
    >>> Choices(input_pair="n").output
    'auto'
    """

    input_pair: str = "auto"
    output: str = "auto"
    common_mode_sense: str = "auto"
    largest_sense_resistor: float = 1e6
    loop_phase_margin: float = 60.0
    common_mode_phase_margin: float = 60.0
    saturation_margin: float = 0.05
    lengths: tuple[float, ...] = ()
    smallest_length: Mapping[str, float] = field(default_factory=dict)
    largest_count: int = 64
    largest_stack: int = 4
    even_counts: bool = True
    minimise: str = "current"


@dataclass(frozen=True)
class Matching:
    """Mismatch of a device: sigma of the difference of two, by Pelgrom's law.

    Parameters
    ----------
    avt : float
        Of the threshold, times the root of the gate area [V m].
    abeta : float
        Of the current factor, relative, times the root of the gate area [m].

    References
    ----------
    M. Pelgrom, A. Duinmaijer, A. Welbers, "Matching properties of MOS transistors", IEEE J.
    Solid-State Circuits 24, 1989.

    Examples
    --------
    >>> Matching(avt=3.5e-9, abeta=1e-8)
    Matching(avt=3.5e-09, abeta=1e-08)
    """

    avt: float
    abeta: float = 0.0
