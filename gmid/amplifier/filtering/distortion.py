"""Third harmonic of a filter from the static curves of its amplifiers, solved from the tables.

Each amplifier is a surface: the current that it delivers over its input and its output voltage,
the common-mode loop at work. Driven with the fundamental that the linear filter puts there, it
makes a third harmonic of current, which the filter at three times the frequency carries to the
output; all amplifiers add up with their phases. Harmonics do not act back.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.filtering.circuit import SOURCE, connect_amplifier
from gmid.amplifier.filtering.realised import RealisedFilter
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.topology import build_circuit
from gmid.circuit.bias import Bias, solve_bias
from gmid.device.device import Device
from gmid.filters.levels import measure_levels
from gmid.network import transfers
from gmid.network.pencil import ComplexArray

Array = NDArray[np.float64]

POWERS = tuple((j, degree - j) for degree in (1, 3, 5, 7) for j in range(degree + 1))
"""Powers of input and output voltage in a surface; a balanced amplifier has odd ones only."""

_POINTS = 7
_ANGLES = 2 * np.pi * np.arange(32) / 32
_LEAST = 1e-4


@dataclass(frozen=True, eq=False)
class Surface:
    """Output current of an amplifier over both its voltages.

    Parameters
    ----------
    input, output : ndarray, shape (...)
        Largest differential voltages that it covers [V].
    weights : ndarray, shape (..., len(POWERS))
        Of the powers of both voltages over their largest values [A].

    Examples
    --------
    >>> line = Surface(np.array(1.0), np.array(1.0), np.eye(len(POWERS))[1] * 1e-3)
    >>> bool(abs(line.find_harmonic(np.array(0.1 + 0j), np.array(0j))) < 1e-15)
    True
    """

    input: Array
    output: Array
    weights: Array

    def find_harmonic(self, x: ComplexArray, y: ComplexArray) -> ComplexArray:
        """Find the third harmonic of the current, for sines at both ports.

        Parameters
        ----------
        x, y : ndarray of complex, shape (...)
            Phasors of input and output voltage, peak [V].

        Returns
        -------
        ndarray of complex, shape (...)
            Peak [A].
        """
        turn = np.exp(1j * _ANGLES)
        a = (x[..., None] * turn).real / self.input[..., None]
        b = (y[..., None] * turn).real / self.output[..., None]
        current = np.zeros(np.broadcast_shapes(a.shape, b.shape))
        for k, (j, i) in enumerate(POWERS):
            current = current + self.weights[..., k, None] * a**j * b**i
        found = (current * np.exp(-3j * _ANGLES)).mean(axis=-1) * 2
        return np.asarray(found, dtype=np.complex128)


def trace_surface(
    plan: AmplifierPlan, devices: Mapping[str, Device], supply: Supply, voltage: Array,
    largest: tuple[Array, Array],
) -> Surface:  # fmt: skip
    """Solve the surface of an amplifier.

    Parameters
    ----------
    plan : AmplifierPlan
        The amplifier; its load does not count.
    devices : mapping of str to Device
        Of one condition.
    supply : Supply
        What it is fed with.
    voltage : ndarray, shape (...)
        Supplies [V].
    largest : tuple of ndarray, shape (...)
        Differential input and output voltage up to which it is wanted [V].

    Returns
    -------
    Surface
        Fitted to solutions at the nodes of Chebyshev.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> found = trace_surface(example_plan(), example_devices(), example_supply(), np.array(1.8),
    ...                       (np.array(0.01), np.array(0.2)))
    >>> bool(found.weights[1] / 0.01 > 100e-6)
    True
    """
    nodes = np.cos(np.pi * (np.arange(_POINTS) + 0.5) / _POINTS)
    a, b = (part.ravel() for part in np.meshgrid(nodes, nodes, indexing="ij"))
    stretch = (slice(None), *(None,) * np.ndim(voltage))
    x, y = (part[stretch] * size for part, size in zip((a, b), largest, strict=True))
    start: Bias | None = None
    for share in (0.5, 1.0):  # on the way to full swing a solution nearby leads on
        circuit = build_circuit(
            plan, voltage=voltage, vcm=supply.common_mode.at(voltage),
            input_level=supply.input_level.at(voltage), difference=share * x, loaded=False,
            reference_current=supply.reference_current,
        )  # fmt: skip
        circuit.add_voltage_source("hold", "vop", "von", share * y)
        start = solve_bias(circuit, devices, start=start)
    assert start is not None
    current = start.source_current("hold")
    rows = np.stack([a**j * b**i for j, i in POWERS], axis=-1)
    fit = np.linalg.pinv(rows)
    weights = np.moveaxis(np.tensordot(fit, current, axes=1), 0, -1)
    covered = [np.broadcast_to(one, np.shape(voltage)) for one in largest]
    return Surface(covered[0], covered[1], weights)


@dataclass(frozen=True, eq=False)
class FilterHarmonic:
    """Third harmonic of a filter, and what each amplifier gives to it.

    Parameters
    ----------
    frequency : float
        Of the fundamental [Hz].
    amplitude : float
        Peak differential input [V].
    shares : dict of str to ndarray of complex, shape (...)
        Third harmonic over fundamental at the output, by position [-].

    Examples
    --------
    >>> one = FilterHarmonic(1e5, 0.6, {"A1": np.array(1e-3 + 0j), "A2": np.array(-9e-4 + 0j)})
    >>> float(one.decibels.round(6))
    -80.0
    """

    frequency: float
    amplitude: float
    shares: dict[str, ComplexArray]

    @property
    def decibels(self) -> Array:
        """Third harmonic over fundamental, shape (...) [dB]."""
        return np.asarray(20 * np.log10(np.maximum(np.abs(sum(self.shares.values())), 1e-30)))


def find_amplitude(found: RealisedFilter, swing: float) -> float:
    """Give the input at which the largest node has the swing, at its worst frequency.

    Parameters
    ----------
    found : RealisedFilter
        Its ideal levels count, those that the demands were found with.
    swing : float
        Peak differential voltage [V].

    Returns
    -------
    float
        Peak differential input [V].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.filtering.realised import realise_filter
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=1e-12)
    >>> found = realise_filter(
    ...     made, {"A1": example_plan()}, example_devices(), example_supply(), voltage=1.8
    ... )
    >>> round(find_amplitude(found, 0.5), 6)
    0.5
    """
    return float(swing / max(measure_levels(found.realisation).values()))


def measure_harmonic(
    found: RealisedFilter, devices: Mapping[str, Device], supply: Supply, *, frequency: float,
    amplitude: float,
) -> FilterHarmonic:  # fmt: skip
    """Measure the third harmonic of a realised filter.

    Parameters
    ----------
    found : RealisedFilter
        The filter in one condition.
    devices : mapping of str to Device
        Of the same condition.
    supply : Supply
        What the amplifiers are fed with.
    frequency : float
        Of the fundamental [Hz].
    amplitude : float
        Peak differential input [V].

    Returns
    -------
    FilterHarmonic
        Of the shape of the supplies.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.filtering.realised import realise_filter
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=1e-12)
    >>> case = example_devices(), example_supply()
    >>> found = realise_filter(made, {"A1": example_plan()}, *case, voltage=1.8)
    >>> one = measure_harmonic(found, *case, frequency=2e5, amplitude=0.2)
    >>> bool(-120 < one.decibels < -40)
    True
    """
    places = found.realisation.amplifiers
    fundamental, carried = _find_phasors(found, frequency)
    end = fundamental[..., -1]
    shares: dict[str, ComplexArray] = {}
    for unit, positions in _group(found.plans):
        rows = [k for k, place in enumerate(places) if place.name in positions]
        x = amplitude * fundamental[..., [2 * k for k in rows]]
        y = amplitude * fundamental[..., [2 * k + 1 for k in rows]]
        peaks = [np.maximum(np.abs(part).max(axis=-1), _LEAST) for part in (x, y)]
        surface = trace_surface(unit, devices, supply, found.voltage, (peaks[0], peaks[1]))
        for column, k in enumerate(rows):
            name = places[k].name
            current = positions[name] * surface.find_harmonic(x[..., column], y[..., column])
            # the half circuit carries one side's current; both sides together make twice
            shares[name] = 2 * carried[..., k] * current / (amplitude * end)
    return FilterHarmonic(
        frequency, amplitude, {place.name: shares[place.name] for place in places}
    )


def _find_phasors(found: RealisedFilter, frequency: float) -> tuple[ComplexArray, ComplexArray]:
    """Find, for 1 V, input and output voltage of every amplifier and the filter's output.

    Also what a current into each output makes at the end, at three times the frequency.
    """
    made = found.realisation
    net = found.network()
    present = {element.name for element in net.elements}
    names = [f"inject_{place.name}" for place in made.amplifiers]
    for name, place in zip(names, made.amplifiers, strict=True):
        if name not in present:
            net.add_current_source(name, "0", f"{place.output}_p")
    outputs: list[str | dict[str, float]] = []
    for place in made.amplifiers:
        element = None if place.element is None else made.find(place.element)
        ports = connect_amplifier(place, element)
        sign = 1.0 if ports["vip"].endswith("_p") else -1.0
        way = 1.0 if ports["vop"].endswith("_p") else -1.0
        outputs += [{f"{place.input}_p": sign}, {f"{place.output}_p": way}]
    outputs.append(found.output)
    f = np.array([frequency, 3 * frequency])
    both = transfers(net, [SOURCE, *names], outputs, f)
    return both[..., 0, :, 0], both[..., 1, -1, 1:]


def _group(
    plans: Mapping[str, AmplifierPlan],
) -> Sequence[tuple[AmplifierPlan, dict[str, int]]]:
    """Put positions of the same unit together, each with how many it has."""
    found: dict[int, tuple[AmplifierPlan, dict[str, int]]] = {}
    for name, plan in plans.items():
        # multiples of one unit share its transistors
        unit = found.setdefault(id(plan.transistors), (replace(plan, multiple=1), {}))
        unit[1][name] = plan.multiple
    return list(found.values())
