"""The whole filter as one circuit: its elements, and every amplifier down to the transistor.

Both sides are there. Nodes of the filter carry `_p` or `_n` after the name that the half circuit
of the realisation gives them; what is inside an amplifier carries its position in front.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.symmetry import find_twin
from gmid.amplifier.topology import build_core
from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Transistor
from gmid.errors import DataFault, UnknownName, advise
from gmid.filters.elements import Element, Position
from gmid.filters.realisation import Realisation
from gmid.network.stamps import GROUND

SOURCE = "vin_p"
"""Source that drives the kept side of the filter."""

_OTHER = {"p": "n", "n": "p"}
_MIDDLE = (1 / 6, 2 / 3, 1 / 6)
"""Capacitance of a resistor at its ends and its middle: right to first order in s."""


@dataclass(frozen=True)
class Piece:
    """One resistor or capacitor of one side.

    Parameters
    ----------
    name, owner : str
        Its own name, and the element of the filter that it is part of.
    kind : str
        ``resistor`` or ``capacitor``.
    nodes : tuple of str
        With their sides.
    value : float
        [ohm] or [F].
    scale : str
        What its corner is called: ``rscale``, ``cscale``, or nothing where it has none.

    Examples
    --------
    >>> Piece("C1_a_p", "C1_a", "capacitor", ("v1_p", "x1_p"), 1e-12, "cscale").owner
    'C1_a'
    """

    name: str
    owner: str
    kind: str
    nodes: tuple[str, str]
    value: float
    scale: str = ""


@dataclass(frozen=True, eq=False)
class FilterCircuit:
    """A filter down to its transistors, both sides.

    Parameters
    ----------
    circuit : Circuit
        With the sources `vdd`, `vcm`, `vin_p`, `vin_n` and one reference for each amplifier.
    mirror : dict of str to str
        Nodes of the side `p` and their images.
    pieces : tuple of Piece
        Its passive elements, both sides.

    Examples
    --------
    >>> FilterCircuit(Circuit(), {}, ()).mirror
    {}
    """

    circuit: Circuit
    mirror: dict[str, str]
    pieces: tuple[Piece, ...]


def connect_amplifier(place: Position, element: Element | None = None) -> dict[str, str]:
    """Say where the ports of an amplifier go, given that `vip` up moves `vop` up.

    Parameters
    ----------
    place : Position
        Where it sits.
    element : Element, optional
        The transconductor that it is (gm-c).

    Returns
    -------
    dict of str to str
        Node of the filter by port: `vip vin vop von`.

    Examples
    --------
    >>> connect_amplifier(Position("A1", "x1", "v1", 1))
    {'vip': 'x1_n', 'vin': 'x1_p', 'vop': 'v1_p', 'von': 'v1_n'}
    """
    inverts = element is None or element.crossed
    plus, minus = ("n", "p") if inverts else ("p", "n")
    return {
        "vip": f"{place.input}_{plus}", "vin": f"{place.input}_{minus}",
        "vop": f"{place.output}_p", "von": f"{place.output}_n",
    }  # fmt: skip


def list_pieces(realisation: Realisation) -> tuple[Piece, ...]:
    """List the passive elements of both sides, with what they bring along.

    Parameters
    ----------
    realisation : Realisation
        The filter.

    Returns
    -------
    tuple of Piece
        Elements, bottom plates, capacitances of resistors, source resistance and load.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> [piece.name for piece in list_pieces(made)][:3]
    ['R1_in_a_p', 'R1_in_a_n', 'R1_f_p']
    """
    found: list[Piece] = []
    for element in realisation.elements:
        if element.kind == "transconductor" or not element.value:
            continue
        for side in "pn":
            found += _list_side(element, side, realisation)
    output = realisation.output
    for side in "pn":
        if realisation.source_resistance:
            ends = (f"source_{side}", f"in_{side}")
            value = realisation.source_resistance
            found.append(Piece(f"Rsource_{side}", "source.r", "resistor", ends, value))
        if realisation.load_capacitance:
            ends = (f"{output}_{side}", GROUND)
            value = realisation.load_capacitance
            found.append(Piece(f"Cload_{side}", "load.c", "capacitor", ends, value, "load"))
        if np.isfinite(realisation.load_resistance):
            ends = (f"{output}_{side}", "vcm")
            value = realisation.load_resistance
            found.append(Piece(f"Rload_{side}", "load.r", "resistor", ends, value, "load"))
    return tuple(found)


def _list_side(element: Element, side: str, realisation: Realisation) -> Iterator[Piece]:
    first, second = element.nodes
    far = _OTHER[side] if element.crossed else side
    start = _put(first, side)
    end = _put(second, far)
    name, passives = f"{element.name}_{side}", realisation.passives
    if element.kind == "capacitor":
        yield Piece(name, element.name, "capacitor", (start, end), element.value, "cscale")
        if passives.bottom_plate and GROUND not in element.nodes:
            plate = passives.bottom_plate * element.value
            ends = (start, GROUND)
            yield Piece(f"{element.name}_plate_{side}", element.name, "capacitor", ends, plate,
                        "cscale")  # fmt: skip
        return
    if not passives.resistor_capacitance:
        yield Piece(name, element.name, "resistor", (start, end), element.value, "rscale")
        return
    middle, half = f"{element.name}_m_{side}", 0.5 * element.value
    yield Piece(name, element.name, "resistor", (start, middle), half, "rscale")
    yield Piece(f"{element.name}_2_{side}", element.name, "resistor", (middle, end), half, "rscale")
    whole = passives.resistor_capacitance * element.value
    for k, (node, share) in enumerate(zip((start, middle, end), _MIDDLE, strict=True)):
        stray = f"C{element.name}_{k}_{side}"
        yield Piece(stray, element.name, "capacitor", (node, GROUND), share * whole)


def _put(node: str, side: str) -> str:
    return node if node == GROUND else f"{node}_{side}"


def refuse_levels(supply: Supply) -> None:
    """Refuse an input common mode of its own: in a filter outputs drive inputs.

    Parameters
    ----------
    supply : Supply
        What the amplifiers are fed with.

    Raises
    ------
    DataFault
        If the input common mode is not that of the outputs.

    Examples
    --------
    >>> refuse_levels(Supply(1.8, 2e-6))
    """
    if supply.input_level != supply.common_mode:
        raise DataFault(
            "in a filter the outputs set the common mode of the inputs, so both are the same.",
            where="supply.input_common_mode", hint="Leave input_common_mode out.",
        )  # fmt: skip


def build_filter_circuit(
    realisation: Realisation, plans: Mapping[str, AmplifierPlan], supply: Supply, *,
    voltage: ArrayLike,
) -> FilterCircuit:  # fmt: skip
    """Put elements and amplifiers together, with supply, references and input sources.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    plans : mapping of str to AmplifierPlan
        The amplifier of each position; loads in them do not count.
    supply : Supply
        What they are fed with.
    voltage : array_like, shape (...)
        Supplies [V].

    Returns
    -------
    FilterCircuit
        Ready for `gmid.circuit.solve_bias`.

    Raises
    ------
    UnknownName
        If a position has no amplifier.
    DataFault
        If the supply has an input common mode of its own.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan, example_supply
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> found = build_filter_circuit(made, {"A1": example_plan()}, example_supply(), voltage=1.8)
    >>> found.mirror["v1_p"], found.mirror["A1_mirror_p"]
    ('v1_n', 'A1_mirror_n')
    """
    refuse_levels(supply)
    level = supply.common_mode.at(voltage)
    circuit = Circuit()
    circuit.add_voltage_source("vdd", "vdd", GROUND, voltage)
    circuit.add_voltage_source("vcm", "vcm", GROUND, level)
    entry = "source" if realisation.source_resistance else "in"
    for side in "pn":
        circuit.add_voltage_source(f"vin_{side}", f"{entry}_{side}", GROUND, level)
    pieces = list_pieces(realisation)
    for piece in pieces:
        add = circuit.add_resistor if piece.kind == "resistor" else circuit.add_capacitor
        add(piece.name, *piece.nodes, piece.value)
    for place in realisation.amplifiers:
        if place.name not in plans:
            raise UnknownName(
                f"position {place.name} has no amplifier.", hint=advise(place.name, plans)
            )
        element = None if place.element is None else realisation.find(place.element)
        _add_amplifier(circuit, place, element, plans[place.name], supply)
    return FilterCircuit(circuit, _find_mirror(circuit), pieces)


def _add_amplifier(
    circuit: Circuit, place: Position, element: Element | None, plan: AmplifierPlan, supply: Supply
) -> None:
    core = build_core(plan, vss=GROUND)
    ports = connect_amplifier(place, element) | {"vcm": "vcm", "vdd": "vdd"}
    known = {port: node for port, node in ports.items() if port in core.nodes}
    circuit.insert(core, prefix=f"{place.name}_", nodes=known)
    reference = f"{place.name}_iref"
    ends = ("vdd", reference) if plan.input_pair == "n" else (reference, GROUND)
    circuit.add_current_source(
        f"{place.name}_reference", *ends, supply.reference_current * plan.multiple
    )


def _find_mirror(circuit: Circuit) -> dict[str, str]:
    """Pair the nodes of both sides; those inside stacks follow their transistors."""
    inside = {
        node for one in circuit.elements if isinstance(one, Transistor) for node in one.inner_nodes
    }
    found = {}
    for node in circuit.nodes:
        twin = find_twin(node)
        if node not in inside and twin != node and twin in circuit.nodes:
            found[max(node, twin)] = min(node, twin)  # p stands behind n
    return found
