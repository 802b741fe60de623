"""Currents at given node voltages, which need be no bias point: for slewing and swing."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.circuit.circuit import Circuit
from gmid.circuit.equations import Equations
from gmid.circuit.trouble import check_reach
from gmid.device.device import Device
from gmid.errors import UnknownName, UsageFault, advise
from gmid.network.stamps import GROUND

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Flow:
    """Currents of a circuit whose node voltages are given.

    Parameters
    ----------
    id : dict of str to ndarray, shape (...)
        Drain current of each transistor, of the unit at the drain of a stack, a magnitude for a
        p-channel [A].
    leaving : dict of str to ndarray, shape (...)
        Sum of the currents that leave each node through transistors, resistors and current
        sources [A]; capacitors and voltage sources have to bring it.
    inside : ndarray of bool, shape (...)
        Where the tables cover all transistors.

    Examples
    --------
    >>> Flow({"m1": np.array(1e-6)}, {"out": np.array(1e-6)}, np.array(True))
    Flow(m1; nodes out)
    """

    id: dict[str, Array]
    leaving: dict[str, Array]
    inside: NDArray[np.bool_]

    def __repr__(self) -> str:
        return f"Flow({', '.join(self.id)}; nodes {', '.join(self.leaving)})"


def evaluate(
    circuit: Circuit, devices: Mapping[str, Device], voltages: Mapping[str, ArrayLike]
) -> Flow:
    """Evaluate the currents at given node voltages.

    Parameters
    ----------
    circuit : Circuit
        Its voltage sources need not be obeyed.
    devices : mapping of str to Device
        The devices that it uses, all in one condition.
    voltages : mapping of str to array_like, shape (...)
        Of every node [V], those inside stacks too; leading axes broadcast with the circuit's.

    Returns
    -------
    Flow
        Currents.

    Raises
    ------
    UnknownName
        If a node is unknown.
    UsageFault
        If one is missing.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> c = Circuit()
    >>> c.add_transistor("m1", "nmos", polarity="n", drain="d", gate="g", source="0", bulk="0",
    ...                  length=1e-6, count=2)
    >>> flow = evaluate(c, {"nmos": Device(example_sweep())}, {"d": 0.9, "g": [0.4, 0.5, 0.6]})
    >>> (flow.id["m1"] * 1e6).round(3)
    array([ 1.048,  6.236, 19.944])
    """
    for node in voltages:
        if node not in circuit.nodes:
            raise UnknownName(f"the circuit has no node {node}.", hint=advise(node, circuit.nodes))
    missing = [node for node in circuit.nodes if node not in voltages]
    if missing:
        raise UsageFault(f"there is no voltage for {', '.join(missing)}.")
    arrays = {node: np.asarray(value, dtype=np.float64) for node, value in voltages.items()}
    batch = np.broadcast_shapes(circuit.batch, *(value.shape for value in arrays.values()))
    equations = Equations(circuit, devices, batch=batch)
    arrays[GROUND] = np.zeros(())
    rows = np.stack(
        [np.broadcast_to(arrays[node], batch).reshape(-1) for node in equations.potentials.nodes]
    )
    id, _ = equations.currents(rows)
    leaving = equations.residual(rows, nodes=True)
    return Flow(
        {name: id[first].reshape(batch)[()] for name, (first, _) in equations.rows.items()},
        {node: leaving[equations.index[node]].reshape(batch)[()] for node in circuit.nodes},
        np.asarray(check_reach(equations, equations.biases(rows)).all(axis=0).reshape(batch)),
    )
