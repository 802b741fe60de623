"""What a circuit simulator would say of a plan, in one condition, at any supplies.

Every figure is computed when it is read, so that a search pays only for what it looks at.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.large import (
    InputRange,
    Swing,
    measure_input_range,
    measure_swing,
    measure_third_harmonic,
)
from gmid.amplifier.limits import Sensing, measure_sensing
from gmid.amplifier.matching import Offset, Rejection, measure_offset, measure_rejection
from gmid.amplifier.parting import take_condition
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
from gmid.amplifier.slewing import measure_slew_rate
from gmid.amplifier.symmetry import SideNetwork
from gmid.amplifier.topology import NO_RESISTOR, PROBE
from gmid.circuit.bias import Bias
from gmid.circuit.circuit import Circuit
from gmid.condition import Condition
from gmid.device.circuit_device import CircuitDevice
from gmid.errors import UnknownName, advise
from gmid.network import Network, Noise

Array = NDArray[np.float64]
Value = TypeVar("Value")

NOISE_FREQUENCIES = (1e3, 1e4, 1e5, 1e6, 1e7)
"""Where the input noise is reported [Hz]."""


@dataclass(frozen=True, eq=False)
class Prediction:
    """A plan at its bias point; figures have the leading axes of candidates and supplies.

    Parameters
    ----------
    plan : AmplifierPlan
        What was predicted.
    devices : mapping of str to Device or JointDevice
        Of one condition, or of several along the axes of the batch.
    supply : Supply
        What it is fed with.
    voltage : ndarray, shape (...)
        Supplies [V].
    reference_current : ndarray, shape (...)
        Reference current [A].
    solved : Bias, optional
        The bias point of the bench, inputs balanced; None where `origin` has it.
    origin : tuple of Prediction and int, optional
        A prediction in several conditions, and the place of this one on its first axis.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply())
    >>> found
    Prediction(a1 in tt/27, supplies 1.62 to 1.98 V, batch (3,))
    >>> bool((found.supply_current < 100e-6).all())
    True
    """

    plan: AmplifierPlan
    devices: Mapping[str, CircuitDevice]
    supply: Supply
    voltage: Array
    reference_current: Array
    solved: Bias | None
    origin: tuple[Prediction, int] | None = None
    _kept: dict[tuple[Any, ...], Any] = field(default_factory=dict, init=False, repr=False)

    def _keep(self, key: tuple[Any, ...], measure: Callable[[Prediction], Value]) -> Value:
        """Measure something once, for all conditions together where it can be."""
        if key not in self._kept:
            if self.origin is None:
                self._kept[key] = measure(self)
            else:
                whole, k = self.origin
                self._kept[key] = take_condition(whole._keep(key, measure), k, len(whole.batch))
        found: Value = self._kept[key]
        return found

    @cached_property
    def bias(self) -> Bias:
        """The bias point of the bench, inputs balanced."""
        if self.origin is None:
            assert self.solved is not None
            return self.solved
        whole, k = self.origin
        return whole.bias.pick_condition(k, self.devices)

    @property
    def circuit(self) -> Circuit:
        """The bench: amplifier, sources, load."""
        return self.bias.circuit if self.origin is None else self.origin[0].circuit

    @property
    def conditions(self) -> tuple[Condition, ...]:
        """Corners and temperatures; one, unless the devices are in several."""
        return next(iter(self.devices.values())).conditions

    @property
    def condition(self) -> Condition:
        """Corner and temperature of a prediction in a single condition."""
        (only,) = self.conditions
        return only

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes: candidates, conditions where there are several, supplies."""
        return self.bias.batch if self.origin is None else self.origin[0].batch[1:]

    def take_last(self, index: NDArray[np.intp]) -> Prediction:
        """Give the prediction at some places on the last axis, that of supplies.

        Parameters
        ----------
        index : ndarray of int, shape (k,)
            The places.

        Returns
        -------
        Prediction
            Another one, from the same bias points.
        """
        size = self.batch[-1]

        def take(values: Array) -> Array:
            return values[..., index] if values.ndim and values.shape[-1] == size > 1 else values

        devices = {
            name: device.at_place(device.place[index]) if device.place.ndim else device
            for name, device in self.devices.items()
        }
        return Prediction(
            self.plan, devices, self.supply, take(self.voltage), take(self.reference_current),
            self.bias.take_last(index, devices),
        )  # fmt: skip

    @property
    def node_voltages(self) -> dict[str, Array]:
        """Voltage of every node [V], those inside stacks included."""
        return self._keep(("nodes",), lambda found: found.bias.voltages)

    @cached_property
    def network(self) -> Network:
        """The bench at its bias point, linear."""
        return self.bias.linearise()

    @cached_property
    def differential_half(self) -> SideNetwork:
        """What differential signals see of the bench, with a source between the outputs."""
        half = SideNetwork(self.bias, ("vip", "vin"), differential=True)
        half.add_across(INJECTION, "vop")
        return half

    @cached_property
    def common_half(self) -> SideNetwork:
        """What common signals see of the bench."""
        return self._take_common(("vip", "vin", "vdd", PROBE))

    def _take_common(self, drives: tuple[str, ...]) -> SideNetwork:
        return SideNetwork(self.bias, drives, differential=False)

    @property
    def signal(self) -> SignalPath:
        """The differential path."""
        conductance = 1.0 / np.minimum(self.plan.load_resistance, NO_RESISTOR)
        capacitance = np.asarray(self.plan.load_capacitance, dtype=np.float64)
        return self._keep(("signal",), lambda found: measure_signal(
            found.differential_half, conductance, capacitance
        ))  # fmt: skip

    @property
    def common_mode(self) -> CommonModeLoop:
        """The common-mode loop."""
        return self._keep(("common mode",), lambda found: measure_common_mode(
            found.common_half, found.settled_error, loop_network=found.loop_half
        ))  # fmt: skip

    @property
    def loop_margin(self) -> Array:
        """Phase margin of the common-mode loop itself, which is what stability goes by [deg].

        The bench's probe does not see the load of the gates it drives, so its margin can be far
        too good; here both a voltage and a current are injected.  The smaller of the margins
        with and without the load resistors, since in a filter those carry no common-mode current.
        """
        return self._keep(("loop margin",), lambda found: np.minimum(
            measure_margin(found.loop_half, PROBE),
            measure_margin(found.loop_half.with_values({"rlp": NO_RESISTOR}), PROBE),
        ))  # fmt: skip

    @cached_property
    def loop_half(self) -> SideNetwork:
        """What common signals see of the bench, with no source but the probe."""
        return self._take_common((PROBE,))

    @property
    def settled_error(self) -> Array:
        """Output common mode less its reference [V]."""
        nodes = self.node_voltages
        return np.asarray(0.5 * (nodes["vop"] + nodes["von"]) - nodes["vcm"])

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
        f = tuple(np.ravel(np.asarray(frequency, dtype=np.float64)).tolist())
        return self._keep(
            ("noise", f), lambda found: measure_noise(found.differential_half, np.array(f))
        )

    @property
    def supply_current(self) -> Array:
        """Current drawn from the supply, the reference included [A]."""
        return self._keep(("supply",), lambda found: -np.asarray(found.bias.source_current("vdd")))

    @property
    def power(self) -> Array:
        """Power drawn from the supply [W]."""
        return np.asarray(self.voltage * self.supply_current)

    @property
    def headroom(self) -> dict[str, Array]:
        """By instance, vds beyond the edge of saturation [V]; of a stack, its upper unit's."""
        return self._keep(("headroom",), lambda found: {
            one.name: found.bias.headroom(one.name) for one in found.circuit.transistors
        })  # fmt: skip

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
        return self._keep(("id", name), lambda found: np.abs(found.bias.id(name)))

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

    @property
    def slew_rate(self) -> Array:
        """Slew rate of the differential output, half-way through a full step of the bench [V/s]."""
        return self._keep(("slew",), measure_slew_rate)

    @property
    def settling_time(self) -> Array:
        """Time in which a small step of the step bench settles to 1 % [s]."""
        return self._keep(("settling",), measure_settling)

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
        return self._keep(("swing", margin), lambda found: measure_swing(found, margin))

    @property
    def sensing(self) -> Sensing:
        """How far the outputs go apart until the common-mode loop no longer sees them rightly."""
        return self._keep(("sensing",), measure_sensing)

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
        return self._keep(("input", margin), lambda found: measure_input_range(found, margin))

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
        key = ("offset", *sorted(matching.items()))
        return self._keep(key, lambda found: measure_offset(found, matching))

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
        key = ("rejection", *sorted(matching.items()))
        return self._keep(key, lambda found: measure_rejection(found, matching))

    def __repr__(self) -> str:
        low, high = float(np.min(self.voltage)), float(np.max(self.voltage))
        span = f"supply {low:.4g} V" if low == high else f"supplies {low:.4g} to {high:.4g} V"
        where = ", ".join(map(str, self.conditions))
        return f"Prediction({self.plan.name} in {where}, {span}, batch {self.batch})"
