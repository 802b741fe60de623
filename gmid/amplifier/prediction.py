"""What a circuit simulator would say of a plan, in one condition, at any supplies.

Every figure is computed when it is read, so that a search pays only for what it looks at.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.large import (
    InputRange,
    Swing,
    measure_input_range,
    measure_slew_rate,
    measure_swing,
    measure_third_harmonic,
)
from gmid.amplifier.matching import Offset, Rejection, measure_offset, measure_rejection
from gmid.amplifier.plan import AmplifierPlan, Matching, Supply
from gmid.amplifier.settling import measure_settling
from gmid.amplifier.signal import (
    INJECTION,
    CommonModeLoop,
    SignalPath,
    measure_common_mode,
    measure_margin,
    measure_noise,
    measure_signal,
)
from gmid.amplifier.symmetry import HalfNetwork
from gmid.amplifier.topology import NO_RESISTOR, PROBE, build_circuit
from gmid.circuit.bias import Bias, solve_bias
from gmid.circuit.circuit import Circuit
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import UnknownName, advise
from gmid.network import Network, Noise

Array = NDArray[np.float64]

NOISE_FREQUENCIES = (1e3, 1e4, 1e5, 1e6, 1e7)
"""Where the input noise is reported [Hz]."""


@dataclass(frozen=True, eq=False)
class Prediction:
    """A plan at its bias point; figures have the leading axes of candidates and supplies.

    Parameters
    ----------
    plan : AmplifierPlan
        What was predicted.
    devices : mapping of str to Device
        Of one condition.
    supply : Supply
        What it is fed with.
    voltage : ndarray, shape (...)
        Supplies [V].
    reference_current : ndarray, shape (...)
        Reference current [A].
    bias : Bias
        The bias point of the bench, inputs balanced.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> found = predict(example_plan(), example_devices(), example_supply())
    >>> found
    Prediction(a1 in tt/27, supplies 1.62 to 1.98 V, batch (3,))
    >>> bool((found.supply_current < 100e-6).all())
    True
    """

    plan: AmplifierPlan
    devices: Mapping[str, Device]
    supply: Supply
    voltage: Array
    reference_current: Array
    bias: Bias
    _swings: dict[float, Swing] = field(default_factory=dict, init=False, repr=False)

    @property
    def circuit(self) -> Circuit:
        """The bench: amplifier, sources, load."""
        return self.bias.circuit

    @property
    def condition(self) -> Condition:
        """Corner and temperature."""
        return next(iter(self.devices.values())).condition

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes: candidates, supplies."""
        return self.circuit.batch

    @cached_property
    def node_voltages(self) -> dict[str, Array]:
        """Voltage of every node [V], those inside stacks included."""
        return self.bias.voltages

    @cached_property
    def network(self) -> Network:
        """The bench at its bias point, linear."""
        return self.bias.linearise()

    @cached_property
    def differential_half(self) -> HalfNetwork:
        """The differential half of the bench, with a source between the outputs."""
        network = self.bias.linearise(drives=("vip", "vin"))
        network.add_current_source(INJECTION, "von", "vop")
        return HalfNetwork(network, differential=True)

    @cached_property
    def common_half(self) -> HalfNetwork:
        """The common half of the bench."""
        return self._take_common(("vip", "vin", "vdd", PROBE))

    def _take_common(self, drives: tuple[str, ...]) -> HalfNetwork:
        return HalfNetwork(self.bias.linearise(drives=drives, noise=False), differential=False)

    @cached_property
    def signal(self) -> SignalPath:
        """The differential path."""
        conductance = 1.0 / np.minimum(self.plan.load_resistance, NO_RESISTOR)
        capacitance = np.asarray(self.plan.load_capacitance, dtype=np.float64)
        return measure_signal(self.differential_half, conductance, capacitance)

    @cached_property
    def common_mode(self) -> CommonModeLoop:
        """The common-mode loop."""
        return measure_common_mode(
            self.common_half, self.settled_error, loop_network=self._take_common((PROBE,))
        )

    @cached_property
    def loop_margin(self) -> Array:
        """Phase margin of the common-mode loop itself, which is what stability goes by [deg].

        The bench's probe does not see the load of the gates it drives, so its margin can be far
        too good; here both a voltage and a current are injected.  The smaller of the margins
        with and without the load resistors, since in a filter those carry no common-mode current.
        """
        network = self.bias.linearise(drives=(PROBE,), noise=False)
        margins = []
        for loaded in (True, False):
            if not loaded:
                network = network.with_values({"rlp": NO_RESISTOR, "rln": NO_RESISTOR})
            half = HalfNetwork(network, differential=False)
            margins.append(measure_margin(half, PROBE))
        return np.minimum(*margins)

    @property
    def settled_error(self) -> Array:
        """Output common mode less its reference [V]."""
        return np.asarray(self._mean_output - self.bias.voltage("vcm"))

    @property
    def _mean_output(self) -> Array:
        return 0.5 * (self.bias.voltage("vop") + self.bias.voltage("von"))

    def noise(self, frequency: ArrayLike = NOISE_FREQUENCIES) -> Noise:
        """Give the noise of the bench, with the share of every device.

        Parameters
        ----------
        frequency : array_like, shape (nf,)
            [Hz].

        Returns
        -------
        Noise
            `input_density` [V/sqrt(Hz)] is referred to the differential input.
        """
        return measure_noise(self.differential_half, frequency)

    @cached_property
    def supply_current(self) -> Array:
        """Current drawn from the supply, the reference included [A]."""
        return -np.asarray(self.bias.source_current("vdd"))

    @property
    def power(self) -> Array:
        """Power drawn from the supply [W]."""
        return np.asarray(self.voltage * self.supply_current)

    @cached_property
    def headroom(self) -> dict[str, Array]:
        """By instance, vds beyond the edge of saturation [V]; of a stack, its upper unit's."""
        return {one.name: self.bias.headroom(one.name) for one in self.circuit.transistors}

    @cached_property
    def saturation(self) -> Array:
        """Smallest headroom of all instances [V]."""
        return np.asarray(np.min(np.stack(
            [np.broadcast_to(value, self.batch) for value in self.headroom.values()]
        ), axis=0))  # fmt: skip

    def instance_current(self, name: str) -> Array:
        """Give the drain current of an instance, all its units together.

        Parameters
        ----------
        name : str
            Such as ``pair_p``.

        Returns
        -------
        ndarray, shape (...)
            Magnitude [A].
        """
        names = [one.name for one in self.circuit.transistors]
        if name not in names:
            raise UnknownName(f"there is no instance {name}.", hint=advise(name, names))
        return np.abs(self.bias.id(name))

    @cached_property
    def balance(self) -> Array:
        """Current of `control` over that of `direct` [-]."""
        control = self.instance_current("control_p") + self.instance_current("control_n")
        direct = self.instance_current("direct_p") + self.instance_current("direct_n")
        return np.asarray(control / direct)

    @cached_property
    def gate_area(self) -> Array:
        """Sum of all gate areas, width times length [m^2]."""
        total = np.zeros(())
        for one in self.circuit.transistors:
            width = self.devices[one.device].unit.width
            total = total + width * one.length * one.count * one.stack
        return np.asarray(total)

    @cached_property
    def slew_rate(self) -> Array:
        """Slew rate of the differential output into the load [V/s]."""
        return measure_slew_rate(self)

    @cached_property
    def settling_time(self) -> Array:
        """Time in which a small step of the step bench settles to 1 % [s]."""
        return measure_settling(self)

    def output_swing(self, margin: float = 0.05) -> Swing:
        """Measure how far the differential output goes.

        Parameters
        ----------
        margin : float
            Headroom that every transistor keeps [V].

        Returns
        -------
        Swing
            By gain and by saturation.
        """
        if margin not in self._swings:
            self._swings[margin] = measure_swing(self, margin)
        return self._swings[margin]

    def input_range(self, margin: float = 0.05) -> InputRange:
        """Measure the input common-mode range.

        Parameters
        ----------
        margin : float
            Headroom that every transistor keeps [V].

        Returns
        -------
        InputRange
            Its ends.
        """
        return measure_input_range(self, margin)

    def third_harmonic(self, amplitude: ArrayLike) -> Array:
        """Measure the static third harmonic of the open-loop bench.

        Parameters
        ----------
        amplitude : array_like, shape (...)
            Peak of the differential output [V].

        Returns
        -------
        ndarray, shape (...)
            Over the fundamental [-].
        """
        return measure_third_harmonic(self, amplitude)

    def offset(self, matching: Mapping[str, Matching]) -> Offset:
        """Measure the input offset that mismatch makes.

        Parameters
        ----------
        matching : mapping of str to Matching
            By device; a device that is not there has none.

        Returns
        -------
        Offset
            Its sigma, and the part of each place.
        """
        return measure_offset(self, matching)

    def rejection(self, matching: Mapping[str, Matching]) -> Rejection:
        """Measure how far mismatch spoils the rejection of supply and input common mode.

        Parameters
        ----------
        matching : mapping of str to Matching
            By device; a device that is not there has none.

        Returns
        -------
        Rejection
            At one sigma.
        """
        return measure_rejection(self, matching)

    def __repr__(self) -> str:
        low, high = float(np.min(self.voltage)), float(np.max(self.voltage))
        span = f"supply {low:.4g} V" if low == high else f"supplies {low:.4g} to {high:.4g} V"
        return f"Prediction({self.plan.name} in {self.condition}, {span}, batch {self.batch})"


def predict(
    plan: AmplifierPlan, devices: Mapping[str, Device], supply: Supply, *,
    voltage: ArrayLike | None = None, reference_current: ArrayLike | None = None,
    start: Bias | None = None,
) -> Prediction:  # fmt: skip
    """Solve the bias point of a plan in one condition; all figures follow from it.

    Parameters
    ----------
    plan : AmplifierPlan
        Its numbers may have leading axes, which broadcast with the supplies.
    devices : mapping of str to Device
        At least those of the plan, all of one condition.
    supply : Supply
        What it is fed with.
    voltage : array_like, shape (...), optional
        Supplies [V]; low, nominal and high by default, as the last axis.
    reference_current : array_like, shape (...), optional
        The nominal one by default [A].
    start : Bias, optional
        A solution nearby, to start from.

    Returns
    -------
    Prediction
        Figures are computed when read.

    Raises
    ------
    NoSolution
        If there is no bias point; the message names condition and node.
    OutOfReach
        If a length or the solution lies outside the table.
    UnknownName
        If a device is missing.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> round(float(found.node_voltages["tail"]), 2)
    0.4
    """
    levels = supply.voltages if voltage is None else np.asarray(voltage, dtype=np.float64)
    current = supply.reference_current if reference_current is None else reference_current
    circuit = build_circuit(
        plan, voltage=levels, vcm=supply.common_mode.at(levels),
        input_level=supply.input_level.at(levels), reference_current=current,
    )  # fmt: skip
    bias = solve_bias(circuit, devices, start=start).require()
    return Prediction(plan, devices, supply, levels, np.asarray(current, dtype=np.float64), bias)
