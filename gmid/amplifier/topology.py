"""The amplifier as one circuit definition: every form, both polarities, one place each line.

An n-input amplifier is described; for a p-input one both rails and all channels change places.
Node names: `mirror_p` is the diode of the input device at `vip`, `turn_n` the diode that its
copy drives, `inner_p` the node below a cascode. Sides `p` and `n` are those of `vip`/`vop` and
`vin`/`von`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from gmid.amplifier.places import PLACES
from gmid.amplifier.plan import AmplifierPlan
from gmid.circuit.circuit import Circuit

if TYPE_CHECKING:
    from collections.abc import Iterator

PORTS = ("vip", "vin", "vop", "von", "vcm", "iref", "vdd", "vss")
"""Ports of the exported subcircuit."""

PROBE = "vprobe"
"""Series source in the common-mode loop, from `cm_drive` to `cm_gate`."""

NO_RESISTOR = 1e15
"""What stands for a load resistance that is not there [ohm]."""

Wires = tuple[str, str, str]
"""Drain, gate and source."""

_OTHER = {"p": "n", "n": "p"}


def build_core(plan: AmplifierPlan, *, vss: str = "vss", probe: bool = False) -> Circuit:
    """Build the amplifier without anything around it.

    Parameters
    ----------
    plan : AmplifierPlan
        Lengths, counts and elements.
    vss : str
        Name of the lower rail; ``0`` where it is ground.
    probe : bool
        Put a source of 0 V between `cm_drive` and `cm_gate`; they are one node otherwise.

    Returns
    -------
    Circuit
        Transistors, resistors and capacitors, and the probe if wanted.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> "cm_drive" in build_core(example_plan(), probe=True).nodes
    True
    """
    circuit = Circuit()
    rails = {"n": vss, "p": "vdd"}
    gate = "cm_gate" if probe else "cm_drive"
    for place, name, (drain, gate_node, source) in list_instances(plan, rails, gate):
        one = plan.transistors[place]
        polarity = PLACES[place].polarity(plan.input_pair)
        circuit.add_transistor(
            name, one.device, polarity=polarity, drain=drain, gate=gate_node, source=source,
            bulk=source if one.bulk == "source" else rails[polarity], length=one.length,
            count=one.count, stack=one.stack, role=place,
        )  # fmt: skip
    _add_elements(circuit, plan, rails[plan.input_pair])
    if plan.multiple != 1:
        circuit = circuit.scaled(plan.multiple)
    if probe:
        circuit.add_voltage_source(PROBE, "cm_drive", "cm_gate", 0.0)
    return circuit


def build_circuit(
    plan: AmplifierPlan, *, voltage: ArrayLike, vcm: ArrayLike, input_level: ArrayLike,
    reference_current: ArrayLike, difference: ArrayLike = 0.0, loaded: bool = True,
) -> Circuit:  # fmt: skip
    """Build the amplifier with its supply, its inputs, its reference and its load.

    Parameters
    ----------
    plan : AmplifierPlan
        Lengths, counts and elements.
    voltage : array_like, shape (...)
        Supply, source `vdd` [V].
    vcm : array_like, shape (...)
        Output common mode, source `vcm` [V].
    input_level : array_like, shape (...)
        Input common mode [V]; sources `vip` and `vin` hold the inputs.
    reference_current : array_like, shape (...)
        Source `iref` of one amplifier [A]; times `plan.multiple` it flows.
    difference : array_like, shape (...)
        Differential input [V].
    loaded : bool
        Put the load at the outputs.

    Returns
    -------
    Circuit
        Ready for `gmid.circuit.solve_bias`; `vss` is ground, the probe is in place.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> found = build_circuit(example_plan(), voltage=1.8, vcm=0.9, input_level=0.9,
    ...                       reference_current=2e-6)
    >>> "tail" in found.nodes
    True
    """
    circuit = build_core(plan, vss="0", probe=True)
    half = np.asarray(difference, dtype=np.float64) / 2
    circuit.add_voltage_source("vdd", "vdd", "0", voltage)
    circuit.add_voltage_source("vcm", "vcm", "0", vcm)
    circuit.add_voltage_source("vip", "vip", "0", np.asarray(input_level) + half)
    circuit.add_voltage_source("vin", "vin", "0", np.asarray(input_level) - half)
    current = np.asarray(reference_current, dtype=np.float64) * plan.multiple
    ends = ("vdd", "iref") if plan.input_pair == "n" else ("iref", "0")
    circuit.add_current_source("iref", *ends, current)
    if loaded:
        for side in "pn":
            circuit.add_capacitor(f"cl{side}", f"vo{side}", "0", plan.load_capacitance)
            resistance = np.minimum(plan.load_resistance, NO_RESISTOR)
            circuit.add_resistor(f"rl{side}", f"vo{side}", "vcm", resistance)
    return circuit


def list_instances(
    plan: AmplifierPlan, rails: dict[str, str], cm_gate: str
) -> list[tuple[str, str, Wires]]:
    """List every transistor of a plan with its wires.

    Parameters
    ----------
    plan : AmplifierPlan
        The plan.
    rails : dict of str to str
        Where sources of channel ``n`` and ``p`` go.
    cm_gate : str
        Node of the gates of `control`.

    Returns
    -------
    list of tuple
        Place, instance, and (drain, gate, source).

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> list_instances(example_plan(), {"n": "vss", "p": "vdd"}, "cm_drive")[0]
    ('pair', 'pair_p', ('mirror_p', 'vip', 'tail'))
    """
    own, other = rails[plan.input_pair], rails[_OTHER[plan.input_pair]]
    found = [*_wire_signal(plan, own, other, cm_gate), *_wire_sense(plan, own, other)]
    found += _wire_bias(plan, own, other)
    order = list(PLACES)
    return sorted(found, key=lambda one: order.index(one[0]))


def _wire_signal(
    plan: AmplifierPlan, own: str, other: str, cm_gate: str
) -> Iterator[tuple[str, str, Wires]]:
    cascoded = plan.variant.is_cascoded
    yield "tail", "tail", ("tail", "iref", own)
    for side in "pn":
        far, out = _OTHER[side], f"vo{side}"
        mirror, turn = f"mirror_{side}", f"turn_{side}"
        upper = f"upper_{side}" if cascoded else out
        inner = f"inner_{side}" if cascoded else out
        yield "pair", f"pair_{side}", (mirror, f"vi{side}", "tail")
        yield "load", f"load_{side}", (mirror, mirror, other)
        yield "direct", f"direct_{side}", (upper, mirror, other)
        yield "copy", f"copy_{side}", (f"turn_{far}", mirror, other)
        yield "turn", f"turn_{side}", (turn, turn, own)
        yield "opposite", f"opposite_{side}", (inner, turn, own)
        yield "control", f"control_{side}", (inner, cm_gate, own)
        if cascoded:
            yield "direct_cascode", f"direct_cascode_{side}", (out, "direct_gate", upper)
            yield "opposite_cascode", f"opposite_cascode_{side}", (out, "opposite_gate", inner)


def _wire_sense(plan: AmplifierPlan, own: str, other: str) -> Iterator[tuple[str, str, Wires]]:
    kind = plan.common_mode_sense
    if kind == "followers":
        for side, gate in (("p", "vop"), ("n", "von"), ("m", "vcm")):
            node = f"follow_{side}"
            yield "follower", f"follower_{side}", (other, gate, node)
            yield "follower_tail", f"follower_tail_{side}", (node, "iref", own)
    if kind == "pairs":
        for side in "pn":
            tail = f"sense_tail_{side}"
            yield "sense_tail", tail, (tail, "bias_other", other)
            yield "sense_pair", f"sense_pair_{side}", ("error_diode", f"vo{side}", tail)
            yield "sense_pair", f"sense_pair_{side}m", ("cm_drive", "vcm", tail)
    else:
        reference = "follow_m" if kind == "followers" else "vcm"
        yield "error_tail", "error_tail", ("error_tail", "bias_other", other)
        yield "error_pair", "error_pair_s", ("error_diode", "sense", "error_tail")
        yield "error_pair", "error_pair_m", ("cm_drive", reference, "error_tail")
    yield "error_load", "error_load_s", ("error_diode", "error_diode", own)
    yield "error_load", "error_load_m", ("cm_drive", "error_diode", own)


def _wire_bias(plan: AmplifierPlan, own: str, other: str) -> Iterator[tuple[str, str, Wires]]:
    yield "bias_reference", "bias_reference", ("iref", "iref", own)
    yield "bias_mirror", "bias_mirror", ("bias_other", "iref", own)
    yield "bias_load", "bias_load", ("bias_other", "bias_other", other)
    if plan.variant.is_cascoded:
        yield "bias_direct_feed", "bias_direct_feed", ("direct_gate", "iref", own)
        yield "bias_direct", "bias_direct", ("direct_gate", "direct_gate", other)
        yield "bias_opposite_feed", "bias_opposite_feed", ("opposite_gate", "bias_other", other)
        yield "bias_opposite", "bias_opposite", ("opposite_gate", "opposite_gate", own)


def _add_elements(circuit: Circuit, plan: AmplifierPlan, control_rail: str) -> None:
    if plan.common_mode_sense != "pairs":
        start = "follow_" if plan.common_mode_sense == "followers" else "vo"
        for side in "pn":
            node = f"{start}{side}"
            circuit.add_resistor(f"rsense_{side}", node, "sense", plan.sense_resistance)
            circuit.add_capacitor(f"csense_{side}", node, "sense", plan.sense_capacitance)
    if np.any(np.asarray(plan.output_capacitance) > 0):
        for side in "pn":
            circuit.add_capacitor(
                f"cout_{side}", f"vo{side}", control_rail, plan.output_capacitance
            )
    circuit.add_resistor("rerror", "cm_drive", "error_mid", plan.error_resistance)
    circuit.add_capacitor("cerror", "error_mid", control_rail, plan.error_capacitance)
