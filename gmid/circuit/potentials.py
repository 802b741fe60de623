"""Which node voltages are unknown: voltage sources tie nodes together in clusters.

Nodes that voltage sources join have one unknown potential between them, or none where ground
is among them. So a bias point is solved for the free nodes alone.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.circuit import Circuit
from gmid.errors import UsageFault
from gmid.network.stamps import GROUND

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Potentials:
    """Nodes of a circuit and the unknowns their voltages follow from.

    Parameters
    ----------
    nodes : tuple of str
        Nodes, ground last.
    cluster : ndarray of int, shape (n_nodes,)
        Unknown of each node; -1 where its voltage is fixed.
    paths : tuple of tuple
        For each node, the sources between it and the reference of its cluster, with signs.
    names : tuple of str, length n_unknowns
        For each unknown the node at which it is read.

    Examples
    --------
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", 1.8)
    >>> c.add_resistor("r1", "vdd", "out", 1e3)
    >>> find_potentials(c)
    Potentials(unknown: out; fixed: vdd)
    """

    nodes: tuple[str, ...]
    cluster: NDArray[np.intp]
    paths: tuple[tuple[tuple[str, float], ...], ...]
    names: tuple[str, ...]

    @property
    def size(self) -> int:
        """Number of unknowns."""
        return len(self.names)

    def representative(self, node: str) -> str:
        """Name the node whose potential stands for that of a node, ground where it is fixed.

        Parameters
        ----------
        node : str
            Any node.

        Returns
        -------
        str
            A node of the same cluster.

        Examples
        --------
        >>> c = Circuit()
        >>> c.add_voltage_source("vdd", "vdd", "0", 1.8)
        >>> find_potentials(c).representative("vdd")
        '0'
        """
        if node == GROUND:
            return GROUND
        unknown = self.cluster[self.nodes.index(node)]
        return GROUND if unknown < 0 else self.names[unknown]

    def __repr__(self) -> str:
        fixed = [
            node for node, unknown in zip(self.nodes, self.cluster, strict=True)
            if unknown < 0 and node != GROUND
        ]  # fmt: skip
        names, others = ", ".join(self.names) or "none", ", ".join(fixed) or "none"
        return f"Potentials(unknown: {names}; fixed: {others})"


def find_potentials(circuit: Circuit, *, shorted: frozenset[str] | None = None) -> Potentials:
    """Find the clusters of nodes that voltage sources join.

    Parameters
    ----------
    circuit : Circuit
        The circuit.
    shorted : frozenset of str, optional, keyword-only
        Names of the voltage sources that count; all by default.

    Returns
    -------
    Potentials
        Unknowns in the order of the circuit's nodes.

    Raises
    ------
    UsageFault
        If voltage sources form a loop.

    Examples
    --------
    >>> c = Circuit()
    >>> c.add_voltage_source("v1", "a", "b", 0.5)
    >>> c.add_resistor("r1", "b", "0", 1e3)
    >>> find_potentials(c).cluster.tolist()
    [0, 0, -1]
    """
    joined: dict[str, list[tuple[str, str, float]]] = {}
    for source in circuit.voltage_sources:
        if shorted is None or source.name in shorted:
            joined.setdefault(source.minus, []).append((source.plus, source.name, 1.0))
            joined.setdefault(source.plus, []).append((source.minus, source.name, -1.0))
    nodes = (*circuit.nodes, GROUND)
    cluster: dict[str, int] = {}
    paths: dict[str, tuple[tuple[str, float], ...]] = {}
    names: list[str] = []
    for root in (GROUND, *circuit.nodes):
        if root in cluster:
            continue
        label = -1 if root == GROUND else len(names)
        if root != GROUND:
            names.append(root)
        _spread(root, label, joined, cluster, paths)
    order = np.array([cluster[node] for node in nodes], dtype=np.intp)
    return Potentials(nodes, order, tuple(paths[node] for node in nodes), tuple(names))


def _spread(
    root: str,
    label: int,
    joined: dict[str, list[tuple[str, str, float]]],
    cluster: dict[str, int],
    paths: dict[str, tuple[tuple[str, float], ...]],
) -> None:
    """Walk over voltage sources from a node and label all that it reaches."""
    cluster[root], paths[root] = label, ()
    waiting = [(root, "")]
    while waiting:
        node, came_by = waiting.pop()
        for other, source, sign in joined.get(node, []):
            if source == came_by:
                continue
            if other in cluster:
                raise UsageFault(
                    f"voltage source {source} between {node} and {other} closes a loop of "
                    "voltage sources.",
                    hint="Leave one of them out.",
                )
            cluster[other] = label
            paths[other] = (*paths[node], (source, sign))
            waiting.append((other, source))
