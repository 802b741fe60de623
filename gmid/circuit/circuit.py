"""`Circuit`: named elements on named nodes, put together one by one.

The same object is solved, linearised, counted and written as a netlist. Ground is ``"0"``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from gmid.circuit.elements import (
    Capacitor,
    CurrentSource,
    Resistor,
    Transistor,
    VoltageSource,
)
from gmid.circuit.parts import Parts
from gmid.errors import UnknownName, advise
from gmid.network.stamps import GROUND


class Circuit(Parts):
    """Transistors in units, resistors, capacitors and sources on named nodes.

    Examples
    --------
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", [1.62, 1.8, 1.98])
    >>> c.add_resistor("r1", "vdd", "out", 100e3)
    >>> c.add_transistor("m1", "nmos", polarity="n", drain="out", gate="out", source="0",
    ...                  bulk="0", length=1e-6, count=2)
    >>> c
    Circuit(2 nodes: 1 transistor, 1 resistor, 1 voltage source; batch (3,))
    """

    def add_transistor(
        self, name: str, device: str, *, polarity: str, drain: str, gate: str, source: str,
        bulk: str, length: ArrayLike, count: ArrayLike, stack: int = 1, role: str | None = None,
    ) -> None:  # fmt: skip
        """Add an instance of a unit transistor.

        Parameters
        ----------
        name : str
            Unique name.
        device : str
            Name of the device in the table.
        polarity : str
            ``n`` or ``p``, that of the device.
        drain, gate, source, bulk : str
            Nodes; the bulk may be any.
        length : array_like, shape (...)
            Channel length [m].
        count : array_like, shape (...)
            Unit transistors in parallel [-]. A netlist can hold whole numbers only.
        stack : int
            Units in series, with the nodes ``name_1``, ``name_2`` ... between them, counted
            from the drain.
        role : str, optional
            Place in the topology; the name itself by default.

        Examples
        --------
        >>> c = Circuit()
        >>> c.add_transistor("m1", "nmos", polarity="n", drain="out", gate="in", source="0",
        ...                  bulk="0", length=1e-6, count=4, stack=2)
        >>> c.nodes
        ('out', 'in', 'm1_1')
        """
        long = np.asarray(length, dtype=np.float64)
        units = np.asarray(count, dtype=np.float64)
        self.add(
            Transistor(
                name, device, polarity, drain, gate, source, bulk, long, units, stack, role or name
            )
        )

    def add_resistor(self, name: str, plus: str, minus: str, resistance: ArrayLike) -> None:
        """Add a resistor.

        Parameters
        ----------
        name, plus, minus : str
            Unique name, and nodes.
        resistance : array_like, shape (...)
            [ohm].

        Examples
        --------
        >>> c = Circuit()
        >>> c.add_resistor("r1", "out", "0", 1e3)
        """
        self.add(Resistor(name, plus, minus, np.asarray(resistance, dtype=np.float64)))

    def add_capacitor(self, name: str, plus: str, minus: str, capacitance: ArrayLike) -> None:
        """Add a capacitor.

        Parameters
        ----------
        name, plus, minus : str
            Unique name, and nodes.
        capacitance : array_like, shape (...)
            [F].

        Examples
        --------
        >>> c = Circuit()
        >>> c.add_capacitor("c1", "out", "0", 1e-12)
        """
        self.add(Capacitor(name, plus, minus, np.asarray(capacitance, dtype=np.float64)))

    def add_voltage_source(self, name: str, plus: str, minus: str, voltage: ArrayLike) -> None:
        """Add a voltage source: ``v(plus) - v(minus) = voltage``.

        Parameters
        ----------
        name, plus, minus : str
            Unique name, and nodes.
        voltage : array_like, shape (...)
            [V].

        Examples
        --------
        >>> c = Circuit()
        >>> c.add_voltage_source("vdd", "vdd", "0", 1.8)
        """
        self.add(VoltageSource(name, plus, minus, np.asarray(voltage, dtype=np.float64)))

    def add_current_source(self, name: str, plus: str, minus: str, current: ArrayLike) -> None:
        """Add a current source that takes its current out of one node and into another.

        Parameters
        ----------
        name, plus, minus : str
            Unique name, and nodes: as in a netlist, the current flows through the source from
            plus to minus, so it pulls plus down and lifts minus up.
        current : array_like, shape (...)
            [A].

        Examples
        --------
        >>> c = Circuit()
        >>> c.add_current_source("iref", "vdd", "bias", 2e-6)
        """
        self.add(CurrentSource(name, plus, minus, np.asarray(current, dtype=np.float64)))

    def insert(
        self, other: Circuit, *, prefix: str = "", nodes: Mapping[str, str] | None = None
    ) -> None:
        """Put all elements of another circuit into this one.

        Parameters
        ----------
        other : Circuit
            Stays as it is.
        prefix : str
            Goes before the names of its elements and of its nodes.
        nodes : mapping of str to str, optional
            Its nodes that are nodes of this circuit, and which; ground always is.

        Raises
        ------
        UnknownName
            If `nodes` names one that the other circuit does not have.

        Examples
        --------
        >>> part, whole = Circuit(), Circuit()
        >>> part.add_resistor("r1", "a", "b", 1e3)
        >>> for side in "pn":
        ...     whole.insert(part, prefix=f"{side}_", nodes={"b": "common"})
        >>> whole.nodes
        ('p_a', 'common', 'n_a')
        """
        named = {GROUND: GROUND, **(nodes or {})}
        for node in named:
            if node != GROUND and node not in other.nodes:
                raise UnknownName(f"there is no node {node}.", hint=advise(node, other.nodes))
        for element in other.elements:
            places = {
                key: named.get(old, f"{prefix}{old}")
                for key, old in vars(element).items()
                if key in ("plus", "minus", "drain", "gate", "source", "bulk")
            }
            changed: dict[str, Any] = {"name": f"{prefix}{element.name}", **places}
            self.add(replace(element, **changed))
