"""Third harmonic of a filter from the static currents of its amplifiers, solved from the tables.

Each amplifier is driven through one period by the sines that the linear filter puts at its input
and its output. What third harmonic its output current then has, the filter carries to the output
at three times the frequency; all amplifiers add up with their phases. Harmonics do not act back.
Two things do: the fundamental at an input grows until the current's fundamental is that of the
linear filter; and where the sensing falls behind, the common mode moves with the signal, through
the filter's elements at the inputs too, and changes what the amplifiers deliver there.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.filtering.circuit import SOURCE, connect_amplifier
from gmid.amplifier.filtering.realised import RealisedFilter
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.topology import NO_RESISTOR, build_circuit
from gmid.circuit.bias import Bias, solve_bias
from gmid.device.device import Device
from gmid.filters.elements import AmplifierModel
from gmid.filters.levels import measure_levels
from gmid.filters.realisation import Realisation
from gmid.network import transfers
from gmid.network.pencil import ComplexArray

Array = NDArray[np.float64]

_HALF = 16  # points in half a period; the other half is its image
_ANGLES = np.pi * np.arange(_HALF) / _HALF
_EVEN = np.arange(0, 9, 2)  # harmonics that the common mode has
_SMALL = 0.02  # of the amplitude, where the amplifiers are linear
_PASSES = 2
_SLOW = 1e-3  # of the fundamental, what stands for DC
_STRONG = 1e3  # conductance that holds an output's common mode [S]


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
    sines = amplitude * np.moveaxis(fundamental[..., :-1], -1, 0)
    input, output = sines[0::2], sines[1::2]
    run = _Run(found, devices, supply, *_share_common_mode(found.realisation, frequency))
    gain = run.drive(_SMALL * input, 0 * output, 1) / (_SMALL * input)
    linear = gain * input + run.drive(0 * input, _SMALL * output, 1) / _SMALL
    for _ in range(_PASSES):
        input = input + (linear - run.drive(input, output, 1)) / gain
    third = run.drive(input, output, 3)
    # the half circuit carries one side's current; both sides together make twice
    shares = {
        place.name: 2 * carried[..., k] * third[k] / (amplitude * end)
        for k, place in enumerate(places)
    }
    return FilterHarmonic(frequency, amplitude, shares)


class _Run:
    """All amplifiers through half a period; arrays have axes (angles, positions, ...)."""

    def __init__(
        self, found: RealisedFilter, devices: Mapping[str, Device], supply: Supply,
        reach: ComplexArray, load: Array,
    ) -> None:  # fmt: skip
        self.found, self.devices, self.supply = found, devices, supply
        self.reach, self.load = reach, load
        self.names = [place.name for place in found.realisation.amplifiers]
        self._shift: Array | None = None
        self._starts: dict[int, Bias] = {}

    def drive(self, input: ComplexArray, output: ComplexArray, harmonic: int) -> ComplexArray:
        """Give a harmonic of the output currents with sines at inputs and outputs [A].

        The common mode at the inputs is what that of the outputs made of it the last time.
        """
        turn = np.conj(_turn(1, input.ndim + 1))
        current, common_mode = self._solve((turn * input).real, (turn * output).real)
        self._shift = _spread(self.reach, common_mode)
        found: ComplexArray = 2 * np.mean(current * _turn(harmonic, current.ndim), axis=0)
        return found

    def _solve(self, input: Array, output: Array) -> tuple[Array, Array]:
        """Solve output currents [A] and common modes, less the intended one [V]."""
        shift = np.zeros(input.shape) if self._shift is None else self._shift
        current, common_mode = np.zeros(input.shape), np.zeros(input.shape)
        voltage, supply = self.found.voltage, self.supply
        for k, (unit, positions) in enumerate(_group(self.found.plans)):
            rows = [self.names.index(name) for name in positions]
            stretch = (slice(None), *(None,) * (input.ndim - 2))
            many = np.array([positions[self.names[row]] for row in rows], dtype=float)[stretch]
            circuit = build_circuit(
                unit, voltage=voltage, difference=input[:, rows], loaded=False,
                vcm=supply.common_mode.at(voltage),
                input_level=supply.input_level.at(voltage) + shift[:, rows],
                reference_current=supply.reference_current,
            )  # fmt: skip
            circuit.add_voltage_source("hold", "vop", "von", output[:, rows])
            resistance = np.minimum(
                many / np.maximum(self.load[rows], 1 / NO_RESISTOR)[stretch], NO_RESISTOR
            )
            for side in "pn":
                circuit.add_resistor(f"rhold{side}", f"vo{side}", "vcm", resistance)
            bias = solve_bias(circuit, self.devices, start=self._starts.get(k))
            self._starts[k] = bias
            current[:, rows] = bias.source_current("hold") * many
            mean = 0.5 * (bias.voltage("vop") + bias.voltage("von"))
            common_mode[:, rows] = mean - bias.voltage("vcm")
        return current, common_mode


def _turn(harmonic: int, axes: int) -> ComplexArray:
    """Give ``exp(-j k t)`` along the first of some axes."""
    turned: ComplexArray = np.exp(-1j * harmonic * _ANGLES)
    return turned.reshape(-1, *(1,) * (axes - 1))


def _share_common_mode(realisation: Realisation, frequency: float) -> tuple[ComplexArray, Array]:
    """Find how far the common mode of each output reaches each input, and what it has to drive.

    Returns the reach at each of the even harmonics, shape (harmonics, inputs, outputs), and the
    conductance of the filter at each output, the others held [S].
    """
    places = realisation.amplifiers
    held = AmplifierModel(gm_total=0.0, output_conductance=_STRONG)
    net = realisation.network({place.name: held for place in places}, common_mode=True)
    names = [f"push_{place.name}" for place in places]
    for name, place in zip(names, places, strict=True):
        net.add_current_source(name, "0", place.output)
    ends = [place.input for place in places] + [place.output for place in places]
    found = transfers(net, names, ends, frequency * np.maximum(_EVEN, _SLOW))
    inputs, outputs = found[:, : len(places)], found[:, len(places) :]
    own = 1.0 / np.einsum("hkk->hk", outputs)[0].real
    load = own - _STRONG * np.round(own / _STRONG)
    return inputs * _STRONG, load


def _spread(reach: ComplexArray, common_mode: Array) -> Array:
    """Give the common mode at the inputs from that at the outputs, (angles, positions, ...)."""
    axes, found = common_mode.ndim, np.zeros(common_mode.shape)
    for harmonic, shares in zip(_EVEN, reach, strict=True):
        line = np.mean(common_mode * _turn(int(harmonic), axes), axis=0)
        there = np.tensordot(shares, line, axes=1) * (2 if harmonic else 1)
        found += (there * np.conj(_turn(int(harmonic), axes))).real
    return found


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
