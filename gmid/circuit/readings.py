"""What is read from a bias point: node voltages, source currents, and each instance's values."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Transistor, VoltageSource
from gmid.circuit.equations import Equations
from gmid.circuit.groups import Indices
from gmid.circuit.linearise import evaluate_small_signal
from gmid.circuit.newton import Search
from gmid.circuit.stacks import combine_stack
from gmid.circuit.symmetry import Fold
from gmid.circuit.trouble import check_reach
from gmid.device.circuit_device import CircuitDevice
from gmid.device.small_signal import SmallSignal
from gmid.errors import UnknownName, UsageFault, advise

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Readings:
    """Solved equations and what follows from them; the base of `gmid.circuit.bias.Bias`.

    Parameters
    ----------
    equations : Equations
        The circuit with its devices.
    found : Search
        Where Newton's method ended.
    fold : Fold, optional
        The two sides, where only one was solved.
    joined : Readings, optional
        Of the circuit with both sides joined, which was solved in place of the whole.

    Examples
    --------
    >>> from gmid.circuit.newton import search
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", 1.8)
    >>> c.add_resistor("r1", "vdd", "0", 1e6)
    >>> equations = Equations(c, {})
    >>> Readings(equations, search(equations)).source_current("vdd").round(9)
    np.float64(-1.8e-06)
    """

    equations: Equations
    found: Search
    fold: Fold | None = None
    joined: Readings | None = None

    @property
    def circuit(self) -> Circuit:
        """The circuit."""
        return self.equations.circuit

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes of all that is read."""
        return self.equations.batch

    @property
    def devices(self) -> dict[str, CircuitDevice]:
        """Devices in use."""
        return {group.device.name: group.device for group in self.equations.groups}

    @property
    def converged(self) -> NDArray[np.bool_]:
        """Which items have a solution, shape (...)."""
        return self.found.converged.reshape(self.batch)

    @cached_property
    def inside(self) -> NDArray[np.bool_]:
        """Where there is a solution and the tables cover all of it, shape (...)."""
        covered = check_reach(self.equations, self._bias).all(axis=0)
        return np.asarray(covered & self.found.converged).reshape(self.batch)

    @cached_property
    def _everything(self) -> Array:
        return self.equations.voltages(self.found.unknown)

    @cached_property
    def _bias(self) -> tuple[Array, Array, Array]:
        return self.equations.biases(self._everything)

    @cached_property
    def _id(self) -> Array:
        if self._twins is not None and self.joined is not None:
            rows, share = self._twins
            return np.asarray(self.joined._id[rows] * share[:, None])
        return self.equations.currents(self._everything)[0]

    @cached_property
    def _small_signal(self) -> SmallSignal:
        if self._twins is not None and self.joined is not None:
            return self.joined._small_signal.take(*self._twins)
        return evaluate_small_signal(self.equations, self._bias)

    @cached_property
    def _twins(self) -> tuple[Indices, Array] | None:
        """For each unit that of the joined circuit, and its share of that one's current."""
        if self.fold is None or self.joined is None:
            return None
        return self.fold.find_twins(self.equations.rows, self.joined.equations.rows)

    @cached_property
    def _vdsat(self) -> Array:
        if self._twins is not None and self.joined is not None:
            return np.asarray(self.joined._vdsat[self._twins[0]])
        found = np.empty((len(self.equations.units), self.equations.size))
        for group in self.equations.groups:
            vgs, vds, vsb = (part[group.units] for part in self._bias)
            found[group.units] = group.model.vdsat(vgs, vds, vsb, group.which)
        return found

    def _shown(self, values: Array) -> Array:
        wide = np.broadcast_to(values, (self.equations.size,))
        return np.where(self.found.converged, wide, np.nan).reshape(self.batch)[()]

    def voltage(self, node: str, reference: str = "0") -> Array:
        """Give a node voltage.

        Parameters
        ----------
        node, reference : str
            Nodes; those inside the stack of ``m1`` are ``m1_1`` and so on from the drain.

        Returns
        -------
        ndarray, shape (...)
            [V].

        Raises
        ------
        UnknownName
            If there is no such node.
        """
        index = self.equations.index
        for name in (node, reference):
            if name not in index:
                raise UnknownName(
                    f"the circuit has no node {name}.", hint=advise(name, self.circuit.nodes)
                )
        rows = self._everything
        return self._shown(rows[index[node]] - rows[index[reference]])

    @property
    def voltages(self) -> dict[str, Array]:
        """Voltages of all nodes, each of shape (...) [V]."""
        rows = self._everything
        return {
            node: self._shown(row)
            for node, row in zip(self.equations.potentials.nodes[:-1], rows, strict=False)
        }

    @cached_property
    def _source_currents(self) -> dict[str, Array]:
        return self.equations.source_currents(self._everything)

    def source_current(self, name: str) -> Array:
        """Give the current through a voltage source, from its plus to its minus node.

        Parameters
        ----------
        name : str
            The source.

        Returns
        -------
        ndarray, shape (...)
            [A]; negative where it delivers power, as simulators have it.

        Raises
        ------
        UsageFault
            If it is no voltage source.
        """
        if not isinstance(self.circuit.find(name), VoltageSource):
            raise UsageFault(f"{name} is no voltage source.")
        return self._shown(self._source_currents[name])

    def _rows_of(self, name: str) -> tuple[int, int]:
        """Find first and last unit of an instance."""
        transistor = self.circuit.find(name)
        if not isinstance(transistor, Transistor):
            raise UsageFault(f"{name} is no transistor.")
        return self.equations.rows[name]

    def id(self, name: str) -> Array:
        """Give the drain current of an instance, a magnitude for a p-channel.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            [A].
        """
        return self._shown(self._id[self._rows_of(name)[1]])

    def vgs(self, name: str) -> Array:
        """Give the gate-source voltage of an instance, from the source end of a stack.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            Magnitude [V].
        """
        return self._shown(self._bias[0][self._rows_of(name)[1]])

    def vds(self, name: str) -> Array:
        """Give the drain-source voltage of an instance, across all of a stack.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            Magnitude [V].
        """
        first, last = self._rows_of(name)
        return self._shown(self._bias[1][first : last + 1].sum(axis=0))

    def vsb(self, name: str) -> Array:
        """Give the source-bulk voltage of an instance, at the source end of a stack.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            [V], positive in reverse.
        """
        return self._shown(self._bias[2][self._rows_of(name)[1]])

    def vdsat(self, name: str) -> Array:
        """Give the edge of saturation of an instance.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            [V]; of a stack, the vds at which the unit at its drain comes to its edge.
        """
        first, last = self._rows_of(name)
        below = self._bias[1][first + 1 : last + 1].sum(axis=0)
        return self._shown(self._vdsat[first] + below)

    def gm_over_id(self, name: str) -> Array:
        """Give the transconductance efficiency of an instance.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            [1/V].
        """
        return np.asarray(self.gm(name) / self.id(name))

    def headroom(self, name: str) -> Array:
        """Give the distance of an instance from the edge of saturation.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            vds less vdsat [V]; of a stack, that of the unit at its drain.
        """
        return np.asarray(self.vds(name) - self.vdsat(name))

    def _conductances(self, name: str) -> Array:
        first, last = self._rows_of(name)
        small = self._small_signal
        rows = slice(first, last + 1)
        return combine_stack(list(small.gm[rows]), list(small.gds[rows]), list(small.gmb[rows]))

    def gm(self, name: str) -> Array:
        """Give the transconductance of an instance.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            [S]; of a stack, that of the whole.
        """
        return self._shown(self._conductances(name)[0])

    def gds(self, name: str) -> Array:
        """Give the output conductance of an instance.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            [S]; of a stack, that of the whole.
        """
        return self._shown(self._conductances(name)[1])

    def gmb(self, name: str) -> Array:
        """Give the body transconductance of an instance.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        ndarray, shape (...)
            [S]; of a stack, that of the whole.
        """
        return self._shown(self._conductances(name)[2])

    def capacitance(self, name: str) -> Array:
        """Give the capacitance matrix of an instance.

        Parameters
        ----------
        name : str
            A transistor that is no stack, or one unit of a stack, such as ``m1_2``.

        Returns
        -------
        ndarray, shape (..., 4, 4)
            dQi/dVj [F], true signs, in the order gate, drain, source, bulk.

        Raises
        ------
        UnknownName
            If there is no such unit.
        """
        names = [unit.name for unit in self.equations.units]
        if name not in names:
            raise UnknownName(f"there is no unit {name}.", hint=advise(name, names))
        matrix: Array = self._small_signal.capacitance[names.index(name)]
        return matrix.reshape(*self.batch, 4, 4)
