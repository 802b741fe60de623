"""What an amplifier sees in a filter: feedback, load and virtual ground, per side."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from gmid.filters.closed_forms import Stage
from gmid.filters.elements import AmplifierModel, Element
from gmid.filters.realisation import Realisation

_LEAST_SHARE = 0.05


@dataclass(frozen=True, kw_only=True)
class Load:
    """What the amplifier of one position sees; far virtual grounds count as ground.

    Parameters
    ----------
    position : str
        Name of the position.
    feedback_capacitance, feedback_conductance : float
        From its output to its own virtual ground [F], [S].
    load_capacitance, load_conductance : float
        All else at the output [F], [S].
    ground_capacitance, ground_conductance : float
        All else at the virtual ground [F], [S]; the amplifier's own input among it.
    own_capacitance : float
        Of the amplifier's own output [F].

    Examples
    --------
    >>> load = Load(position="A1", feedback_capacitance=4e-12, load_capacitance=1e-12,
    ...             ground_capacitance=1e-12)
    >>> load.beta, round(load.bench_capacitance * 1e12, 3)
    (0.8, 1.8)
    """

    position: str
    feedback_capacitance: float = 0.0
    feedback_conductance: float = 0.0
    load_capacitance: float = 0.0
    load_conductance: float = 0.0
    ground_capacitance: float = 0.0
    ground_conductance: float = 0.0
    own_capacitance: float = 0.0

    @property
    def beta(self) -> float:
        """Capacitive feedback factor; 1 where there is no feedback [-]."""
        whole = self.feedback_capacitance + self.ground_capacitance
        return self.feedback_capacitance / whole if self.feedback_capacitance else 1.0

    @property
    def accuracy_capacitance(self) -> float:
        """C_acc = CL + CF, own output included [F]."""
        return self.load_capacitance + self.feedback_capacitance + self.own_capacitance

    @property
    def stability_capacitance(self) -> float:
        """C_stab = CL + (1 - beta) CF, own output included [F]."""
        return self.bench_capacitance + self.own_capacitance

    @property
    def bench_capacitance(self) -> float:
        """CL + (1 - beta) CF, the amplifier's own capacitance not counted [F]."""
        return self.load_capacitance + (1.0 - self.beta) * self.feedback_capacitance

    @property
    def output_conductance(self) -> float:
        """Sum of all conductance of the network at the output, feedback included [S]."""
        return self.load_conductance + self.feedback_conductance

    @property
    def bench_resistance(self) -> float:
        """Its inverse, infinite where there is none [ohm]."""
        total = self.output_conductance
        return 1.0 / total if total > 0 else float("inf")

    @property
    def pole_capacitance(self) -> float:
        """Capacitance that counts for the excess-phase pole [F].

        C_stab, but at least a twentieth of C_acc: a loop that nothing loads has no bandwidth of
        its own to ask a pole for.
        """
        return max(self.stability_capacitance, _LEAST_SHARE * self.accuracy_capacitance)

    def stage(self, gm: float, output_conductance: float = 0.0) -> Stage:
        """Return the integrator for the closed forms.

        Parameters
        ----------
        gm : float
            Of the amplifier [S].
        output_conductance : float
            Own one of the amplifier [S].

        Returns
        -------
        Stage
            Conductances with the feedback included.
        """
        return Stage(
            gm, self.feedback_capacitance, self.load_capacitance + self.own_capacitance,
            self.output_conductance + output_conductance, self.ground_capacitance,
            self.ground_conductance + self.feedback_conductance, self.feedback_conductance,
        )  # fmt: skip


def find_loads(
    realisation: Realisation, own: Mapping[str, AmplifierModel] | None = None
) -> tuple[Load, ...]:
    """Find what each amplifier of a realisation sees.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    own : mapping of str to AmplifierModel, optional
        Own capacitances of the amplifiers, by position.

    Returns
    -------
    tuple of Load
        In the order of the positions.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> load = find_loads(made)[0]
    >>> load.feedback_capacitance, round(load.bench_resistance / 1e3, 2)
    (2e-12, 79.58)
    """
    loads = []
    for place in realisation.amplifiers:
        model = (own or {}).get(place.name, AmplifierModel())
        total = {
            "feedback_capacitance": 0.0, "feedback_conductance": 0.0, "load_capacitance": 0.0,
            "load_conductance": 0.0, "ground_conductance": 0.0,
            "ground_capacitance": float(np.asarray(model.input_capacitance)),
        }  # fmt: skip
        for element in realisation.elements:
            _count(total, element, realisation, place.input, place.output)
        if place.output == realisation.output:
            total["load_capacitance"] += realisation.load_capacitance
            total["load_conductance"] += 1.0 / realisation.load_resistance
        own_output = float(np.asarray(model.output_capacitance))
        loads.append(Load(position=place.name, own_capacitance=own_output, **total))
    return tuple(loads)


def _count(
    total: dict[str, float], element: Element, realisation: Realisation, ground: str, output: str
) -> None:
    if element.kind == "transconductor":
        return
    resistive = element.kind == "resistor"
    what = "conductance" if resistive else "capacitance"
    value = 1.0 / element.value if resistive else element.value
    inner = (ground, output)
    if set(element.nodes) == set(inner) and not element.crossed:
        total[f"feedback_{what}"] += value
    else:
        for node, side in ((output, "load"), (ground, "ground")):
            total[f"{side}_{what}"] += value * element.nodes.count(node)
    passives = realisation.passives
    if resistive:
        half = 0.5 * passives.resistor_capacitance * element.value
        total["load_capacitance"] += half * element.nodes.count(output)
        total["ground_capacitance"] += half * element.nodes.count(ground)
    elif "0" not in element.nodes and element.nodes[0] == output:
        total["load_capacitance"] += passives.bottom_plate * element.value
