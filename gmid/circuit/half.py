"""The half circuit that a differential signal sees, around the bias point of two equal sides.

The axis is at ground; a terminal on the other side carries the opposite voltage. Gains are those
of differential signals; a differential noise density [V^2/Hz] is twice the one found here.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.elements import Element
from gmid.circuit.equations import Equations
from gmid.circuit.groups import take
from gmid.circuit.potentials import find_potentials
from gmid.circuit.stacks import conductance_matrix
from gmid.circuit.symmetry import Fold
from gmid.device.small_signal import SmallSignal
from gmid.errors import UsageFault
from gmid.network.network import Network
from gmid.network.stamps import GROUND

Array = NDArray[np.float64]
Place = tuple[str, int]
"""A node of the half circuit and the sign with which a terminal is wired to it."""


def build_half(
    equations: Equations,
    fold: Fold,
    small: SmallSignal,
    *,
    pick: Any = None,
    drives: Sequence[str] = (),
    noise: bool = True,
) -> Network:
    """Build the differential half circuit; `Bias.linearise_half` calls it.

    Parameters
    ----------
    equations : Equations
        The whole circuit.
    fold : Fold
        Its two sides.
    small : SmallSignal
        Of all units and all items.
    pick : index, keyword-only
        Items of the batch wanted.
    drives : sequence of str, keyword-only
        Sources of the kept side, or across, that stay.
    noise : bool, keyword-only
        Whether noise sources are put in.

    Returns
    -------
    Network
        Of the kept side.

    Raises
    ------
    UsageFault
        If a source cannot drive a half circuit.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> from gmid.circuit.linearise import evaluate_small_signal
    >>> from gmid.circuit.symmetry import fold_circuit
    >>> c = Circuit()
    >>> c.add_voltage_source("vid", "ip", "in", 0.0)
    >>> for side, other in ("pn", "np"):
    ...     c.add_resistor(f"r{side}", f"i{side}", f"o{side}", 1e3)
    ...     c.add_resistor(f"t{side}", f"o{side}", "0", 1e3)
    >>> none = np.zeros((0, 1))
    >>> equations = Equations(c, {})
    >>> small = evaluate_small_signal(equations, (none, none, none))
    >>> fold = fold_circuit(c, {"ip": "in", "op": "on"})
    >>> build_half(equations, fold, small, drives=["vid"], noise=False)
    Network(2 nodes, 1 voltage_source, 2 conductor)
    """
    places = _find_places(equations, fold, drives)
    chosen = np.arange(equations.size).reshape(equations.batch)[() if pick is None else pick]
    half = _Half(equations, places, np.ravel(chosen), np.shape(chosen), noise)
    for name in drives:
        half.add_source(equations.circuit.find(name), fold)
    for name in (*fold.kept, *fold.across):
        half.add_passive(equations.circuit.find(name), name in fold.across)
    owners = [t.name for t in equations.circuit.transistors for _ in range(t.stack)]
    for row, owner in enumerate(owners):
        if owner in fold.kept:
            half.add_unit(row, owner, small)
    return half.network


class _Half:
    """A half circuit under construction."""

    def __init__(
        self,
        equations: Equations,
        places: dict[str, Place],
        items: NDArray[np.intp],
        shape: tuple[int, ...],
        noise: bool,
    ) -> None:
        self.equations, self.places, self.items, self.shape = equations, places, items, shape
        self.noise = noise
        self.temperature = self._value(equations.temperature) if noise else None
        self.network = Network()

    def _value(self, array: Array) -> Array:
        flat = self.equations.flat(array)
        return np.asarray(flat[0] if flat.size == 1 else take(flat, self.items).reshape(self.shape))

    def add_source(self, element: Element, fold: Fold) -> None:
        """Add a source that drives; across the sides, it is taken from the axis."""
        if element.name not in fold.kept and element.name not in fold.across:
            raise UsageFault(
                f"{element.name} cannot drive the half circuit.",
                hint=f"Drive {', '.join(self._sources(fold)) or 'a source of the kept side'}.",
            )
        (plus, sign), (minus, other) = (self.places[node] for node in element.nodes)
        if element.name in fold.across:
            minus, other = GROUND, 1
        if plus != GROUND and minus != GROUND and sign != other:
            raise UsageFault(f"{element.name} joins the two sides; it cannot drive one of them.")
        if (other if plus == GROUND else sign) < 0:
            plus, minus = minus, plus
        if "voltage" in element.values:
            self.network.add_voltage_source(element.name, plus, minus)
        else:
            self.network.add_current_source(element.name, plus, minus)

    def _sources(self, fold: Fold) -> list[str]:
        circuit = self.equations.circuit
        sources = (*circuit.voltage_sources, *circuit.current_sources)
        return [s.name for s in sources if s.name in fold.kept or s.name in fold.across]

    def add_passive(self, element: Element, across: bool) -> None:
        """Add a resistor or capacitor; others are passed by."""
        values = element.values
        if not {"resistance", "capacitance"} & set(values):
            return
        (plus, sign), (minus, other) = (self.places[node] for node in element.nodes)
        conductance = 1.0 / values["resistance"] if "resistance" in values else np.zeros(())
        capacitance = values.get("capacitance", np.zeros(()))
        if across:
            minus, other, conductance, capacitance = GROUND, sign, 2 * conductance, 2 * capacitance
        if plus == minus:
            return
        net, name = self.network, element.name
        if GROUND not in (plus, minus) and sign != other:
            net.add_crossed(
                name, plus, minus, conductance=self._value(conductance),
                capacitance=self._value(capacitance),
                temperature=self.temperature if "resistance" in values else None,
            )  # fmt: skip
        elif "resistance" in values:
            heat = self.temperature
            net.add_conductor(name, plus, minus, self._value(conductance), temperature=heat)
        else:
            net.add_capacitor(name, plus, minus, self._value(capacitance))

    def add_unit(self, row: int, owner: str, small: SmallSignal) -> None:
        """Add a unit transistor and its noise."""
        unit = self.equations.units[row]
        ends = [self.places[node] for node in (unit.gate, unit.drain, unit.source, unit.bulk)]
        gm, gds, gmb, thermal, flicker = (
            part[row, self.items].reshape(self.shape)
            for part in (small.gm, small.gds, small.gmb, small.noise_thermal, small.noise_flicker)
        )
        self.network.add_block(
            unit.name, [node for node, _ in ends], conductance=conductance_matrix(gm, gds, gmb),
            capacitance=small.capacitance[row, self.items].reshape(*self.shape, 4, 4),
            signs=[sign for _, sign in ends],
        )  # fmt: skip
        (drain, up), (source, down) = ends[1], ends[2]
        if self.noise and (drain, up) != (source, down):
            self.network.add_noise(
                f"{unit.name}.channel", drain, source, white=thermal, flicker=flicker,
                owner=owner, signs=(up, down),
            )  # fmt: skip


def _find_places(equations: Equations, fold: Fold, drives: Sequence[str]) -> dict[str, Place]:
    """Give each node its place in the half circuit, shorts of idle sources taken in."""
    circuit, images = equations.circuit, fold.images
    driving = set(drives) | {fold.kept[name] for name in drives if name in fold.kept}
    off = frozenset(s.name for s in circuit.voltage_sources if s.name not in driving)
    potentials = find_potentials(circuit, shorted=off)
    label = dict(zip(potentials.nodes, potentials.cluster.tolist(), strict=True))
    first: dict[int, str] = {}
    for node in images:
        first.setdefault(label[node], node)
    others = {label[there] for there in images.values()}
    places: dict[str, Place] = dict.fromkeys(potentials.nodes, (GROUND, 1))
    for here, there in images.items():
        if label[here] < 0 or label[here] == label[there]:
            continue
        if label[here] in others:
            raise UsageFault(f"a voltage source joins {here} to a node of the other side.")
        places[here], places[there] = (first[label[here]], 1), (first[label[here]], -1)
    return places
