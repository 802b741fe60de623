"""What a run of the reference simulator gives: one frozen record for each kind of analysis."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import UnknownName, advise


@dataclass(frozen=True)
class Simulation:
    """What one run of the simulator gave: the base of the five kinds of result.

    Attributes
    ----------
    signals : mapping of str to ndarray, shape (points,)
        Node voltages [V] as ``v(node)`` and branch currents [A] as ``i(source)``, lower case.
    log : str
        What the simulator printed, warnings above all.
    """

    signals: Mapping[str, NDArray[Any]]
    log: str

    def voltage(self, node: str, reference: str = "0") -> NDArray[Any]:
        """Give the voltage of a node over another.

        Parameters
        ----------
        node, reference : str
            Names of nodes; ``0`` and ``gnd`` are ground.

        Returns
        -------
        ndarray, shape (points,)
            Voltage [V], complex in an AC result.

        Raises
        ------
        UnknownName
            The deck has no such node.

        Examples
        --------
        >>> OperatingResult({"v(out)": np.array([0.5])}, "").voltage("out")
        array([0.5])
        """
        return np.asarray(self._node(node) - self._node(reference))

    def current(self, source: str) -> NDArray[Any]:
        """Give the current through a voltage source, from its first node to its second.

        Parameters
        ----------
        source : str
            Name of the source, such as ``vdd``.

        Returns
        -------
        ndarray, shape (points,)
            Current [A]: negative where the source delivers power.

        Raises
        ------
        UnknownName
            The deck has no such source.

        Examples
        --------
        >>> OperatingResult({"i(vdd)": np.array([-1e-6])}, "").current("VDD")
        array([-1.e-06])
        """
        return self._pick(f"i({source.lower()})")

    def _node(self, node: str) -> NDArray[Any]:
        if node.lower() in ("0", "gnd"):
            return np.zeros(1)
        return self._pick(f"v({node.lower()})")

    def _pick(self, name: str) -> NDArray[Any]:
        try:
            return self.signals[name]
        except KeyError:
            raise UnknownName(
                f"{name} is not a signal of this simulation.", hint=advise(name, self.signals)
            ) from None


@dataclass(frozen=True)
class OperatingResult(Simulation):
    """Bias point of a deck (``.op``); every signal has one value."""


@dataclass(frozen=True)
class DcResult(Simulation):
    """DC sweep (``.dc``) of one source.

    Attributes
    ----------
    swept : ndarray, shape (points,)
        Values of the swept source [V or A].
    """

    swept: NDArray[np.float64]


@dataclass(frozen=True)
class AcResult(Simulation):
    """Small-signal response (``.ac``); signals are complex.

    Attributes
    ----------
    frequency : ndarray, shape (points,)
        Frequencies [Hz].
    """

    frequency: NDArray[np.float64]


@dataclass(frozen=True)
class NoiseResult(Simulation):
    """Noise (``.noise``); ``signals`` is empty.

    Attributes
    ----------
    frequency : ndarray, shape (points,)
        Frequencies [Hz].
    output, input : ndarray, shape (points,)
        Noise density [V^2/Hz] at the output, and referred to the input source.
    by_device : mapping of str to ndarray, shape (points,)
        Part of the output density [V^2/Hz] that each device makes.
    """

    frequency: NDArray[np.float64]
    output: NDArray[np.float64]
    input: NDArray[np.float64]
    by_device: Mapping[str, NDArray[np.float64]]


@dataclass(frozen=True)
class TransientResult(Simulation):
    """Response over time (``.tran``).

    Attributes
    ----------
    time : ndarray, shape (points,)
        Instants the simulator chose [s]; not equidistant.
    """

    time: NDArray[np.float64]
