"""How the elements and amplifiers of a realisation are written into a network."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UsageFault
from gmid.filters.elements import AmplifierModel, Element, Position
from gmid.network import GROUND, Network
from gmid.network.pencil import FloatArray
from gmid.network.stamps import BOLTZMANN, ZERO_CELSIUS

if TYPE_CHECKING:
    from gmid.filters.realisation import Realisation

INPUT = "in"
"""Node at which the first section takes its signal."""

SOURCE = "vin"
"""Name of the voltage source that drives a filter."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Conditions:
    """Under what a network of a realisation is built; see `Realisation.network`.

    Parameters
    ----------
    temperature : array_like, shape (...), optional
        Makes the elements noisy [degC].
    rscale, cscale : array_like, shape (...)
        Multiply all resistors, all capacitors [-].
    factors : mapping of str to array_like
        Multiply single elements [-].
    common_mode : bool
        Whether crossed wires are seen as not crossed.

    Examples
    --------
    >>> Conditions(temperature=None, rscale=1.0, cscale=1.0, factors={}).common_mode
    False
    """

    temperature: ArrayLike | None
    rscale: ArrayLike
    cscale: ArrayLike
    factors: Mapping[str, ArrayLike]
    common_mode: bool = False

    def value(self, element: Element) -> FloatArray:
        """Return the value of an element under these conditions.

        Parameters
        ----------
        element : Element
            The element.

        Returns
        -------
        ndarray of float, shape (...)
            [ohm], [F] or [S].
        """
        scales: dict[str, ArrayLike] = {"resistor": self.rscale, "capacitor": self.cscale}
        scale = np.asarray(scales.get(element.kind, 1.0), dtype=np.float64)
        factor = np.asarray(self.factors.get(element.name, 1.0), dtype=np.float64)
        return np.asarray(element.value * scale * factor, dtype=np.float64)


def build_network(
    realisation: Realisation, models: Mapping[str, AmplifierModel], conditions: Conditions
) -> Network:
    """Write a realisation into a network.

    Parameters
    ----------
    realisation : Realisation
        Its elements and amplifiers.
    models : mapping of str to AmplifierModel
        Real amplifiers by position; all others are ideal.
    conditions : Conditions
        Temperature, corners, single deviations.

    Returns
    -------
    Network
        Driven by ``vin``.

    Raises
    ------
    UsageFault
        If an active-RC amplifier has no finite gm_total.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> build_network(made, {}, Conditions(temperature=None, rscale=1, cscale=1, factors={}))
    Network(3 nodes, 1 voltage_source, 1 crossed, 1 conductor, 1 capacitor, 1 amplifier)
    """
    net = Network()
    _add_source(net, realisation, conditions)
    for element in realisation.elements:
        if element.kind == "resistor":
            _add_resistor(net, element, realisation.passives.resistor_capacitance, conditions)
        elif element.kind == "capacitor":
            _add_capacitor(net, element, realisation.passives.bottom_plate, conditions)
    for place in realisation.amplifiers:
        model = models.get(place.name)
        if place.element is not None:
            element = realisation.find(place.element)
            _add_transconductor(net, place, element, model or AmplifierModel(), conditions)
        elif model is None:
            net.add_amplifier(place.name, (place.output, GROUND), (GROUND, place.input))
        else:
            _add_amplifier(net, place, model, conditions)
    if realisation.load_capacitance:
        net.add_capacitor("load.c", realisation.output, GROUND, realisation.load_capacitance)
    if np.isfinite(realisation.load_resistance):
        net.add_resistor("load.r", realisation.output, GROUND, realisation.load_resistance)
    return net


def _add_source(net: Network, realisation: Realisation, conditions: Conditions) -> None:
    if realisation.source_resistance == 0:
        net.add_voltage_source(SOURCE, INPUT, GROUND)
        return
    net.add_voltage_source(SOURCE, "source", GROUND)
    net.add_resistor(
        "source.r", "source", INPUT, realisation.source_resistance,
        temperature=conditions.temperature,
    )  # fmt: skip


def _add_conductance(
    net: Network, name: str, nodes: tuple[str, str], conductance: FloatArray, crossed: bool,
    temperature: ArrayLike | None,
) -> None:  # fmt: skip
    if crossed:
        net.add_crossed(name, *nodes, conductance=conductance, temperature=temperature)
    else:
        net.add_conductor(name, *nodes, conductance, temperature=temperature)


def _add_resistor(net: Network, element: Element, per_ohm: float, conditions: Conditions) -> None:
    value = conditions.value(element)
    crossed = element.crossed and not conditions.common_mode
    first, second = element.nodes
    warm = conditions.temperature
    if per_ohm == 0:
        _add_conductance(net, element.name, (first, second), 1.0 / value, crossed, warm)
        return
    # 1/6, 2/3, 1/6 of the capacitance at the ends and the middle: right to first order in s
    middle, whole = f"{element.name}.m", per_ohm * element.value
    _add_conductance(net, element.name, (first, middle), 2.0 / value, False, warm)
    _add_conductance(net, f"{element.name}.2", (middle, second), 2.0 / value, crossed, warm)
    for node, share in ((first, 1 / 6), (middle, 2 / 3), (second, 1 / 6)):
        net.add_capacitor(f"{element.name}.c({node})", node, GROUND, share * whole)


def _add_capacitor(
    net: Network, element: Element, bottom_plate: float, conditions: Conditions
) -> None:
    value = conditions.value(element)
    first, second = element.nodes
    if element.crossed and not conditions.common_mode:
        net.add_crossed(element.name, first, second, capacitance=value)
    else:
        net.add_capacitor(element.name, first, second, value)
    if bottom_plate and GROUND not in element.nodes:
        net.add_capacitor(f"{element.name}.plate", first, GROUND, bottom_plate * value)


def _add_amplifier(
    net: Network, place: Position, model: AmplifierModel, conditions: Conditions
) -> None:
    if model.gm_total is None or not np.all(np.asarray(model.gm_total) < np.inf):
        raise UsageFault(
            f"amplifier {place.name} needs a finite gm_total.",
            hint="Leave the position out for an ideal amplifier.",
        )
    gm = np.asarray(model.gm_total, dtype=np.float64)
    _add_vccs(net, place, model, (place.output, GROUND), gm)
    _add_parasitics(net, place, model, gm, conditions)


def _add_transconductor(
    net: Network, place: Position, element: Element, model: AmplifierModel, conditions: Conditions
) -> None:
    given = conditions.value(element) if model.gm_total is None else model.gm_total
    gm = np.asarray(given, dtype=np.float64)
    inverted = element.crossed and not conditions.common_mode
    _add_vccs(net, place, model, (GROUND, place.output), -gm if inverted else gm)
    _add_parasitics(net, place, model, gm, conditions)


def _add_vccs(
    net: Network, place: Position, model: AmplifierModel, output: tuple[str, str], gm: FloatArray
) -> None:
    pole = 2 * np.pi * np.asarray(model.excess_pole, dtype=np.float64)
    given = None if np.all(np.isinf(pole)) else pole
    net.add_vccs(place.name, output, (place.input, GROUND), gm, pole=given)


def _add_parasitics(
    net: Network, place: Position, model: AmplifierModel, gm: FloatArray, conditions: Conditions
) -> None:
    name = place.name
    if np.any(model.output_conductance):
        net.add_conductor(f"{name}.go", place.output, GROUND, model.output_conductance)
    if np.any(model.output_capacitance):
        net.add_capacitor(f"{name}.co", place.output, GROUND, model.output_capacitance)
    if np.any(model.input_capacitance):
        net.add_capacitor(f"{name}.ci", place.input, GROUND, model.input_capacitance)
    if conditions.temperature is None:
        return
    kelvin = np.asarray(conditions.temperature, dtype=np.float64) + ZERO_CELSIUS
    white = 4 * BOLTZMANN * kelvin * np.asarray(model.noise_factor) * np.abs(gm)
    net.add_noise(
        f"{name}.noise", place.output, GROUND, white=white,
        flicker=white * np.asarray(model.noise_corner), owner=name,
    )  # fmt: skip
