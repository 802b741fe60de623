"""`filter.cir`: the whole filter with its transistor-level amplifiers, ready for a simulator.

Every amplifier is the subcircuit of its plan, already multiplied, as `amplifier.cir` holds it.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from gmid.amplifier.decks import write_level
from gmid.amplifier.filtering.circuit import (
    Piece,
    connect_amplifier,
    list_pieces,
    refuse_levels,
)
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.topology import NO_RESISTOR
from gmid.circuit.netlist import format_value
from gmid.filters.elements import Position
from gmid.filters.realisation import Realisation

POINTS_PER_DECADE = 100
"""Of the AC analysis."""

_REACH = 100.0  # how far the sweep goes beyond the outermost poles


def write_filter_deck(
    realisation: Realisation, plans: Mapping[str, AmplifierPlan], supply: Supply, *,
    band: tuple[float, float] | None = None,
) -> str:  # fmt: skip
    """Write the deck of a whole filter.

    Parameters
    ----------
    realisation : Realisation
        Sections and elements.
    plans : mapping of str to AmplifierPlan
        By position; their subcircuits are in ``amplifier.cir``.
    supply : Supply
        What the amplifiers are fed with.
    band : tuple of float, optional
        Of the AC analysis [Hz]; a hundred times beyond the outermost poles by default.

    Returns
    -------
    str
        Text of ``filter.cir``. Its input source `vid` is differential, its outputs are `vop`
        and `von`.

    Raises
    ------
    DataFault
        If the supply has an input common mode of its own.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan, example_supply
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> deck = write_filter_deck(made, {"A1": example_plan()}, example_supply())
    >>> [line for line in deck.splitlines() if line.startswith(("C1_a", "xA1"))]
    ['C1_a_p vop x1_p {2e-12*cscale}', 'C1_a_n von x1_n {2e-12*cscale}', \
'xA1 x1_n x1_p vop von vcm iref_a1 vdd 0 a1']
    """
    refuse_levels(supply)
    low, high = find_band(realisation) if band is None else band
    lines = [
        f"* filter, {realisation.style}, {len(realisation.sections)} sections",
        ".include models.inc",
        ".include amplifier.cir",
        *_write_parameters(realisation, supply),
        "vdd vdd 0 {vsupply}",
        *write_level("vcm", supply.common_mode),
        *_write_input(realisation),
        *(_write_piece(piece, realisation) for piece in list_pieces(realisation)),
    ]
    for place in realisation.amplifiers:
        lines += _write_amplifier(realisation, place, plans[place.name], supply)
    output = [_name(realisation, f"{realisation.output}_{side}") for side in "pn"]
    lines += [f"evdiff vdiff 0 {' '.join(output)} 1"]
    return "\n".join([*lines, f".ac dec {POINTS_PER_DECADE} {low:.10g} {high:.10g}", ".end", ""])


def find_band(realisation: Realisation) -> tuple[float, float]:
    """Give the band of the AC analysis.

    Parameters
    ----------
    realisation : Realisation
        Its sections count.

    Returns
    -------
    tuple of float
        Whole decades [Hz].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> find_band(made)
    (10000.0, 100000000.0)
    """
    places = [section.f0 for section in realisation.sections]
    low = 10 ** np.floor(np.log10(min(places) / _REACH) + 1e-9)
    high = 10 ** np.ceil(np.log10(max(places) * _REACH) - 1e-9)
    return float(low), float(high)


def _write_parameters(realisation: Realisation, supply: Supply) -> list[str]:
    resistance = min(realisation.load_resistance, NO_RESISTOR)
    values = {
        "vsupply": supply.voltage, "cload": realisation.load_capacitance, "rload": resistance,
        "rscale": 1.0, "cscale": 1.0,
    }  # fmt: skip
    return [f".param {name}={value:.10g}" for name, value in values.items()]


def _write_input(realisation: Realisation) -> list[str]:
    entry = "source" if realisation.source_resistance else "in"
    return [
        "vid vid 0 dc 0 ac 1",
        f"evinp {entry}_p vcm vid 0 0.5",
        f"evinn {entry}_n vcm vid 0 -0.5",
    ]


def _name(realisation: Realisation, node: str) -> str:
    """Name a node: the output as everywhere, the others as in the realisation."""
    stem, _, side = node.rpartition("_")
    return f"vo{side}" if stem == realisation.output else node


def _write_piece(piece: Piece, realisation: Realisation) -> str:
    ends = " ".join(_name(realisation, node) for node in piece.nodes)
    value = format_value(piece.value)
    if piece.scale == "load":
        value = "{cload}" if piece.kind == "capacitor" else "{rload}"
    elif piece.scale:
        value = f"{{{value}*{piece.scale}}}"
    return f"{piece.name} {ends} {value}"


def _write_amplifier(
    realisation: Realisation, place: Position, plan: AmplifierPlan, supply: Supply
) -> list[str]:
    element = None if place.element is None else realisation.find(place.element)
    ports = connect_amplifier(place, element)
    nodes = " ".join(_name(realisation, ports[port]) for port in ("vip", "vin", "vop", "von"))
    reference = f"iref_{place.name.lower()}"
    ends = f"vdd {reference}" if plan.input_pair == "n" else f"{reference} 0"
    current = supply.reference_current * plan.multiple
    return [
        f"x{place.name} {nodes} vcm {reference} vdd 0 {plan.name}",
        f"{reference} {ends} {format_value(current)}",
    ]
