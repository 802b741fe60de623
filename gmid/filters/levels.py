"""Peak levels of all nodes, and what transconductors bring to them."""

from __future__ import annotations

import numpy as np

from gmid.errors import DataFault
from gmid.filters.elements import AmplifierModel
from gmid.filters.pairing import refine_peak
from gmid.filters.realisation import Amplifiers, Realisation
from gmid.filters.sections import spread_frequencies
from gmid.filters.spec_checks import name_key
from gmid.filters.stamping import SOURCE
from gmid.network import GROUND, Network, transfer
from gmid.network.pencil import ComplexArray, FloatArray


def measure_levels(realisation: Realisation, amplifiers: Amplifiers = None) -> dict[str, float]:
    """Measure the largest gain from the input to every integrator output.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    amplifiers : AmplifierModel or mapping of str to AmplifierModel, optional
        Real amplifiers, without leading axes.

    Returns
    -------
    dict of str to float
        By node, along the cascade [-].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="chebyshev", order=3, edge=1e6, ripple_db=1.0)
    >>> levels = measure_levels(realise(spec, capacitor=1e-12))
    >>> {node: round(level, 3) for node, level in levels.items()}
    {'v1': 1.0, 'v2': 1.0, 'v3': 1.0}
    """
    f = spread_frequencies(realisation.sections)
    net = realisation.network(amplifiers)
    return {
        node: refine_peak(lambda f, at=node: np.abs(_gain(net, at, f)), f)  # type: ignore[misc]
        for node in realisation.nodes
    }


def _gain(net: Network, node: str, frequency: FloatArray) -> ComplexArray:
    return transfer(net, SOURCE, node, frequency.ravel()).reshape(frequency.shape)


def absorb_parasitics(realisation: Realisation, amplifiers: Amplifiers) -> Realisation:
    """Take the capacitances of transconductors off grounded capacitors.

    An active-RC filter stays as it is: its integrating capacitors do not share a node with
    these capacitances in parallel.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    amplifiers : AmplifierModel or mapping of str to AmplifierModel
        Their input and output capacitances, without leading axes.

    Returns
    -------
    Realisation
        With the same total at every node.

    Raises
    ------
    DataFault
        If a node has more of them than capacitance to ground.

    Examples
    --------
    >>> from gmid.filters import AmplifierModel, FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, style="gm-c")
    >>> made = realise(spec, capacitor=1e-12)
    >>> smaller = absorb_parasitics(made, AmplifierModel(output_capacitance=50e-15))
    >>> round(smaller.find("C1_a").value * 1e12, 6)
    0.9
    """
    if realisation.style != "gm-c":
        return realisation
    extra: dict[str, float] = {}
    models = realisation.models(amplifiers)
    for place in realisation.amplifiers:
        model = models.get(place.name, AmplifierModel())
        for node, value in (
            (place.output, model.output_capacitance), (place.input, model.input_capacitance),
        ):  # fmt: skip
            extra[node] = extra.get(node, 0.0) + float(np.asarray(value))
    values: dict[str, float] = {}
    for element in realisation.elements:
        if element.kind == "capacitor" and element.nodes[1] == GROUND:
            rest = element.value - extra.get(element.nodes[0], 0.0)
            if rest < 0:
                raise DataFault(
                    f"the transconductors bring {extra[element.nodes[0]]:.4g} F to node "
                    f"{element.nodes[0]}, more than the {element.value:.4g} F of {element.name}.",
                    where=name_key("capacitor"), hint="Take a larger capacitor.",
                )  # fmt: skip
            values[element.name] = rest
    return realisation.with_values(values)
