"""A realised filter: all of its transistors at their bias point, linear around it.

Nothing is reduced to a model: the half circuit of every amplifier stands in the network.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.filtering.circuit import (
    SOURCE,
    FilterCircuit,
    build_filter_circuit,
    list_pieces,
)
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.topology import build_circuit
from gmid.circuit.bias import Bias, solve_bias
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.filters.noise import FilterNoise
from gmid.filters.realisation import Realisation
from gmid.network import Network, Transfer, find_poles, integrate_noise
from gmid.network.pencil import ComplexArray
from gmid.network.stamps import GROUND

Array = NDArray[np.float64]

_NOISE_ACCURACY = 1e-4


@dataclass(frozen=True, eq=False)
class RealisedFilter:
    """A filter down to its transistors in one condition; figures have an axis of supplies.

    Parameters
    ----------
    realisation : Realisation
        Sections and elements.
    plans : mapping of str to AmplifierPlan
        By position.
    built : FilterCircuit
        The circuit.
    bias : Bias
        Its bias point.
    voltage : ndarray, shape (...)
        Supplies [V].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> found = realise_filter(made, {"A1": example_plan()}, example_devices(), example_supply())
    >>> found
    RealisedFilter(1 amplifiers in tt/27, supplies 1.62 to 1.98 V)
    >>> bool((abs(found.respond([1e6])) < 1).all())
    True
    """

    realisation: Realisation
    plans: Mapping[str, AmplifierPlan]
    built: FilterCircuit
    bias: Bias
    voltage: Array
    _networks: dict[str, Network] = field(default_factory=dict, repr=False)
    _poles: dict[bool, ComplexArray] = field(default_factory=dict, repr=False)

    @property
    def condition(self) -> Condition:
        """Corner and temperature."""
        return self.bias.conditions[0]

    @property
    def output(self) -> str:
        """Output node of the kept side."""
        return f"{self.realisation.output}_p"

    @cached_property
    def node_voltages(self) -> dict[str, Array]:
        """Voltage of every node [V]."""
        return self.bias.voltages

    @cached_property
    def supply_current(self) -> Array:
        """Current of all amplifiers, their references included [A]."""
        return -np.asarray(self.bias.source_current("vdd"))

    @cached_property
    def settled_error(self) -> Array:
        """Largest distance of an amplifier's output from the common mode [V]."""
        level = self.bias.voltage("vcm")
        ends = [self.bias.voltage(f"{node}_p") - level for node in self.realisation.nodes]
        return np.asarray(np.max(np.abs(np.stack(ends)), axis=0))

    @cached_property
    def _common(self) -> Bias:
        """The joined circuit, which signals common to both sides see."""
        fold = self.bias.fold
        assert fold is not None
        known = {
            node: value for node, value in self.node_voltages.items() if node in fold.circuit.nodes
        }
        return solve_bias(fold.circuit, self.bias.devices, start=known)

    def network(
        self, *, rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0, common_mode: bool = False
    ) -> Network:
        """Give the linear network at a corner of the passive elements.

        Parameters
        ----------
        rscale, cscale : array_like, shape (...)
            Multiply the filter's resistors, capacitors; broadcast with the supplies [-].
        common_mode : bool
            The circuit that common signals see; the half circuit of differential ones otherwise.

        Returns
        -------
        Network
            Driven by `vin_p`.
        """
        kind = "common" if common_mode else "half"
        if kind not in self._networks:
            self._networks[kind] = (
                self._common.linearise(drives=[SOURCE], noise=False) if common_mode
                else self.bias.linearise_half(drives=[SOURCE])
            )  # fmt: skip
        net = self._networks[kind]
        r, c = (np.asarray(scale, dtype=np.float64) for scale in (rscale, cscale))
        if r.shape == c.shape == () and r == c == 1.0:
            return net
        return net.with_values(_scale_pieces(net, self.built, r, c))

    def respond(
        self, frequency: ArrayLike, *, rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0
    ) -> ComplexArray:
        """Compute the response of the filter.

        Parameters
        ----------
        frequency : array_like, shape (nf,)
            [Hz].
        rscale, cscale : array_like, shape (...)
            Corner of the resistors, of the capacitors [-].

        Returns
        -------
        ndarray of complex, shape (..., nf)
            From the differential input to the differential output [-].
        """
        net = self.network(rscale=rscale, cscale=cscale)
        return Transfer(net, SOURCE, self.output).scan(np.asarray(frequency, dtype=np.float64))

    def noise(
        self, band: tuple[float, float], *, rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0
    ) -> FilterNoise:
        """Integrate the noise at the output, with the share of every element and amplifier.

        Parameters
        ----------
        band : tuple of float
            [Hz].
        rscale, cscale : array_like, shape (...)
            Corner of the resistors, of the capacitors [-].

        Returns
        -------
        FilterNoise
            Differential; amplifiers by position.
        """
        net = self.network(rscale=rscale, cscale=cscale)
        found = integrate_noise(net, self.output, band, accuracy=_NOISE_ACCURACY)
        owners = {piece.name: piece.owner for piece in self.built.pieces}
        shares: dict[str, Array] = {}
        for owner, power in found.by_owner().items():
            name = owners.get(owner, owner.partition("_")[0])
            shares[name] = shares.get(name, np.zeros(())) + 2 * power
        return FilterNoise(band, shares)

    def poles(
        self, *, rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0, common_mode: bool = False
    ) -> ComplexArray:
        """Find the poles of the signal, or of the common mode.

        Parameters
        ----------
        rscale, cscale : array_like, shape (...)
            Corner of the resistors, of the capacitors [-].
        common_mode : bool
            Of the common mode.

        Returns
        -------
        ndarray of complex, shape (..., n)
            [rad/s].
        """
        r, c = np.asarray(rscale), np.asarray(cscale)
        if np.any(r != 1.0) or np.any(c != 1.0):
            return find_poles(self.network(rscale=r, cscale=c, common_mode=common_mode))
        if common_mode not in self._poles:
            self._poles[common_mode] = find_poles(self.network(common_mode=common_mode))
        found, batch = self._poles[common_mode], np.broadcast_shapes(r.shape, c.shape)
        batch = np.broadcast_shapes(batch, found.shape[:-1])
        return np.asarray(np.broadcast_to(found, (*batch, found.shape[-1])))

    def __repr__(self) -> str:
        low, high = float(np.min(self.voltage)), float(np.max(self.voltage))
        return (
            f"RealisedFilter({len(self.plans)} amplifiers in {self.condition}, supplies "
            f"{low:.4g} to {high:.4g} V)"
        )


def _scale_pieces(net: Network, built: FilterCircuit, r: Array, c: Array) -> dict[str, Any]:
    """Give the new values of the filter's own elements, their noise with them."""
    present = {element.name: element for element in net.elements}
    noisy = {source.name: source for source in net.noise_sources}
    changed: dict[str, Any] = {}
    for piece in built.pieces:
        if piece.name not in present or piece.scale not in ("rscale", "cscale"):
            continue
        values = present[piece.name].values
        if piece.scale == "cscale":
            changed[piece.name] = {"capacitance": values["capacitance"] * c}
            continue
        key = "resistance" if "resistance" in values else "conductance"
        changed[piece.name] = {key: values[key] * (r if key == "resistance" else 1.0 / r)}
        heat = f"{piece.name}.thermal"
        if heat in noisy:
            changed[heat] = {"white": noisy[heat].white / r}
    return changed


def realise_filter(
    realisation: Realisation, plans: Mapping[str, AmplifierPlan], devices: Mapping[str, Device],
    supply: Supply, *, voltage: ArrayLike | None = None,
    start: RealisedFilter | Mapping[str, Array] | None = None,
) -> RealisedFilter:  # fmt: skip
    """Solve the bias point of a whole filter in one condition.

    Parameters
    ----------
    realisation : Realisation
        Sections and elements.
    plans : mapping of str to AmplifierPlan
        By position.
    devices : mapping of str to Device
        Of one condition.
    supply : Supply
        What the amplifiers are fed with.
    voltage : array_like, shape (...), optional
        Supplies [V]; low, nominal and high by default.
    start : RealisedFilter or mapping of str to ndarray, optional
        Solution nearby, or node voltages to begin from [V].

    Returns
    -------
    RealisedFilter
        Figures are computed when asked for.

    Raises
    ------
    NoSolution
        If there is no bias point.
    OutOfReach
        If a length or the solution lies outside the table.
    UnknownName
        If a position has no amplifier, or a device is missing.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> found = realise_filter(made, {"A1": example_plan()}, example_devices(), example_supply(),
    ...                        voltage=1.8)
    >>> bool((found.poles().real < 0).all()), found.settled_error.shape
    (True, ())
    """
    levels = supply.voltages if voltage is None else np.asarray(voltage, dtype=np.float64)
    built = build_filter_circuit(realisation, plans, supply, voltage=levels)
    known = start.node_voltages if isinstance(start, RealisedFilter) else start
    if known is None:
        known = _start_alone(realisation, plans, devices, supply, levels)
    bias = solve_bias(built.circuit, devices, start=known, mirror=built.mirror).require()
    return RealisedFilter(realisation, plans, built, bias, levels)


def realise_everywhere(
    realisation: Realisation, plans: Mapping[str, AmplifierPlan],
    bench: Iterable[tuple[Condition, Mapping[str, Device]]], supply: Supply,
) -> Iterator[tuple[RealisedFilter, Mapping[str, Device]]]:  # fmt: skip
    """Solve a whole filter in one condition after the other, each from the one before.

    Parameters
    ----------
    realisation : Realisation
        Sections and elements.
    plans : mapping of str to AmplifierPlan
        By position.
    bench : iterable of (Condition, mapping of str to Device)
        Conditions and devices.
    supply : Supply
        What the amplifiers are fed with.

    Yields
    ------
    case : RealisedFilter
        The filter in the next condition.
    devices : mapping of str to Device
        Of that condition.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> devices = example_devices()
    >>> bench = [(devices["nmos"].condition, devices)]
    >>> [case for case, _ in realise_everywhere(made, {"A1": example_plan()}, bench,
    ...                                         example_supply())]
    [RealisedFilter(1 amplifiers in tt/27, supplies 1.62 to 1.98 V)]
    """
    before: RealisedFilter | None = None
    for _, devices in bench:
        before = realise_filter(realisation, plans, devices, supply, start=before)
        yield before, devices


def _start_alone(
    realisation: Realisation, plans: Mapping[str, AmplifierPlan], devices: Mapping[str, Device],
    supply: Supply, voltage: Array,
) -> dict[str, Array]:  # fmt: skip
    """Begin with every amplifier as it is by itself, and the filter's nodes at the common mode."""
    level = supply.common_mode.at(voltage)
    found = {
        node: level for piece in list_pieces(realisation) for node in piece.nodes if node != GROUND
    }
    alone: dict[int, dict[str, Array]] = {}
    for position, plan in plans.items():
        if id(plan) not in alone:
            circuit = build_circuit(
                plan, voltage=voltage, vcm=level, input_level=level,
                reference_current=supply.reference_current,
            )  # fmt: skip
            alone[id(plan)] = solve_bias(circuit, devices).voltages
        found |= {f"{position}_{node}": value for node, value in alone[id(plan)].items()}
    return found
