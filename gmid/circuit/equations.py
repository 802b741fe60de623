"""The equations of a circuit's bias point: currents at the free nodes and their derivatives.

Everything runs over one flat batch axis, which comes last; a value that is the same for all
items has length 1 there.
"""

from __future__ import annotations

import copy
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Element, Transistor
from gmid.circuit.groups import Group, Indices, Number, group_units, settle_conditions, take
from gmid.circuit.potentials import Potentials, find_potentials
from gmid.circuit.scatter import Scatter, list_currents, list_slopes
from gmid.condition import Condition
from gmid.device.circuit_device import CircuitDevice
from gmid.errors import NoSolution

Array = NDArray[np.float64]


class Equations:
    """Kirchhoff's current law at the free nodes of a circuit.

    Parameters
    ----------
    circuit : Circuit
        The circuit.
    devices : mapping of str to Device or JointDevice
        At least those that the circuit uses, all in one condition, or all in the same ones.
    batch : tuple of int, optional, keyword-only
        Leading axes, where there are more than those of the circuit's values and of the
        devices' places.

    Raises
    ------
    UnknownName
        If a device is missing.
    UsageFault
        If a device has the other polarity, conditions differ, or voltage sources form a loop.
    OutOfReach
        If a length lies outside its table.

    Examples
    --------
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", 1.8)
    >>> c.add_resistor("r1", "vdd", "out", 1e3)
    >>> c.add_resistor("r2", "out", "0", 1e3)
    >>> equations = Equations(c, {})
    >>> float(equations.residual(equations.voltages(np.array([[0.8]])))[0, 0].round(9))
    -0.0002
    """

    def __init__(
        self, circuit: Circuit, devices: Mapping[str, CircuitDevice], *,
        batch: tuple[int, ...] | None = None,
    ) -> None:  # fmt: skip
        self.circuit = circuit
        self.conditions, self.place = settle_conditions(circuit, devices)
        own = np.broadcast_shapes(circuit.batch, self.place.shape)
        self.batch = own if batch is None else batch
        self.size = int(np.prod(self.batch))
        self.potentials: Potentials = find_potentials(circuit)
        self.units: tuple[Transistor, ...] = tuple(
            unit for transistor in circuit.transistors for unit in transistor.units
        )
        index = {node: k for k, node in enumerate(self.potentials.nodes)}
        self.index = index
        self.terminals: Indices = np.array(
            [[index[node] for node in unit.nodes] for unit in self.units], dtype=np.intp
        ).reshape(-1, 4)
        self.sign: Array = np.array([unit.sign for unit in self.units])[:, None]
        self.count = self._rows(self.units, "count")
        self.groups = tuple(self._group(devices))
        self.offset = self._offsets()
        self.conductance = 1.0 / self._rows(circuit.resistors, "resistance")
        self.capacitors = self._rows(circuit.capacitors, "capacitance")
        self.forced = self._rows(circuit.current_sources, "current")

    @property
    def temperature(self) -> Array:
        """Temperature of the devices, of shape (...); 27 without any [degC]."""
        if not self.conditions:
            return np.array(27.0)
        return np.array([one.temperature for one in self.conditions])[self.place]

    def condition_of(self, item: int) -> Condition | None:
        """Tell in which condition an item of the batch is.

        Parameters
        ----------
        item : int
            Place on the flat batch axis.

        Returns
        -------
        Condition or None
            None without transistors.
        """
        if not self.conditions:
            return None
        return self.conditions[int(np.broadcast_to(self.place, self.batch).ravel()[item])]

    def take_last(self, index: Indices, devices: Mapping[str, CircuitDevice]) -> Equations:
        """Give the equations of some places on the last axis of the batch.

        Parameters
        ----------
        index : ndarray of int, shape (k,)
            The places.
        devices : mapping of str to Device or JointDevice
            The same devices, for those places.

        Returns
        -------
        Equations
            Others; what is common to both is shared.
        """
        items = np.arange(self.size).reshape(self.batch)[..., index].ravel()
        other = copy.copy(self)
        other.circuit = self.circuit.take_last(index, self.batch[-1])
        other.batch, other.size = (*self.batch[:-1], index.size), items.size
        for name in ("count", "offset", "conductance", "capacitors", "forced"):
            setattr(other, name, take(getattr(self, name), items))
        other.groups = tuple(
            replace(one, device=devices[one.device.name], which=take(one.which, items))
            for one in self.groups
        )
        for group in other.groups:
            other.place = group.device.place
        return other

    @cached_property
    def rows(self) -> dict[str, tuple[int, int]]:
        """First and last unit of each transistor."""
        found, first = {}, 0
        for transistor in self.circuit.transistors:
            found[transistor.name] = (first, first + transistor.stack - 1)
            first += transistor.stack
        return found

    def flat(self, values: NDArray[Number]) -> NDArray[Number]:
        """Lay leading axes out on the one batch axis.

        Parameters
        ----------
        values : ndarray, shape (...)
            Broadcasts with the batch.

        Returns
        -------
        ndarray, shape (n,) or (1,)
            Length 1 where the value has no axes or only one item.
        """
        if np.size(values) == 1:
            return np.reshape(values, 1)
        return np.broadcast_to(values, self.batch).reshape(-1)

    def _rows(self, elements: Sequence[Element], name: str) -> Array:
        rows = [self.flat(element.values[name]) for element in elements]
        if not rows:
            return np.zeros((0, 1))
        wide = max(row.size for row in rows)
        return np.stack([np.broadcast_to(row, wide) for row in rows])

    def _group(self, devices: Mapping[str, CircuitDevice]) -> Iterator[Group]:
        """Check the polarities and settle the lengths of each device."""
        for name in self.circuit.devices:
            members = [k for k, unit in enumerate(self.units) if unit.device == name]
            ours = [self.units[k] for k in members]
            yield group_units(
                devices[name], ours, np.array(members, dtype=np.intp),
                self._rows(ours, "length"), self.flat(devices[name].place),
            )  # fmt: skip

    def _offsets(self) -> Array:
        values = {s.name: self.flat(s.voltage) for s in self.circuit.voltage_sources}
        wide = max((value.size for value in values.values()), default=1)
        rows = [
            np.broadcast_to(sum((sign * values[name] for name, sign in path), np.zeros(1)), wide)
            for path in self.potentials.paths
        ]
        return np.stack(rows)

    @cached_property
    def _ends(self) -> Indices:
        """Nodes of the resistors, shape (2, r)."""
        ends = [[self.index[node] for node in r.nodes] for r in self.circuit.resistors]
        return np.array(ends, dtype=np.intp).reshape(-1, 2).T

    @cached_property
    def _meet(self) -> Scatter:
        cluster = self.potentials.cluster
        terms = [
            (int(cluster[node]), row, w) for node, row, w in list_currents(self.circuit, self.index)
        ]
        return Scatter.of(self.potentials.size, terms)

    @cached_property
    def _meet_nodes(self) -> Scatter:
        return Scatter.of(len(self.potentials.nodes), list_currents(self.circuit, self.index))

    @cached_property
    def _slopes(self) -> Scatter:
        cluster, m = self.potentials.cluster.tolist(), self.potentials.size
        terms = [
            (cluster[node] * m + cluster[other] if min(cluster[node], cluster[other]) >= 0 else -1,
             row, weight)
            for node, other, row, weight in list_slopes(self.circuit, self.index)
        ]  # fmt: skip
        return Scatter.of(m * m, terms)

    def refuse_loose(self) -> None:
        """Make sure that something that conducts leads to each unknown.

        Raises
        ------
        NoSolution
            Naming the nodes.
        """
        m = self.potentials.size
        reached = np.zeros((m, m), dtype=bool)
        reached.ravel()[self._slopes.targets] = True
        loose = [self.potentials.names[k] for k in np.flatnonzero(~np.diagonal(reached))]
        if loose:
            raise NoSolution(
                f"nothing sets the voltage of {', '.join(loose)}.",
                hint="Give it a resistor, a channel or a source that conducts.",
            )

    def voltages(self, unknown: Array, items: Indices | None = None) -> Array:
        """Give all node voltages.

        Parameters
        ----------
        unknown : ndarray, shape (m, n)
            Potentials of the unknowns [V].
        items : ndarray of int, shape (n,), optional
            Batch items they belong to.

        Returns
        -------
        ndarray, shape (n_nodes, n)
            [V], ground last.
        """
        extended = np.concatenate([unknown, np.zeros((1, unknown.shape[1]))])
        return np.asarray(extended[self.potentials.cluster] + take(self.offset, items))

    def biases(self, voltages: Array) -> tuple[Array, Array, Array]:
        """Give vgs, vds and vsb of all units, as magnitudes for a p-channel.

        Parameters
        ----------
        voltages : ndarray, shape (n_nodes, n)
            [V].

        Returns
        -------
        vgs, vds, vsb : ndarray, shape (k, n)
            [V].
        """
        drain, gate, source, bulk = voltages[self.terminals.T]
        return (
            self.sign * (gate - source), self.sign * (drain - source), self.sign * (source - bulk),
        )  # fmt: skip

    def currents(self, voltages: Array, items: Indices | None = None) -> tuple[Array, Array]:
        """Evaluate the drain currents of all units and their derivatives.

        Parameters
        ----------
        voltages : ndarray, shape (n_nodes, n)
            [V].
        items : ndarray of int, shape (n,), optional
            Batch items they belong to.

        Returns
        -------
        id : ndarray, shape (k, n)
            Magnitudes [A], counts included.
        slopes : ndarray, shape (3, k, n)
            By vgs, vds and vsb [S].
        """
        bias = self.biases(voltages)
        found = np.empty((4, len(self.units), voltages.shape[1]))
        for group in self.groups:
            here = [part[group.units] for part in bias]
            which = take(group.which, items)
            answer = group.model.current_and_derivatives(here[0], here[1], here[2], which)
            for row, part in enumerate(answer[:4]):
                found[row, group.units] = part
        found *= take(self.count, items)
        return found[0], found[1:]

    def _all_currents(self, voltages: Array, id: Array, items: Indices | None) -> Array:
        n = voltages.shape[1]
        plus, minus = self._ends
        through = take(self.conductance, items) * (voltages[plus] - voltages[minus])
        forced = np.broadcast_to(take(self.forced, items), (self.forced.shape[0], n))
        return np.concatenate([id, through, forced])

    def residual(
        self, voltages: Array, items: Indices | None = None, *, nodes: bool = False
    ) -> Array:
        """Add up the currents that leave each free cluster of nodes, or each node.

        Parameters
        ----------
        voltages : ndarray, shape (n_nodes, n)
            [V].
        items : ndarray of int, shape (n,), optional
            Batch items they belong to.
        nodes : bool, keyword-only
            Whether node by node, what flows into voltage sources left out.

        Returns
        -------
        ndarray, shape (m, n) or (n_nodes, n)
            [A].
        """
        id, _ = self.currents(voltages, items)
        meet = self._meet_nodes if nodes else self._meet
        return meet(self._all_currents(voltages, id, items))

    def linearise(self, voltages: Array, items: Indices | None = None) -> tuple[Array, Array]:
        """Evaluate the residual and its Jacobian matrix.

        Parameters
        ----------
        voltages : ndarray, shape (n_nodes, n)
            [V].
        items : ndarray of int, shape (n,), optional
            Batch items they belong to.

        Returns
        -------
        residual : ndarray, shape (n, m)
            [A].
        jacobian : ndarray, shape (n, m, m)
            [S].
        """
        n, m = voltages.shape[1], self.potentials.size
        id, slopes = self.currents(voltages, items)
        leaving = self._meet(self._all_currents(voltages, id, items))
        fixed = np.broadcast_to(take(self.conductance, items), (self.conductance.shape[0], n))
        rows = np.concatenate([slopes.reshape(-1, n), fixed])
        matrix = self._slopes(rows)
        return leaving.T, np.ascontiguousarray(matrix.T).reshape(n, m, m)

    def source_currents(self, voltages: Array) -> dict[str, Array]:
        """Give the currents through the voltage sources, from plus to minus.

        Parameters
        ----------
        voltages : ndarray, shape (n_nodes, n)
            [V], at a solution.

        Returns
        -------
        dict of str to ndarray, shape (n,)
            [A]; negative where a source delivers power.
        """
        sources = self.circuit.voltage_sources
        incidence = np.zeros((len(self.potentials.nodes), len(sources)))
        for column, source in enumerate(sources):
            incidence[self.index[source.plus], column] = 1.0
            incidence[self.index[source.minus], column] = -1.0
        leaving = self.residual(voltages, nodes=True)
        found = -np.linalg.pinv(incidence[:-1]) @ leaving[:-1]
        return {source.name: found[k] for k, source in enumerate(sources)}
