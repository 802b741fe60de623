"""The core of a circuit: its elements and nodes, and circuits made from others."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from typing import Any, Self, TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.circuit.elements import (
    Array,
    Capacitor,
    CurrentSource,
    Element,
    Resistor,
    Transistor,
    VoltageSource,
    change_values,
    check_element,
)
from gmid.errors import UnknownName, UsageFault, advise
from gmid.network.stamps import GROUND

Values = Mapping[str, ArrayLike | Mapping[str, ArrayLike]]
"""By element: a value where it has only one, or a mapping of value name to value."""

_Kind = TypeVar("_Kind", bound=Element)


class Parts:
    """Elements and nodes of a circuit.

    `gmid.circuit.circuit.Circuit` adds the methods that put elements in.

    Examples
    --------
    >>> Parts()
    Circuit(0 nodes: no elements)
    """

    def __init__(self) -> None:
        self._elements: dict[str, Element] = {}
        self._nodes: dict[str, None] = {}
        self._names: set[str] = set()
        self._spelling: dict[str, str] = {}
        self._batch: tuple[int, ...] | None = None

    def add(self, element: Element) -> None:
        """Add an element that exists already, such as one of another circuit.

        Parameters
        ----------
        element : Element
            Of any of the five kinds.

        Raises
        ------
        UsageFault
            If its name is taken, or it cannot stand in a circuit.

        Examples
        --------
        >>> from gmid.circuit import Circuit, Resistor
        >>> c = Circuit()
        >>> c.add(Resistor("r1", "a", "b", np.array(1e3)))
        >>> c.nodes
        ('a', 'b')
        """
        check_element(element)
        if element.name.lower() in self._names:
            raise UsageFault(
                f"the circuit already has an element named {element.name}.",
                hint="Netlists do not tell capitals from small letters.",
            )
        inner = element.inner_nodes if isinstance(element, Transistor) else ()
        for node in inner:
            if node.lower() in self._spelling:
                raise UsageFault(f"{element.name} needs node {node} for itself.")
        fresh: dict[str, str] = {}
        for node in element.nodes:
            known = self._spelling.get(node.lower()) or fresh.setdefault(node.lower(), node)
            if known != node:
                raise UsageFault(f"{node} and {known} differ in capitals only.")
            if node in inner or self._owner_of(node) is not None:
                raise UsageFault(f"{element.name}: node {node} lies inside a stack.")
        for node in (*element.nodes, *inner):
            if node != GROUND:
                self._nodes.setdefault(node)
                self._spelling[node.lower()] = node
        self._elements[element.name] = element
        self._names.add(element.name.lower())
        self._batch = None

    def _owner_of(self, node: str) -> str | None:
        name = node.rpartition("_")[0]
        owner = self._elements.get(name)
        return name if isinstance(owner, Transistor) and node in owner.inner_nodes else None

    @property
    def nodes(self) -> tuple[str, ...]:
        """Names of the nodes, ground left out, those inside stacks included."""
        return tuple(self._nodes)

    @property
    def elements(self) -> tuple[Element, ...]:
        """All elements, in the order of their making."""
        return tuple(self._elements.values())

    def _of(self, kind: type[_Kind]) -> tuple[_Kind, ...]:
        return tuple(e for e in self._elements.values() if isinstance(e, kind))

    @property
    def transistors(self) -> tuple[Transistor, ...]:
        """All transistors."""
        return self._of(Transistor)

    @property
    def resistors(self) -> tuple[Resistor, ...]:
        """All resistors."""
        return self._of(Resistor)

    @property
    def capacitors(self) -> tuple[Capacitor, ...]:
        """All capacitors."""
        return self._of(Capacitor)

    @property
    def voltage_sources(self) -> tuple[VoltageSource, ...]:
        """All voltage sources."""
        return self._of(VoltageSource)

    @property
    def current_sources(self) -> tuple[CurrentSource, ...]:
        """All current sources."""
        return self._of(CurrentSource)

    @property
    def devices(self) -> tuple[str, ...]:
        """Names of the devices in use."""
        return tuple(dict.fromkeys(t.device for t in self.transistors))

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes of the whole circuit: all values broadcast together."""
        if self._batch is None:
            self._batch = self._broadcast()
        return self._batch

    def _broadcast(self) -> tuple[int, ...]:
        batch: tuple[int, ...] = ()
        for element in self._elements.values():
            try:
                batch = np.broadcast_shapes(batch, element.batch)
            except ValueError:
                raise UsageFault(
                    f"values of {element.name} have leading axes {element.batch}, "
                    f"which do not broadcast with the {batch} of the elements before it."
                ) from None
        return batch

    def find(self, name: str) -> Element:
        """Return an element by its name.

        Parameters
        ----------
        name : str
            The element.

        Returns
        -------
        Element
            As it stands in the circuit.

        Raises
        ------
        UnknownName
            If there is none; the message names the nearest.

        Examples
        --------
        >>> from gmid.circuit import Circuit
        >>> c = Circuit()
        >>> c.add_resistor("r1", "out", "0", 1e3)
        >>> c.find("r1")
        Resistor(r1: out 0, resistance=1000)
        """
        try:
            return self._elements[name]
        except KeyError:
            raise UnknownName(
                f"the circuit has no element {name}.", hint=advise(name, self._elements)
            ) from None

    def copy(self) -> Self:
        """Return a circuit of the same elements, to be added to.

        Returns
        -------
        Circuit
            This one stays as it is.

        Examples
        --------
        >>> from gmid.circuit import Circuit
        >>> c = Circuit()
        >>> bench = c.copy()
        >>> bench.add_voltage_source("vdd", "vdd", "0", 1.8)
        >>> c.nodes, bench.nodes
        ((), ('vdd',))
        """
        other = type(self)()
        other._elements = dict(self._elements)
        other._nodes = dict(self._nodes)
        other._names = set(self._names)
        other._spelling = dict(self._spelling)
        return other

    def take_last(self, index: NDArray[np.intp], size: int) -> Self:
        """Give the circuit of some places on the last axis of its batch.

        Parameters
        ----------
        index : ndarray of int, shape (k,)
            The places.
        size : int
            Length of that axis; values of another length there are the same for all places.

        Returns
        -------
        Circuit
            Another one.
        """
        other = type(self)()
        other.__dict__.update(self.__dict__, _batch=None)
        other._elements = {
            name: _take_last(element, index, size) for name, element in self._elements.items()
        }
        return other

    def with_values(self, values: Values) -> Self:
        """Return a circuit of the same structure with some values replaced.

        Parameters
        ----------
        values : mapping
            By element: a value where it has only one, or a mapping of ``length``, ``count``,
            ``resistance`` and so on.

        Returns
        -------
        Circuit
            A new circuit; this one stays as it is.

        Raises
        ------
        UnknownName
            If there is no such element.
        UsageFault
            If a value does not belong to the element, or cannot be.

        Examples
        --------
        >>> from gmid.circuit import Circuit
        >>> c = Circuit()
        >>> c.add_resistor("r1", "out", "0", 1e3)
        >>> c.with_values({"r1": [1e3, 2e3]}).batch
        (2,)
        """
        other = self.copy()
        for name, new in values.items():
            element = self.find(name)
            if not isinstance(new, Mapping):
                if len(element.values) != 1:
                    raise UsageFault(f"{name} has several values: {', '.join(element.values)}.")
                new = {next(iter(element.values)): new}
            other._elements[name] = change_values(element, dict(new))
        return other

    def item(self, *index: int) -> Self:
        """Return the circuit of one item of the batch.

        Parameters
        ----------
        *index : int
            Place on each leading axis.

        Returns
        -------
        Circuit
            Without leading axes.

        Examples
        --------
        >>> from gmid.circuit import Circuit
        >>> c = Circuit()
        >>> c.add_resistor("r1", "out", "0", [1e3, 2e3])
        >>> float(c.item(1).resistors[0].resistance)
        2000.0
        """
        batch = self.batch
        return self.with_values(
            {
                element.name: {
                    key: np.broadcast_to(value, batch)[index]
                    for key, value in element.values.items()
                }
                for element in self.elements
            }
        )

    def scaled(self, multiple: ArrayLike) -> Self:
        """Return the circuit at so many times the current, with the same node voltages.

        Parameters
        ----------
        multiple : array_like, shape (...)
            Counts, capacitances and current sources are multiplied by it, resistances divided.

        Returns
        -------
        Circuit
            A new circuit.

        Examples
        --------
        >>> from gmid.circuit import Circuit
        >>> c = Circuit()
        >>> c.add_resistor("r1", "out", "0", 1e3)
        >>> float(c.scaled(4).resistors[0].resistance)
        250.0
        """
        m = np.asarray(multiple, dtype=np.float64)
        grown = ("count", "capacitance", "current")
        values: dict[str, dict[str, Array]] = {}
        for element in self.elements:
            new = {key: value * m for key, value in element.values.items() if key in grown}
            if isinstance(element, Resistor):
                new = {"resistance": element.resistance / m}
            values[element.name] = new
        return self.with_values(values)

    def without(self, names: Iterable[str]) -> Self:
        """Return a circuit that lacks some elements, and the nodes that only they had.

        Parameters
        ----------
        names : iterable of str
            Elements to leave out.

        Returns
        -------
        Circuit
            A new circuit.

        Examples
        --------
        >>> from gmid.circuit import Circuit
        >>> c = Circuit()
        >>> c.add_resistor("r1", "a", "0", 1e3)
        >>> c.add_resistor("r2", "b", "0", 1e3)
        >>> c.without(["r1"]).nodes
        ('b',)
        """
        left = {self.find(name).name for name in names}
        other = type(self)()
        for element in self.elements:
            if element.name not in left:
                other.add(element)
        return other

    def __repr__(self) -> str:
        kinds = {
            "transistor": self.transistors, "resistor": self.resistors,
            "capacitor": self.capacitors, "voltage source": self.voltage_sources,
            "current source": self.current_sources,
        }  # fmt: skip
        parts = [
            f"{len(found)} {kind}{'s' if len(found) > 1 else ''}"
            for kind, found in kinds.items() if found
        ]  # fmt: skip
        batch = f"; batch {self.batch}" if self.batch else ""
        return f"Circuit({len(self._nodes)} nodes: {', '.join(parts) or 'no elements'}{batch})"


def _take_last(element: Element, index: NDArray[np.intp], size: int) -> Element:
    parts: dict[str, Any] = {
        key: value[..., index]
        for key, value in element.values.items()
        if value.ndim and value.shape[-1] == size > 1
    }
    return replace(element, **parts) if parts else element
