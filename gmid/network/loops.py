"""Loop gains, measured at a series voltage source that breaks the loop for signals."""

from __future__ import annotations

import numpy as np

from gmid.errors import UsageFault
from gmid.network.pencil import ComplexArray, FloatArray
from gmid.network.response import Transfer
from gmid.network.scanning import ScannedResponse
from gmid.network.structure import Structure


def break_loop(network: Structure, probe: str) -> Transfer:
    """Return the loop gain by voltage injection, as a function of frequency.

    The probe is a voltage source in series with the loop, its plus terminal at the node that
    drives and its minus terminal at the node that is driven (the gate). The loop gain is
    ``-v(drive)/v(gate)``. It is exact where the gate draws no current from the probe, and close
    where the drive's impedance is much below the gate's.

    Parameters
    ----------
    network : Network
        The closed loop, with the probe in it.
    probe : str
        Name of the voltage source.

    Returns
    -------
    Transfer
        The loop gain, positive at DC for negative feedback.

    Raises
    ------
    UsageFault
        If the probe is not a voltage source between two nodes.

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_vccs("gm", ("drive", "0"), ("gate", "0"), 1e-3)
    >>> net.add_resistor("r", "drive", "0", 1e5)
    >>> net.add_voltage_source("vprobe", "drive", "gate")
    >>> float(break_loop(net, "vprobe")(0.0).real.round(6))
    100.0
    """
    drive, gate = _find_ends(network, probe)
    return Transfer(network, probe, drive, reference=gate, factor=-1.0)


class DoubleInjection(ScannedResponse):
    """Middlebrook's loop gain, exact at any point of a loop without reverse transmission.

    A voltage and a current are injected in turn at the same place; with the two partial
    gains Tv and Ti the loop gain is ``(Tv Ti - 1)/(Tv + Ti + 2)``, whatever the impedances.

    Parameters
    ----------
    network : Network
        The closed loop, with the probe in it.
    probe : str
        Name of a voltage source in series with the loop, plus at the node that drives.

    References
    ----------
    R. D. Middlebrook, "Measurement of loop gain in feedback systems", Int. J. Electronics 38,
    1975 (from memory).

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_vccs("gm", ("drive", "0"), ("gate", "0"), 1e-3)
    >>> net.add_resistor("r1", "drive", "0", 1e5)
    >>> net.add_resistor("r2", "gate", "0", 1e5)
    >>> net.add_voltage_source("vprobe", "drive", "gate")
    >>> float(DoubleInjection(net, "vprobe")(0.0).real.round(6))
    50.0
    """

    def __init__(self, network: Structure, probe: str) -> None:
        super().__init__(network)
        self.probe = probe
        self.drive, self.gate = _find_ends(network, probe)

    def _ask(self) -> tuple[FloatArray, FloatArray]:
        net = self.network
        # second column: a current of 1 A into the gate, the probe at zero
        right = np.stack([net.drive(self.probe), net.observe(self.gate)], axis=-1)
        seen = [self.drive, self.gate, f"i({self.probe})"]
        return right, np.stack([net.observe(name) for name in seen])

    def _answer(self, found: ComplexArray) -> ComplexArray:
        # Tv = -a/b and Ti = -p/q, put in without dividing: q is zero at a gate without current
        a, b, p = found[..., 0, 0], found[..., 1, 0], found[..., 2, 1]
        q = p + 1.0
        return np.asarray((a * p - b * q) / (2.0 * b * q - a * q - b * p), dtype=np.complex128)

    def __repr__(self) -> str:
        return f"DoubleInjection({self.probe} from {self.drive} to {self.gate}, {self.network!r})"


def _find_ends(network: Structure, probe: str) -> tuple[str, str]:
    element = network.find(probe)
    if element.kind != "voltage_source":
        raise UsageFault(
            f"{probe} is a {element.kind}; a loop is broken by a voltage source in series."
        )
    drive, gate = element.nodes
    for node in (drive, gate):
        if not network.observe(node).any():
            raise UsageFault(f"probe {probe} ends at ground, so it is not inside a loop.")
    return drive, gate
