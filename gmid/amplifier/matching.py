"""Mismatch: input offset with the part of every place, and what it makes of rejection."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.plan import Matching
from gmid.amplifier.signal import COMMON, DIFFERENTIAL, OUTPUT, to_db
from gmid.circuit.bias import solve_bias
from gmid.circuit.elements import Transistor
from gmid.network import Network, compute_noise, transfers

if TYPE_CHECKING:
    from gmid.amplifier.prediction import Prediction

Array = NDArray[np.float64]


_STEP = 1e-3  # relative change of one transistor's current


@dataclass(frozen=True, eq=False)
class Rejection:
    """What comes through to the differential output at one sigma of mismatch, at DC.

    Parameters
    ----------
    supply, common_mode : ndarray, shape (...)
        Differential output for 1 V at the supply, and at both inputs [-].
    dc_gain : ndarray, shape (...)
        Differential gain [-].

    Examples
    --------
    >>> found = Rejection(np.array(0.1), np.array(0.2), np.array(100.0))
    >>> float(found.supply_rejection_db), round(float(found.common_mode_rejection_db), 1)
    (60.0, 54.0)
    """

    supply: Array
    common_mode: Array
    dc_gain: Array

    @property
    def supply_rejection_db(self) -> Array:
        """Differential gain over that from the supply, at one sigma [dB]."""
        return to_db(self.dc_gain / self.supply)

    @property
    def common_mode_rejection_db(self) -> Array:
        """Differential gain over that from the input common mode, at one sigma [dB]."""
        return to_db(self.dc_gain / self.common_mode)


@dataclass(frozen=True, eq=False)
class Offset:
    """Random offset at the differential input.

    Parameters
    ----------
    variance : mapping of str to ndarray, shape (...)
        By place [V^2].

    Examples
    --------
    >>> Offset({"pair": np.array(9e-6), "load": np.array(16e-6)}).sigma.round(6).tolist()
    0.005
    """

    variance: Mapping[str, Array]

    @property
    def sigma(self) -> Array:
        """Standard deviation [V]."""
        return np.asarray(np.sqrt(np.sum(np.stack([*self.variance.values()]), axis=0)))

    def __repr__(self) -> str:
        return f"Offset(from {', '.join(self.variance)})"


def current_variance(
    unit: Transistor, width: float, gm: Array, current: Array, matching: Matching
) -> Array:
    """Give the variance of one transistor's drain current.

    Parameters
    ----------
    unit : Transistor
        The instance.
    width : float
        Width of one unit [m].
    gm, current : ndarray, shape (...)
        Of the instance [S], [A].
    matching : Matching
        Of its device; sigma of a difference of two, so one has half the variance.

    Returns
    -------
    ndarray, shape (...)
        [A^2].

    References
    ----------
    M. Pelgrom, A. Duinmaijer, A. Welbers, "Matching properties of MOS transistors", IEEE J.
    Solid-State Circuits 24, 1989.

    Examples
    --------
    >>> one = Transistor("m1", "nmos", "n", "d", "g", "0", "0", np.array(1e-6), np.array(2.0))
    >>> found = current_variance(one, 2e-6, np.array(1e-4), np.array(1e-5), Matching(4e-9))
    >>> float(np.sqrt(found).round(10))
    1.414e-07
    """
    area = width * unit.count * unit.length
    relative = (gm * matching.avt) ** 2 + (current * matching.abeta) ** 2
    return np.asarray(relative / (2.0 * area))


def measure_offset(found: Prediction, matching: Mapping[str, Matching]) -> Offset:
    """Refer the mismatch of every transistor to the differential input.

    Each transistor's current is moved by its own sigma, independent of all others; the
    network carries it to the output.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    matching : mapping of str to Matching
        By device; a device that is not there has none.

    Returns
    -------
    Offset
        By place, in the order of the circuit.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> offset = measure_offset(found, {"nmos": Matching(3.5e-9), "pmos": Matching(3.5e-9)})
    >>> bool(1e-3 < offset.sigma < 10e-3)
    True
    """
    quiet = found.bias.linearise(noise=False)
    roles = _add_mismatch(found, quiet, matching)
    noise = compute_noise(quiet, OUTPUT, [0.0], source=DIFFERENTIAL)
    assert noise.gain is not None
    variance: dict[str, Array] = {}
    for k, name in enumerate(noise.names):
        part = noise.shares[..., 0, k] / np.abs(noise.gain[..., 0]) ** 2
        variance[roles[name]] = variance.get(roles[name], np.zeros(())) + part
    return Offset(variance)


def _add_mismatch(
    found: Prediction, network: Network, matching: Mapping[str, Matching]
) -> dict[str, str]:
    """Put the current variance of every unit in the place of its noise."""
    none = Matching(0.0)
    roles = {}
    for one in found.circuit.transistors:
        width = found.devices[one.device].unit.width
        rule = matching.get(one.device, none)
        for unit in one.units:
            gm = network.find(unit.name).values["conductance"][..., 1, 0]
            variance = current_variance(unit, width, gm, found.bias.id(one.name), rule)
            network.add_noise(unit.name + ".match", unit.drain, unit.source, white=variance)
            roles[unit.name + ".match"] = one.role
    return roles


def measure_rejection(found: Prediction, matching: Mapping[str, Matching]) -> Rejection:
    """Measure how far mismatch spoils the rejection of supply and input common mode.

    The current of every transistor is moved in turn, bias point and all; the changes of the
    gains add up as variances. A threshold's mismatch counts by the current that it moves.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    matching : mapping of str to Matching
        By device; a device that is not there has none.

    Returns
    -------
    Rejection
        At one sigma.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> rules = {"nmos": Matching(3.5e-9), "pmos": Matching(3.5e-9)}
    >>> bool(20 < measure_rejection(found, rules).supply_rejection_db < 100)
    True
    """
    circuit, spreads = found.circuit, []
    moved: dict[str, dict[str, Array]] = {}
    size = len(circuit.transistors)
    for k, one in enumerate(circuit.transistors):
        tilt = np.ones((size, *(1,) * len(found.batch)))
        tilt[k] += _STEP
        moved[one.name] = {"count": one.count * tilt}
        spreads.append(_relative_spread(found, one, matching.get(one.device, Matching(0.0))))
    bias = solve_bias(circuit.with_values(moved), found.devices, start=found.bias)
    network = bias.linearise(drives=("vdd", *COMMON), noise=False)
    parts = transfers(network, ["vdd", COMMON], [OUTPUT], 0.0).real[..., 0, :]
    slopes = parts / _STEP * np.stack(spreads)[..., None]
    sigma = np.sqrt(np.sum(slopes**2, axis=0))
    return Rejection(sigma[..., 0], sigma[..., 1], np.abs(found.signal.dc_gain))


def _relative_spread(found: Prediction, one: Transistor, rule: Matching) -> Array:
    """Give sigma of one transistor's relative current; a stack counts as one long channel."""
    area = found.devices[one.device].unit.width * one.count * one.length * one.stack
    efficiency = found.bias.gm_over_id(one.name)
    spread = np.hypot(efficiency * rule.avt, rule.abeta) / np.sqrt(2.0 * area)
    return np.broadcast_to(spread, found.batch)
