"""The bias point of a circuit, for all items of its batch, and what is read from it."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Transistor
from gmid.circuit.equations import Equations
from gmid.circuit.half import build_half
from gmid.circuit.linearise import build_network
from gmid.circuit.newton import search, start_flat
from gmid.circuit.readings import Readings
from gmid.circuit.symmetry import fold_circuit
from gmid.circuit.trouble import refuse_failures
from gmid.condition import Condition
from gmid.device.circuit_device import CircuitDevice
from gmid.errors import UsageFault
from gmid.network.network import Network

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False, repr=False)
class Bias(Readings):
    """Bias points of a circuit, one for each item of its batch; `solve_bias` makes it.

    Values of an item without a solution are not-a-number.

    Parameters
    ----------
    equations : Equations
        The circuit with its devices.
    found : Search
        Where Newton's method ended.
    fold : Fold, optional
        The two sides, where only one was solved.
    joined : Bias, optional
        That of the circuit with both sides joined, which was solved in place of the whole.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> c = Circuit()
    >>> c.add_current_source("iref", "0", "g", [1e-6, 4e-6])
    >>> c.add_transistor("m1", "nmos", polarity="n", drain="g", gate="g", source="0", bulk="0",
    ...                  length=1e-6, count=[1, 4])
    >>> solve_bias(c, {"nmos": Device(example_sweep())}).voltage("g").round(4)
    array([0.433, 0.433])
    """

    @property
    def conditions(self) -> tuple[Condition, ...]:
        """Corners and temperatures of the devices; empty for a circuit without transistors."""
        return self.equations.conditions

    @property
    def steps(self) -> NDArray[np.intp]:
        """Newton steps taken, shape (...)."""
        return self.found.steps.reshape(self.batch)

    @property
    def ramped(self) -> NDArray[np.bool_]:
        """Where plain Newton did not do and the fallback was used, shape (...)."""
        return self.found.ramped.reshape(self.batch)

    def point(self, name: str) -> dict[str, Any]:
        """Give all of an instance's bias point.

        Parameters
        ----------
        name : str
            The transistor.

        Returns
        -------
        dict
            ``name role device length width count stack id vgs vds vsb gm gds gmb gm_over_id``, with
            vdsat in the table also ``vdsat headroom region``; arrays of shape (...) in SI.
        """
        transistor = self.circuit.find(name)
        rows: Sequence[Callable[[str], Array]] = (
            self.id, self.vgs, self.vds, self.vsb, self.gm, self.gds, self.gmb, self.gm_over_id,
        )  # fmt: skip
        found: dict[str, Any] = {read.__name__: read(name) for read in rows}
        assert isinstance(transistor, Transistor)
        device = self.devices[transistor.device]
        if "vdsat" in device.fields:
            found |= {"vdsat": self.vdsat(name), "headroom": self.headroom(name)}
            found["region"] = np.where(found["headroom"] >= 0, "saturation", "triode")[()]
        return {
            "name": name, "role": transistor.role, "device": transistor.device,
            "length": transistor.length[()], "width": transistor.count * device.unit.width,
            "count": transistor.count[()], "stack": transistor.stack, **found,
        }  # fmt: skip

    def require(self) -> Bias:
        """Insist on a solution inside the tables for every item.

        Returns
        -------
        Bias
            Itself.

        Raises
        ------
        NoSolution
            If an item has none; condition, item and node are named.
        OutOfReach
            If a solution lies outside a table; instance, axis and condition are named.
        """
        refuse_failures(self.equations, self.found, self._bias)
        return self

    def pick_condition(self, k: int, devices: Mapping[str, CircuitDevice]) -> Bias:
        """Give the part of a joint solution that belongs to one condition.

        Parameters
        ----------
        k : int
            Place on the first axis, which is that of the conditions.
        devices : mapping of str to Device
            The devices in that condition.

        Returns
        -------
        Bias
            Without the first axis.

        Raises
        ------
        UsageFault
            If the circuit's own values differ along the first axis.
        """
        rest = self.batch[1:]
        if np.broadcast_shapes(self.circuit.batch, rest) != rest:
            raise UsageFault("the circuit itself differs from one condition to the next.")
        equations = Equations(self.circuit, devices, batch=rest)
        joined = None
        if isinstance(self.joined, Bias):
            joined = self.joined.pick_condition(k, devices)
        items = np.arange(self.equations.size).reshape(self.batch)[k].ravel()
        return Bias(equations, self.found.take(items), self.fold, joined)

    def take_last(self, index: NDArray[np.intp], devices: Mapping[str, CircuitDevice]) -> Bias:
        """Give the bias of some places on the last axis of the batch.

        Parameters
        ----------
        index : ndarray of int, shape (k,)
            The places.
        devices : mapping of str to Device or JointDevice
            The same devices, for those places.

        Returns
        -------
        Bias
            What was read from this one already is not read again.
        """
        items = np.arange(self.equations.size).reshape(self.batch)[..., index].ravel()
        joined = None
        if isinstance(self.joined, Bias):
            joined = self.joined.take_last(index, devices)
        other = Bias(
            self.equations.take_last(index, devices), self.found.take(items), self.fold, joined
        )
        for name in ("_everything", "_id", "_vdsat"):
            if name in self.__dict__:
                other.__dict__[name] = self.__dict__[name][:, items]
        return other

    def linearise(
        self, pick: Any = None, *, drives: Sequence[str] | None = None, noise: bool = True
    ) -> Network:
        """Make the linear network around the bias point.

        Parameters
        ----------
        pick : index, optional
            Items of the batch, in any way that indexes an array of its shape: a mask such as
            `inside`, a number, a slice. All by default, those without a solution too.
        drives : sequence of str, keyword-only
            Sources that stay in the network; all by default. Others are turned off, which makes
            the network smaller: nodes that voltage sources join become the first of them, or
            ground.
        noise : bool, keyword-only
            Whether noise sources are put in, each with the instance as its owner.

        Returns
        -------
        Network
            With each unit as a block of its conductances and its whole capacitance matrix.
        """
        small = self._small_signal if pick is None else None
        return build_network(
            self.equations, self._bias, small=small, pick=pick, drives=drives, noise=noise
        )

    def linearise_half(
        self, pick: Any = None, *, drives: Sequence[str] = (), noise: bool = True
    ) -> Network:
        """Make the half circuit that differential signals see, of a bias solved with `mirror`.

        Parameters
        ----------
        pick : index, optional
            Items of the batch, as in `linearise`.
        drives : sequence of str, keyword-only
            Sources that stay: of the kept side, or between a node and its image, which then
            drives the kept side with all of its strength.
        noise : bool, keyword-only
            Whether noise sources are put in.

        Returns
        -------
        Network
            With the nodes of the kept side. Gains in it are differential gains; the differential
            noise density [V^2/Hz] is twice that of a node.

        Raises
        ------
        UsageFault
            If the bias was not solved with `mirror`, or a source cannot drive.
        """
        if self.fold is None:
            raise UsageFault("a half circuit needs two sides.", hint="Give mirror= to solve_bias.")
        return build_half(
            self.equations, self.fold, self._small_signal, pick=pick, drives=drives, noise=noise
        )

    def join_sides(self) -> Bias:
        """Give the bias of the circuit with both sides joined, of a bias solved with `mirror`.

        Returns
        -------
        Bias
            Of `fold.circuit`. Its network is what signals see that are equal on both sides: what
            is there twice has twice the admittance, and a source carries the current of both.

        Raises
        ------
        UsageFault
            If the bias was not solved with `mirror`.
        """
        if not isinstance(self.joined, Bias):
            raise UsageFault("only two sides can be joined.", hint="Give mirror= to solve_bias.")
        return self.joined

    def __repr__(self) -> str:
        good = int(self.found.converged.sum())
        where = f" in {', '.join(map(str, self.conditions))}" if self.conditions else ""
        return f"Bias({self.circuit!r}{where}; {good} of {self.equations.size} solved)"


def solve_bias(
    circuit: Circuit,
    devices: Mapping[str, CircuitDevice],
    *,
    start: Bias | Mapping[str, Array] | None = None,
    mirror: Mapping[str, str] | None = None,
) -> Bias:
    """Find the bias points of a circuit, all items of its batch at once.

    Parameters
    ----------
    circuit : Circuit
        Its values may have leading axes.
    devices : mapping of str to Device or JointDevice
        The devices that it uses, all in one condition, or all in the same ones.
    start : Bias or mapping of str to ndarray, keyword-only
        Node voltages to begin from [V], such as those of a similar circuit; nodes that it lacks
        begin in the middle of the supply.
    mirror : mapping of str to str, keyword-only
        For a circuit of two equal sides: nodes of one and their images on the other. Only one
        side is then solved, which takes half the time.

    Returns
    -------
    Bias
        Failures are marked there; `Bias.require` makes errors of them.

    Raises
    ------
    UnknownName
        If a device is missing.
    UsageFault
        If the circuit or the devices do not fit together.
    OutOfReach
        If a length lies outside a table.
    NoSolution
        If nothing that conducts leads to a node.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", 1.8)
    >>> c.add_resistor("r1", "vdd", "out", 100e3)
    >>> c.add_transistor("m1", "nmos", polarity="n", drain="out", gate="out", source="0",
    ...                  bulk="0", length=1e-6, count=2)
    >>> bias = solve_bias(c, {"nmos": Device(example_sweep())})
    >>> float(bias.voltage("out").round(4)), bool(bias.converged)
    (0.5556, True)
    """
    given = start.voltages if isinstance(start, Bias) else start
    equations = Equations(circuit, devices)
    if mirror is None:
        return Bias(equations, search(equations, _place_start(equations, given)))
    fold = fold_circuit(circuit, mirror)
    half = Equations(fold.circuit, devices, batch=equations.batch)
    found = search(half, _place_start(half, given))
    rows = half.voltages(found.unknown)
    nodes = [half.index[fold.nodes[node]] for node in equations.potentials.names]
    return Bias(equations, replace(found, unknown=rows[nodes]), fold, Bias(half, found))


def _place_start(equations: Equations, start: Mapping[str, Array] | None) -> Array | None:
    """Lay a start out on the unknowns; not-a-number takes the flat start."""
    if start is None:
        return None
    x = start_flat(equations)
    for k, node in enumerate(equations.potentials.names):
        if node in start:
            row = np.broadcast_to(start[node], equations.batch).reshape(-1)
            x[k] = np.where(np.isfinite(row), row, x[k])
    return x
