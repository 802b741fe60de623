"""Quick readings for a search: the common-mode loop's phase margin, and whether a swing fits."""

from __future__ import annotations

from weakref import WeakKeyDictionary

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.large import GAIN_DROP
from gmid.amplifier.prediction import Prediction
from gmid.amplifier.signal import OUTPUT, differential_gain
from gmid.amplifier.topology import NO_RESISTOR, PROBE, build_circuit
from gmid.circuit.bias import Bias, solve_bias
from gmid.network import DoubleInjection, measure_loop

Array = NDArray[np.float64]

_STEPS = 5
_PER_VOLT = 4.0
_LARGEST_INPUT = 0.5
_AMPLE = 2.5
_BAND = (1.0, 1e12)

_LOOPS: WeakKeyDictionary[Prediction, tuple[Array, Array]] = WeakKeyDictionary()
"""What was measured already, as long as the predictions live."""


def probe_loop(found: Prediction) -> tuple[Array, Array]:
    """Measure the common-mode loop as it is judged: the worse of with and without load resistors.

    Parameters
    ----------
    found : Prediction
        The amplifier.

    Returns
    -------
    gbw, phase_margin : ndarray, shape (...)
        [Hz], [deg]; zero where the loop gain never reaches 1.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> bool(abs(probe_loop(found)[1] - found.loop_margin) < 1e-6)
    True
    """
    if found not in _LOOPS:
        networks = [found.loop_half]
        if np.any(np.asarray(found.plan.load_resistance) < NO_RESISTOR):
            networks.append(networks[0].with_values({"rlp": NO_RESISTOR}))
        loops = [measure_loop(DoubleInjection(one, PROBE), band=_BAND) for one in networks]
        speed = np.min(np.stack([np.nan_to_num(one.gbw) for one in loops]), axis=0)
        margin = np.min(np.stack([np.nan_to_num(one.phase_margin) for one in loops]), axis=0)
        _LOOPS[found] = (speed, margin)
    return _LOOPS[found]


def probe_swing(found: Prediction, peak: float, margin: float) -> Array:
    """Measure what is left of gain and headroom at one peak of the differential output.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    peak : float
        Differential output that has to be reached [V].
    margin : float
        Headroom that every transistor keeps [V].

    Returns
    -------
    ndarray, shape (...)
        The smaller of ln(gain left / 0.7071) and of what headroom exceeds the margin, per
        0.25 V; negative where the swing ends before `peak`.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> bool(probe_swing(found, 0.2, 0.05) > 0 > probe_swing(found, 1.7, 0.05))
    True
    """
    gain = np.abs(found.signal.dc_gain)
    low, low_output = np.zeros(found.batch), np.zeros(found.batch)
    input = np.minimum(1.05 * peak / gain, _LARGEST_INPUT)
    bias = found.bias
    for _ in range(_STEPS):
        bias = _solve(found, input, bias)
        output = bias.voltage(*OUTPUT)
        output = np.where(np.isnan(output), low_output, output)
        if np.all(np.abs(output - peak) < 2e-3 * peak):
            break
        slope = (output - low_output) / np.where(input == low, 1.0, input - low)
        slope = np.maximum(slope, 0.1 * gain)
        low, low_output = input, output
        input = np.clip(input + (peak - output) / slope, 0.0, _LARGEST_INPUT)
    network = bias.linearise(drives=("vip", "vin"), noise=False)
    left = differential_gain(network)(0.0).real
    with np.errstate(divide="ignore", invalid="ignore"):
        by_gain = np.log(np.maximum(left / (GAIN_DROP * gain), 1e-3))
    rows = [np.broadcast_to(bias.headroom(t.name), bias.batch) for t in bias.circuit.transistors]
    room = _PER_VOLT * (np.min(np.stack(rows), axis=0) - margin)
    missed = np.minimum(0.0, (bias.voltage(*OUTPUT) / peak - 0.99))
    least = np.minimum(np.minimum(by_gain, room), np.where(missed < 0, missed, np.inf))
    return np.asarray(least)


def probe_slew(found: Prediction, rate: float) -> Array:
    """Measure the slew rate, by mirror ratios alone where it is ample.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    rate : float
        What is asked for [V/s].

    Returns
    -------
    ndarray, shape (...)
        Of the differential output [V/s].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> bool(probe_slew(found, 100e6) == found.slew_rate)
    True
    """
    current = found.instance_current
    tail = current("tail")
    kd = current("direct_p") / current("load_p")
    ko = current("copy_p") / current("load_p") * current("opposite_n") / current("turn_n")
    load = np.asarray(found.plan.load_capacitance) + found.signal.output_capacitance
    rough = tail * (kd + ko) / load
    return np.asarray(rough) if np.all(rough > _AMPLE * rate) else found.slew_rate


def _solve(found: Prediction, input: Array, start: Bias) -> Bias:
    circuit = build_circuit(
        found.plan, voltage=found.voltage, vcm=found.supply.common_mode.at(found.voltage),
        input_level=found.supply.input_level.at(found.voltage), difference=input,
        reference_current=found.reference_current,
    )  # fmt: skip
    return solve_bias(circuit, found.devices, start=start)
