"""From a bias point to a linear network: a block for each unit, its noise beside it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.equations import Equations
from gmid.circuit.groups import Indices, take
from gmid.circuit.potentials import find_potentials
from gmid.circuit.stacks import conductance_matrix
from gmid.device.small_signal import SmallSignal
from gmid.network.network import Network
from gmid.network.stamps import GROUND

Array = NDArray[np.float64]


def evaluate_small_signal(
    equations: Equations,
    bias: tuple[Array, Array, Array],
    items: Indices | None = None,
) -> SmallSignal:
    """Read the small-signal values of all units at their bias, counts included.

    Parameters
    ----------
    equations : Equations
        The circuit.
    bias : tuple of ndarray, shape (k, n)
        vgs, vds and vsb of all units [V].
    items : ndarray of int, optional
        Batch items that the bias belongs to.

    Returns
    -------
    SmallSignal
        Arrays of shape (k, n), and (k, n, 4, 4).

    Raises
    ------
    UnknownName
        If a table lacks a conductance, or capacitances of the matrix.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> none = np.zeros((0, 1))
    >>> c = Circuit()
    >>> c.add_resistor("r1", "a", "0", 1e3)
    >>> evaluate_small_signal(Equations(c, {}), (none, none, none)).gm.shape
    (0, 1)
    """
    shape = bias[0].shape
    flat = np.empty((5, *shape))
    matrix = np.empty((*shape, 4, 4))
    for group in equations.groups:
        vgs, vds, vsb = (part[group.units] for part in bias)
        found = group.model.small_signal(vgs, vds, vsb, take(group.which, items))
        parts = (found.gm, found.gds, found.gmb, found.noise_thermal, found.noise_flicker)
        for row, part in enumerate(parts):
            flat[row, group.units] = part
        matrix[group.units] = found.capacitance
    count = take(equations.count, items)
    flat *= count
    matrix *= count[..., None, None]
    gm, gds, gmb, thermal, flicker = flat
    return SmallSignal(gm, gds, gmb, matrix, thermal, flicker)


def build_network(
    equations: Equations,
    bias: tuple[Array, Array, Array],
    *,
    small: SmallSignal | None = None,
    pick: Any = None,
    drives: Sequence[str] | None = None,
    noise: bool = True,
) -> Network:
    """Build the network around a bias point; `Bias.linearise` calls it.

    Parameters
    ----------
    equations : Equations
        The circuit.
    bias : tuple of ndarray, shape (k, n)
        vgs, vds and vsb of all units [V].
    small : SmallSignal, optional, keyword-only
        For all items, where it is known already.
    pick : index, keyword-only
        Items of the batch wanted.
    drives : sequence of str, keyword-only
        Sources that stay; all by default.
    noise : bool, keyword-only
        Whether noise sources are put in.

    Returns
    -------
    Network
        Of the batch that is picked.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> none = np.zeros((0, 1))
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", 1.0)
    >>> c.add_resistor("r1", "vdd", "a", 1e3)
    >>> build_network(Equations(c, {}), (none, none, none), drives=[], noise=False)
    Network(1 node, 1 resistor)
    """
    circuit = equations.circuit
    chosen = np.arange(equations.size).reshape(equations.batch)[() if pick is None else pick]
    items = None if pick is None else np.ravel(chosen)
    shape = np.shape(chosen)
    if small is None:
        small = evaluate_small_signal(equations, tuple_take(bias, items), items)
    for name in drives or ():
        circuit.find(name)
    off = frozenset(
        source.name for source in circuit.voltage_sources
        if drives is not None and source.name not in drives
    )  # fmt: skip
    potentials = find_potentials(circuit, shorted=off)
    node = {name: potentials.representative(name) for name in (*circuit.nodes, GROUND)}
    net = Network()

    def value(array: Array) -> Array:
        flat = equations.flat(array)
        return np.asarray(flat[0] if flat.size == 1 else take(flat, items).reshape(shape))

    _add_passives(net, equations, node, value, noise)
    for voltage in circuit.voltage_sources:
        if voltage.name not in off:
            net.add_voltage_source(voltage.name, node[voltage.plus], node[voltage.minus])
    for current in circuit.current_sources:
        if drives is None or current.name in drives:
            net.add_current_source(current.name, node[current.plus], node[current.minus])
    _add_units(net, equations, small, node, shape, noise)
    return net


def tuple_take(
    bias: tuple[Array, Array, Array], items: Indices | None
) -> tuple[Array, Array, Array]:
    """Take some items of a bias.

    Parameters
    ----------
    bias : tuple of ndarray, shape (k, n)
        vgs, vds and vsb [V].
    items : ndarray of int, or None
        Items wanted; None for all.

    Returns
    -------
    tuple of ndarray
        The same of those items.

    Examples
    --------
    >>> tuple_take((np.zeros((2, 3)),) * 3, np.array([1]))[0].shape
    (2, 1)
    """
    vgs, vds, vsb = (part if items is None else part[:, items] for part in bias)
    return vgs, vds, vsb


def _add_passives(
    net: Network,
    equations: Equations,
    node: dict[str, str],
    value: Callable[[Array], Array],
    noise: bool,
) -> None:
    temperature = value(equations.temperature) if noise else None
    for resistor in equations.circuit.resistors:
        net.add_resistor(
            resistor.name, node[resistor.plus], node[resistor.minus], value(resistor.resistance),
            temperature=temperature,
        )  # fmt: skip
    for capacitor in equations.circuit.capacitors:
        ends = node[capacitor.plus], node[capacitor.minus]
        net.add_capacitor(capacitor.name, *ends, value(capacitor.capacitance))


def _add_units(
    net: Network,
    equations: Equations,
    small: SmallSignal,
    node: dict[str, str],
    shape: tuple[int, ...],
    noise: bool,
) -> None:
    owners = [t.name for t in equations.circuit.transistors for _ in range(t.stack)]
    conductance = conductance_matrix(small.gm, small.gds, small.gmb)
    for k, (unit, owner) in enumerate(zip(equations.units, owners, strict=True)):
        ends = [node[name] for name in (unit.gate, unit.drain, unit.source, unit.bulk)]
        net.add_block(
            unit.name, ends, conductance=conductance[k].reshape(*shape, 4, 4),
            capacitance=small.capacitance[k].reshape(*shape, 4, 4),
        )  # fmt: skip
        if noise and ends[1] != ends[2]:
            net.add_noise(
                f"{unit.name}.channel", ends[1], ends[2], owner=owner,
                white=small.noise_thermal[k].reshape(shape),
                flicker=small.noise_flicker[k].reshape(shape),
            )  # fmt: skip
