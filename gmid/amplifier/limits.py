"""How far the sensing of the common mode goes along with the outputs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.large import GAIN_DROP, Names
from gmid.amplifier.signal import OUTPUT
from gmid.circuit.bias import Bias, solve_bias
from gmid.network import transfers

if TYPE_CHECKING:
    from gmid.amplifier.prediction import Prediction

Array = NDArray[np.float64]

_SENSING = ("follower", "follower_tail", "sense_pair", "sense_tail", "error_pair", "error_tail")
_POINTS = 10
_FINE = 7


@dataclass(frozen=True, eq=False)
class Sensing:
    """How far the outputs go apart until the common-mode loop no longer sees them rightly.

    Parameters
    ----------
    peak : ndarray, shape (...)
        Peak of the differential output at which one output's gain to the gates of `control`
        has fallen by 3 dB [V]; infinite where both hold throughout.
    starved : ndarray of str, shape (...)
        Instance of the sensing that has lost most of its current there; empty where it holds.

    Examples
    --------
    >>> one = Sensing(np.array(0.21), np.array("sense_pair_p"))
    >>> float(one.peak), str(one.starved)
    (0.21, 'sense_pair_p')
    """

    peak: Array
    starved: Names


def measure_sensing(found: Prediction) -> Sensing:
    """Measure the range of the common-mode sensing.

    A follower cuts off or crushes its current source, a pair is steered to one side; resistors
    have no such limit.

    Parameters
    ----------
    found : Prediction
        The amplifier.

    Returns
    -------
    Sensing
        Its range, with the common-mode loop closed.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> float(measure_sensing(found).peak)
    inf
    """
    batch = found.batch
    if found.plan.common_mode_sense == "resistors":
        return Sensing(np.full(batch, np.inf), np.full(batch, "", dtype=np.str_))
    scale = 2.5 * found.voltage / np.abs(found.signal.dc_gain)
    inputs = _along(np.linspace(0.0, 1.0, _POINTS) ** 1.5, np.broadcast_to(scale, batch))
    bias = _solve_at(found, inputs, None)
    gain = _sensing_gain(bias)
    left = gain / gain[0] - GAIN_DROP
    end = _first_end(left)
    holds = _take(left, end) > 0
    before = np.maximum(end - 1, 0)
    share = np.linspace(0.0, 1.0, _FINE)
    inputs = _between(inputs, before, end, share)
    start = {node: _between(np.broadcast_to(value, bias.batch), before, end, share)
             for node, value in bias.voltages.items()}  # fmt: skip
    bias = _solve_at(found, inputs, start)
    left = _sensing_gain(bias) / gain[0] - GAIN_DROP
    peak, index = _cross(left, np.broadcast_to(bias.voltage(*OUTPUT), left.shape))
    starved = np.where(holds, "", _find_starved(found, bias, index))
    return Sensing(np.where(holds, np.inf, peak), np.asarray(starved, dtype=np.str_))


def _solve_at(found: Prediction, difference: Array, start: Mapping[str, Array] | None) -> Bias:
    level = found.supply.input_level.at(found.voltage)
    inputs = {"vip": level + difference / 2, "vin": level - difference / 2}
    circuit = found.circuit.with_values(inputs)
    return solve_bias(circuit, found.devices, start=found.bias if start is None else start)


def _sensing_gain(bias: Bias) -> Array:
    """Give the smaller of the outputs' gains to the gates of `control`, both outputs held.

    The sum of both would not do: of a follower that is cut off the resistors make an image of
    the other, and the loop then holds that one output.
    """
    network = bias.linearise(drives=(), noise=False)
    held = [f"hold_{node}" for node in OUTPUT]
    for name, node in zip(held, OUTPUT, strict=True):
        network.add_voltage_source(name, node, "0")
    gains = transfers(network, held, ["cm_gate"], 0.0).real[..., 0, :]
    return np.asarray(np.min(np.abs(gains), axis=-1))


def _find_starved(found: Prediction, bias: Bias, index: NDArray[np.intp]) -> Names:
    names = np.array([one.name for one in bias.circuit.transistors if one.role in _SENSING])
    kept = [
        _take(np.broadcast_to(bias.id(name), bias.batch), index) / found.bias.id(name)
        for name in names
    ]
    return np.asarray(names[np.argmin(np.stack(kept), axis=0)])


def _along(values: Array, scale: Array) -> Array:
    return values.reshape(-1, *(1,) * np.ndim(scale)) * scale


def _take(values: Array, index: NDArray[np.intp]) -> Array:
    return np.asarray(np.take_along_axis(values, np.asarray(index)[None], axis=0)[0])


def _between(
    values: Array, low: NDArray[np.intp], high: NDArray[np.intp], share: Array
) -> Array:  # fmt: skip
    """Divide the way from one point of a sweep to another; a point without solution is left out."""
    start, end = _take(values, low), _take(values, high)
    return np.asarray(start + _along(share, np.where(np.isfinite(end), end - start, 0.0)))


def _first_end(left: Array) -> NDArray[np.intp]:
    ended = ~(left > 0)
    return np.asarray(np.where(ended.any(axis=0), np.argmax(ended, axis=0), left.shape[0] - 1))


def _cross(left: Array, values: Array) -> tuple[Array, NDArray[np.intp]]:
    """Read values where nothing is left, in a straight line, and the point just beyond."""
    end = _first_end(left)
    before = np.maximum(end - 1, 0)
    a, b = _take(left, before), _take(left, end)
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(a > b, np.clip(a / (a - b), 0.0, 1.0), 0.0)
    low, high = _take(values, before), _take(values, end)
    return np.asarray(low + share * (high - low)), end
