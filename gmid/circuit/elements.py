"""The elements of a circuit: transistors in units, resistors, capacitors and sources.

Values may carry leading axes (candidates, supplies); those of all elements broadcast.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Any, TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.errors import UsageFault

Array = NDArray[np.float64]

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_NODE = re.compile(r"[A-Za-z0-9_]+")

NEVER_NEGATIVE = frozenset({"length", "count", "resistance", "capacitance"})
"""Values that only make sense as positive numbers (a capacitance may be zero)."""


@dataclass(frozen=True, eq=False)
class Element:
    """What all elements have: a name and values; the base of the five kinds.

    Parameters
    ----------
    name : str
        Unique in its circuit; letters, digits and underscores.

    Examples
    --------
    >>> Element("r1").name
    'r1'
    """

    name: str

    @property
    def nodes(self) -> tuple[str, ...]:
        """Nodes in the order of a netlist line."""
        return ()

    @property
    def values(self) -> dict[str, Array]:
        """Values by name, each with leading axes."""
        return {}

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes of the values."""
        return np.broadcast_shapes(*(np.shape(value) for value in self.values.values()))

    def __repr__(self) -> str:
        values = [
            f"{key}={value:.6g}" if np.ndim(value) == 0 else f"{key}{np.shape(value)}"
            for key, value in self.values.items()
        ]
        return f"{type(self).__name__}({self.name}: {' '.join(self.nodes)}, {', '.join(values)})"


@dataclass(frozen=True, eq=False, repr=False)
class Transistor(Element):
    """An instance of a unit transistor: so many in parallel, so many in series.

    Parameters
    ----------
    name : str
        Unique in its circuit.
    device : str
        Name of the device in the table.
    polarity : str
        ``n`` or ``p``.
    drain, gate, source, bulk : str
        Nodes.
    length : ndarray, shape (...)
        Channel length [m].
    count : ndarray, shape (...)
        Unit transistors in parallel [-].
    stack : int
        Units in series, all gates and all bulks together.
    role : str
        Place in the topology; the name itself where none is given.

    Examples
    --------
    >>> Transistor("m1", "nmos", "n", "out", "in", "0", "0", np.array(1e-6), np.array(4.0))
    Transistor(m1: out in 0 0, length=1e-06, count=4)
    """

    device: str
    polarity: str
    drain: str
    gate: str
    source: str
    bulk: str
    length: Array
    count: Array
    stack: int = 1
    role: str = ""

    @property
    def nodes(self) -> tuple[str, ...]:
        """Drain, gate, source and bulk."""
        return (self.drain, self.gate, self.source, self.bulk)

    @property
    def values(self) -> dict[str, Array]:
        """Length and count."""
        return {"length": self.length, "count": self.count}

    @property
    def sign(self) -> float:
        """1 for an n-channel, -1 for a p-channel."""
        return 1.0 if self.polarity == "n" else -1.0

    @property
    def inner_nodes(self) -> tuple[str, ...]:
        """Nodes between the units of a stack, the one next to the drain first."""
        return tuple(f"{self.name}_{k}" for k in range(1, self.stack))

    @property
    def units(self) -> tuple[Transistor, ...]:
        """The units of a stack as instances of their own, the one at the drain first."""
        if self.stack == 1:
            return (self,)
        chain = (self.drain, *self.inner_nodes, self.source)
        return tuple(
            replace(self, name=f"{self.name}_{k + 1}", drain=upper, source=lower, stack=1)
            for k, (upper, lower) in enumerate(pairwise(chain))
        )


@dataclass(frozen=True, eq=False, repr=False)
class _TwoTerminals(Element):
    plus: str
    minus: str

    @property
    def nodes(self) -> tuple[str, ...]:
        """The two nodes."""
        return (self.plus, self.minus)


@dataclass(frozen=True, eq=False, repr=False)
class Resistor(_TwoTerminals):
    """A resistor between two nodes.

    Parameters
    ----------
    name, plus, minus : str
        Name and nodes.
    resistance : ndarray, shape (...)
        [ohm].

    Examples
    --------
    >>> Resistor("r1", "a", "b", np.array(1e3))
    Resistor(r1: a b, resistance=1000)
    """

    resistance: Array

    @property
    def values(self) -> dict[str, Array]:
        """The resistance."""
        return {"resistance": self.resistance}


@dataclass(frozen=True, eq=False, repr=False)
class Capacitor(_TwoTerminals):
    """A capacitor between two nodes.

    Parameters
    ----------
    name, plus, minus : str
        Name and nodes.
    capacitance : ndarray, shape (...)
        [F].

    Examples
    --------
    >>> Capacitor("c1", "a", "b", np.array(1e-12))
    Capacitor(c1: a b, capacitance=1e-12)
    """

    capacitance: Array

    @property
    def values(self) -> dict[str, Array]:
        """The capacitance."""
        return {"capacitance": self.capacitance}


@dataclass(frozen=True, eq=False, repr=False)
class VoltageSource(_TwoTerminals):
    """A voltage source: ``v(plus) - v(minus) = voltage``.

    Parameters
    ----------
    name, plus, minus : str
        Name and nodes.
    voltage : ndarray, shape (...)
        [V].

    Examples
    --------
    >>> VoltageSource("vdd", "vdd", "0", np.array(1.8))
    VoltageSource(vdd: vdd 0, voltage=1.8)
    """

    voltage: Array

    @property
    def values(self) -> dict[str, Array]:
        """The voltage."""
        return {"voltage": self.voltage}


@dataclass(frozen=True, eq=False, repr=False)
class CurrentSource(_TwoTerminals):
    """A current source, taking its current out of the plus node and into the minus node.

    Parameters
    ----------
    name, plus, minus : str
        Name and nodes; the current flows through the source from plus to minus.
    current : ndarray, shape (...)
        [A].

    Examples
    --------
    >>> CurrentSource("iref", "vdd", "bias", np.array(2e-6))
    CurrentSource(iref: vdd bias, current=2e-06)
    """

    current: Array

    @property
    def values(self) -> dict[str, Array]:
        """The current."""
        return {"current": self.current}


Kind = TypeVar("Kind", bound=Element)


def change_values(element: Kind, new: dict[str, ArrayLike]) -> Kind:
    """Return an element with some of its values replaced.

    Parameters
    ----------
    element : Element
        Any of the five kinds.
    new : dict of str to array_like
        Only values that the element has.

    Returns
    -------
    Element
        Of the same kind.

    Raises
    ------
    UsageFault
        If a value does not belong to the element, or cannot be.

    Examples
    --------
    >>> change_values(Resistor("r1", "a", "b", np.array(1e3)), {"resistance": 2e3})
    Resistor(r1: a b, resistance=2000)
    """
    for key in new:
        if key not in element.values:
            raise UsageFault(
                f"{element.name} has no value {key}; it has {', '.join(element.values)}."
            )
    arrays: dict[str, Any] = {
        key: np.asarray(value, dtype=np.float64) for key, value in new.items()
    }
    changed: Kind = replace(element, **arrays)
    check_element(changed)
    return changed


def check_element(element: Element) -> None:
    """Refuse names and values that cannot stand in a circuit or its netlist.

    Parameters
    ----------
    element : Element
        Any of the five kinds.

    Raises
    ------
    UsageFault
        Saying what is wrong.

    Examples
    --------
    >>> check_element(Resistor("r 1", "a", "b", np.array(1e3)))
    Traceback (most recent call last):
    ...
    gmid.errors.UsageFault: 'r 1' cannot name an element. Use letters, digits and _, a letter first.
    """
    if _NAME.fullmatch(element.name) is None:
        raise UsageFault(
            f"{element.name!r} cannot name an element.",
            hint="Use letters, digits and _, a letter first.",
        )
    for node in element.nodes:
        if not isinstance(node, str) or _NODE.fullmatch(node) is None:
            raise UsageFault(
                f"{element.name}: {node!r} cannot name a node.", hint="Use letters, digits and _."
            )
    for key, value in element.values.items():
        if not np.all(np.isfinite(value)):
            raise UsageFault(f"the {key} of {element.name} is not finite.")
        if key in NEVER_NEGATIVE:
            least = float(np.min(value, initial=np.inf))
            if least < 0 or (least == 0 and key != "capacitance"):
                raise UsageFault(f"the {key} of {element.name} must be positive, not {least:g}.")
    _check_batch(element)
    if isinstance(element, Transistor):
        _check_transistor(element)


def _check_batch(element: Element) -> None:
    try:
        _ = element.batch
    except ValueError:
        shapes = ", ".join(f"{key} {np.shape(value)}" for key, value in element.values.items())
        raise UsageFault(
            f"the values of {element.name} do not broadcast together: {shapes}."
        ) from None


def _check_transistor(element: Transistor) -> None:
    if element.polarity not in ("n", "p"):
        raise UsageFault(f"the polarity of {element.name} is 'n' or 'p', not {element.polarity!r}.")
    if not isinstance(element.stack, int) or element.stack < 1:
        raise UsageFault(
            f"the stack of {element.name} must be a whole number from 1 on, not {element.stack!r}."
        )
