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
from gmid.device.device import Device
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

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> c = Circuit()
    >>> c.add_current_source("iref", "0", "g", [1e-6, 4e-6])
    >>> c.add_transistor("m1", "nmos", polarity="n", drain="g", gate="g", source="0", bulk="0",
    ...                  length=1e-6, count=[1, 4])
    >>> solve_bias(c, {"nmos": Device(example_sweep())}).voltage("g").round(4)
    array([0.433, 0.433])
    """

    @property
    def condition(self) -> Condition | None:
        """Corner and temperature; None for a circuit without transistors."""
        return self.equations.condition

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
        if "vdsat" in device.sweep:
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

    def __repr__(self) -> str:
        good = int(self.found.converged.sum())
        where = f" in {self.condition}" if self.condition else ""
        return f"Bias({self.circuit!r}{where}; {good} of {self.equations.size} solved)"


def solve_bias(
    circuit: Circuit,
    devices: Mapping[str, Device],
    *,
    start: Bias | Mapping[str, Array] | None = None,
    mirror: Mapping[str, str] | None = None,
) -> Bias:
    """Find the bias points of a circuit, all items of its batch at once.

    Parameters
    ----------
    circuit : Circuit
        Its values may have leading axes.
    devices : mapping of str to Device
        The devices that it uses, all in one condition.
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
    return Bias(equations, replace(found, unknown=rows[nodes]), fold)


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
