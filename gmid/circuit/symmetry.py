"""Circuits of two equal sides, folded into one: half the nodes and transistors to solve.

Where both sides are at the same voltages, joining each node to its mirror image changes no
current. Two mirrored transistors are then one of twice the count.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Element, Transistor, VoltageSource, change_values
from gmid.errors import UnknownName, UsageFault, advise

_DOUBLED = {"count": 2.0, "capacitance": 2.0, "current": 2.0, "resistance": 0.5}


@dataclass(frozen=True, eq=False)
class Fold:
    """A circuit of two equal sides, joined.

    Parameters
    ----------
    circuit : Circuit
        One side and the axis; all that was there twice carries twice the current.
    nodes : dict of str to str
        For each node of the whole circuit the one of the joined circuit at the same voltage.
    kept : dict of str to str
        Elements of the side that is kept, and their equals on the other.
    across : tuple of str
        Elements that lie between a node and its image; they carry nothing at the bias point.

    Examples
    --------
    >>> Fold(Circuit(), {"vop": "vop", "von": "vop"}, {}, ())
    Fold(1 of 2 nodes)
    """

    circuit: Circuit
    nodes: dict[str, str]
    kept: dict[str, str]
    across: tuple[str, ...]

    @property
    def images(self) -> dict[str, str]:
        """Nodes of the side that is kept, and those on the other."""
        return {kept: node for node, kept in self.nodes.items() if kept != node}

    def find_twins(
        self, whole: Mapping[str, tuple[int, int]], joined: Mapping[str, tuple[int, int]]
    ) -> tuple[NDArray[np.intp], NDArray[np.float64]]:
        """Find for each unit of the whole circuit the one of the joined circuit.

        Parameters
        ----------
        whole, joined : mapping of str to tuple of int
            First and last unit of each transistor of either circuit.

        Returns
        -------
        rows : ndarray of int, shape (k,)
            Units of the joined circuit.
        share : ndarray of float, shape (k,)
            Part of their current that a unit of the whole circuit carries [-].
        """
        kept = {there: here for here, there in self.kept.items()}
        rows: list[int] = []
        share: list[float] = []
        for name, (first, last) in whole.items():
            here = kept.get(name, name)
            start = joined[here][0]
            rows += range(start, start + last - first + 1)
            share += [0.5 if here in self.kept else 1.0] * (last - first + 1)
        return np.array(rows, dtype=np.intp), np.array(share)

    def __repr__(self) -> str:
        return f"Fold({len(set(self.nodes.values()))} of {len(self.nodes)} nodes)"


def fold_circuit(circuit: Circuit, mirror: Mapping[str, str]) -> Fold:
    """Join the two sides of a circuit.

    Parameters
    ----------
    circuit : Circuit
        Both sides, with equal values.
    mirror : mapping of str to str
        Nodes of one side and their images on the other; all others are on the axis.

    Returns
    -------
    Fold
        Its circuit has the bias point of the whole one, and its response to signals that are
        equal on both sides.

    Raises
    ------
    UnknownName
        If a node does not exist.
    UsageFault
        If an element has no equal on the other side.

    Examples
    --------
    >>> c = Circuit()
    >>> for side in "pn":
    ...     c.add_resistor(f"r{side}", f"vo{side}", "tail", 2e3)
    >>> c.add_resistor("rt", "tail", "0", 1e3)
    >>> fold = fold_circuit(c, {"vop": "von"})
    >>> fold.circuit.elements
    (Resistor(rp: vop tail, resistance=1000), Resistor(rt: tail 0, resistance=1000))
    >>> fold.nodes["von"], fold.kept
    ('vop', {'rp': 'rn'})
    """
    for node in (*mirror, *mirror.values()):
        if node not in circuit.nodes:
            raise UnknownName(f"the circuit has no node {node}.", hint=advise(node, circuit.nodes))
    image = dict(mirror) | {there: here for here, there in mirror.items()}
    nodes = {node: node for node in circuit.nodes}
    nodes |= {there: here for here, there in mirror.items()}
    folded, kept, across = Circuit(), {}, []
    left = list(circuit.elements)
    while left:
        element = left.pop(0)
        ends = tuple(image.get(node, node) for node in element.nodes)
        if ends == element.nodes:
            folded.add(element)
            continue
        if ends == element.nodes[::-1] and _vanishes(element):
            across.append(element.name)
            continue
        twin = next((other for other in left if _is_image(element, other, ends)), None)
        if twin is None:
            raise UsageFault(
                f"{element.name} ({' '.join(element.nodes)}) has no equal on the other side.",
                hint="Solve the circuit without mirror.",
            )
        left.remove(twin)
        folded.add(_join(element, nodes))
        kept[element.name] = twin.name
        if isinstance(element, Transistor) and isinstance(twin, Transistor):
            nodes |= dict(zip(twin.inner_nodes, element.inner_nodes, strict=True))
    return Fold(folded, nodes, kept, tuple(across))


def _vanishes(element: Element) -> bool:
    """Tell whether an element between the sides carries nothing when they are equal."""
    if isinstance(element, Transistor):
        return False
    driven = [value for key, value in element.values.items() if key in ("voltage", "current")]
    return not any(np.any(value) for value in driven)


def _is_image(element: Element, other: Element, ends: tuple[str, ...]) -> bool:
    same_kind = type(other) is type(element) and other.nodes == ends
    if isinstance(element, Transistor) and isinstance(other, Transistor):
        same_kind = same_kind and (element.device, element.stack) == (other.device, other.stack)
    return same_kind and all(
        bool(np.all(value == other.values[key])) for key, value in element.values.items()
    )


def _join(element: Element, nodes: Mapping[str, str]) -> Element:
    """Move an element to the kept side and let it stand for both."""
    places: dict[str, Any] = {
        key: nodes.get(old, old)
        for key, old in vars(element).items()
        if key in ("plus", "minus", "drain", "gate", "source", "bulk")
    }
    moved = replace(element, **places)
    if isinstance(moved, VoltageSource):
        return moved
    return change_values(
        moved,
        {key: value * _DOUBLED[key] for key, value in moved.values.items() if key in _DOUBLED},
    )
