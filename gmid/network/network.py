"""`Network`: a linear network put together element by element.

Nodes are named, ground is ``"0"``. A value may carry leading axes (candidates, conditions);
those of all elements broadcast together. Structure is given once; `Network.with_values` makes
networks of the same structure.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UsageFault
from gmid.network.stamps import BOLTZMANN, ZERO_CELSIUS, NoiseSource
from gmid.network.structure import Structure


class Network(Structure):
    """A linear network: named nodes, elements with batched values, noise sources.

    Parameters
    ----------
    nodes : iterable of str, optional
        All nodes there may be; another name is then an error. Without it nodes come into
        being as elements name them.

    Examples
    --------
    >>> net = Network()
    >>> net.add_voltage_source("vin", "in", "0")
    >>> net.add_resistor("r1", "in", "out", [1e3, 2e3])
    >>> net.add_capacitor("c1", "out", "0", 1e-12)
    >>> net
    Network(2 nodes, 1 voltage_source, 1 resistor, 1 capacitor, batch (2,))
    """

    def add_resistor(
        self, name: str, plus: str, minus: str, resistance: ArrayLike, *,
        temperature: ArrayLike | None = None,
    ) -> None:  # fmt: skip
        """Add a resistor, noisy where a temperature is given.

        Parameters
        ----------
        name : str
            Unique name; its noise source is called ``name.thermal``.
        plus, minus : str
            Nodes.
        resistance : array_like, shape (...)
            [ohm]; infinity is no connection.
        temperature : array_like, shape (...), optional
            [degC]; adds the thermal noise ``4kT/R``.

        References
        ----------
        H. Nyquist, "Thermal agitation of electric charge in conductors", Phys. Rev. 32, 1928.

        Examples
        --------
        >>> net = Network()
        >>> net.add_resistor("r1", "out", "0", 1e3, temperature=27.0)
        >>> net.noise_sources
        (NoiseSource(r1.thermal of r1: out 0),)
        """
        self._insert(name, "resistor", (plus, minus), {"resistance": resistance})
        conductance = 1.0 / np.asarray(resistance, dtype=np.float64)
        self._add_thermal(name, plus, minus, conductance, temperature)

    def add_conductor(
        self, name: str, plus: str, minus: str, conductance: ArrayLike, *,
        temperature: ArrayLike | None = None,
    ) -> None:  # fmt: skip
        """Add a conductance, noisy where a temperature is given.

        Parameters
        ----------
        name : str
            Unique name; its noise source is called ``name.thermal``.
        plus, minus : str
            Nodes.
        conductance : array_like, shape (...)
            [S].
        temperature : array_like, shape (...), optional
            [degC]; adds the thermal noise ``4kTG``.

        Examples
        --------
        >>> net = Network()
        >>> net.add_conductor("g1", "out", "0", 1e-3)
        """
        self._insert(name, "conductor", (plus, minus), {"conductance": conductance})
        self._add_thermal(name, plus, minus, conductance, temperature)

    def add_capacitor(self, name: str, plus: str, minus: str, capacitance: ArrayLike) -> None:
        """Add a capacitor.

        Parameters
        ----------
        name : str
            Unique name.
        plus, minus : str
            Nodes.
        capacitance : array_like, shape (...)
            [F].

        Examples
        --------
        >>> net = Network()
        >>> net.add_capacitor("c1", "out", "0", 1e-12)
        """
        self._insert(name, "capacitor", (plus, minus), {"capacitance": capacitance})

    def add_crossed(
        self, name: str, plus: str, minus: str, *, conductance: ArrayLike = 0.0,
        capacitance: ArrayLike = 0.0, temperature: ArrayLike | None = None,
    ) -> None:  # fmt: skip
        """Add an admittance with crossed wires, as a half circuit sees it.

        In the differential circuit it joins each side's first node to the other side's
        second one: it loads both nodes with +Y and the transfer term is +Y instead of -Y.

        Parameters
        ----------
        name : str
            Unique name; its noise source is called ``name.thermal``.
        plus, minus : str
            Nodes of the half circuit.
        conductance : array_like, shape (...)
            [S].
        capacitance : array_like, shape (...)
            [F].
        temperature : array_like, shape (...), optional
            [degC]; adds the thermal noise of the conductance, which enters both nodes with
            the same sign. As for all of a half circuit, the differential density is twice
            the one found.

        Examples
        --------
        >>> net = Network()
        >>> net.add_crossed("g1", "a", "b", conductance=1e-3)
        >>> net.assemble().conductance.tolist()
        [[0.001, 0.001], [0.001, 0.001]]
        """
        values = {"conductance": conductance, "capacitance": capacitance}
        self._insert(name, "crossed", (plus, minus), values)
        self._add_thermal(name, plus, minus, conductance, temperature, signs=(1, -1))

    def add_block(
        self, name: str, nodes: Sequence[str], *, conductance: ArrayLike | None = None,
        capacitance: ArrayLike | None = None, signs: Sequence[int] | None = None,
    ) -> None:  # fmt: skip
        """Add a block of k terminals by its full matrices, such as a linearised transistor.

        Parameters
        ----------
        name : str
            Unique name.
        nodes : sequence of str, length k
            Nodes of the terminals; one node may stand more than once.
        conductance : array_like, shape (..., k, k), optional
            Row i holds the derivatives of the current into terminal i [S].
        capacitance : array_like, shape (..., k, k), optional
            Row i holds the derivatives of the charge of terminal i [F]; off the diagonal it is
            the negative of the trade's ``c_ij``. It need not be symmetric.
        signs : sequence of int, optional
            In a half circuit, -1 for a terminal wired to the other side.

        Raises
        ------
        UsageFault
            If a matrix is not k by k.

        Examples
        --------
        >>> net = Network()
        >>> net.add_block("m1", ("g", "d"), conductance=[[0.0, 0.0], [1e-3, 1e-5]])
        >>> net.assemble().conductance[1].tolist()
        [0.001, 1e-05]
        """
        matrices = {"conductance": conductance, "capacitance": capacitance}
        values = {key: value for key, value in matrices.items() if value is not None}
        if not values:
            raise UsageFault(f"block {name} has neither conductance nor capacitance.")
        given = signs if signs is not None else (1,) * len(nodes)
        self._insert(name, "block", nodes, values, given)

    def add_vccs(
        self, name: str, output: tuple[str, str], control: tuple[str, str], gm: ArrayLike, *,
        pole: ArrayLike | None = None,
    ) -> None:  # fmt: skip
        """Add a voltage-controlled current source, with an excess-phase pole if wanted.

        Parameters
        ----------
        name : str
            Unique name.
        output : tuple of str
            The current ``gm v`` leaves the first node and enters the second.
        control : tuple of str
            Nodes whose difference is v.
        gm : array_like, shape (...)
            [S].
        pole : array_like, shape (...), optional
            p of ``gm/(1 + s/p)`` [rad/s]; may be infinite. Adds the unknown ``x(name)``.

        Examples
        --------
        >>> net = Network()
        >>> net.add_vccs("g1", ("out", "0"), ("in", "0"), 1e-3, pole=1e9)
        >>> net.unknowns
        ('out', 'in', 'x(g1)')
        """
        values = {"gm": gm} if pole is None else {"gm": gm, "pole": pole}
        self._insert(name, "vccs", (*output, *control), values)

    def add_vcvs(
        self, name: str, output: tuple[str, str], control: tuple[str, str], gain: ArrayLike
    ) -> None:
        """Add a voltage-controlled voltage source.

        Parameters
        ----------
        name : str
            Unique name; its current is the unknown ``i(name)``.
        output : tuple of str
            Nodes held apart by ``gain v``.
        control : tuple of str
            Nodes whose difference is v.
        gain : array_like, shape (...)
            [-].

        Examples
        --------
        >>> net = Network()
        >>> net.add_vcvs("e1", ("out", "0"), ("in", "0"), -1.0)
        """
        self._insert(name, "vcvs", (*output, *control), {"gain": gain})

    def add_amplifier(
        self, name: str, output: tuple[str, str], control: tuple[str, str], *,
        gain: ArrayLike = np.inf, bandwidth: ArrayLike = np.inf,
    ) -> None:  # fmt: skip
        """Add a voltage amplifier ``1/(1/A0 + s/wt)``, ideal where both are infinite.

        Parameters
        ----------
        name : str
            Unique name; its output current is the unknown ``i(name)``.
        output : tuple of str
            Nodes that it drives.
        control : tuple of str
            Plus and minus input.
        gain : array_like, shape (...)
            A0 [-].
        bandwidth : array_like, shape (...)
            wt, angular frequency at which the integrator part has gain 1 [rad/s].

        Examples
        --------
        >>> net = Network()
        >>> net.add_amplifier("a1", ("out", "0"), ("0", "x"))
        """
        values = {"gain": gain, "bandwidth": bandwidth}
        self._insert(name, "amplifier", (*output, *control), values)

    def add_voltage_source(self, name: str, plus: str, minus: str) -> None:
        """Add an independent voltage source; analyses say how strongly it drives.

        Parameters
        ----------
        name : str
            Unique name; the unknown ``i(name)`` is its current from plus to minus.
        plus, minus : str
            Nodes.

        Examples
        --------
        >>> net = Network()
        >>> net.add_voltage_source("vin", "in", "0")
        """
        self._insert(name, "voltage_source", (plus, minus), {})

    def add_current_source(self, name: str, plus: str, minus: str) -> None:
        """Add an independent current source; analyses say how strongly it drives.

        Parameters
        ----------
        name : str
            Unique name.
        plus, minus : str
            The current leaves the first node and enters the second.

        Examples
        --------
        >>> net = Network()
        >>> net.add_current_source("iin", "0", "out")
        """
        self._insert(name, "current_source", (plus, minus), {})

    def add_noise(
        self, name: str, plus: str, minus: str, *, white: ArrayLike = 0.0,
        flicker: ArrayLike = 0.0, exponent: ArrayLike = 1.0, owner: str | None = None,
        signs: tuple[int, int] = (1, 1),
    ) -> None:  # fmt: skip
        """Add a noise current between two nodes, independent of all others.

        Parameters
        ----------
        name : str
            Unique name.
        plus, minus : str
            The current leaves the first node and enters the second.
        white : array_like, shape (...)
            Density [A^2/Hz].
        flicker : array_like, shape (...)
            Density at 1 Hz [A^2/Hz].
        exponent : array_like, shape (...)
            ef of ``flicker / f**ef`` [-].
        owner : str, optional
            The device whose share it belongs to; the name itself by default.
        signs : tuple of int
            In a half circuit, -1 for a node on the other side.

        Examples
        --------
        >>> net = Network()
        >>> net.add_noise("m1.channel", "d", "s", white=1e-24, flicker=1e-18, owner="m1")
        """
        self._claim(name)
        self._touch((plus, minus), name)
        values = (np.asarray(value, dtype=np.float64) for value in (white, flicker, exponent))
        self._noise[name] = NoiseSource(name, owner or name, (plus, minus), signs, *values)

    def _add_thermal(
        self, name: str, plus: str, minus: str, conductance: ArrayLike,
        temperature: ArrayLike | None, signs: tuple[int, int] = (1, 1),
    ) -> None:  # fmt: skip
        if temperature is None:
            return
        kelvin = np.asarray(temperature, dtype=np.float64) + ZERO_CELSIUS
        if np.any(kelvin < 0):
            raise UsageFault(f"the temperature of {name} lies below absolute zero.")
        white = 4.0 * BOLTZMANN * kelvin * np.abs(conductance)
        self.add_noise(f"{name}.thermal", plus, minus, white=white, owner=name, signs=signs)
