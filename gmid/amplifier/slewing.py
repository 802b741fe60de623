"""Slewing: how fast the output passes the middle of a full step of the step bench.

A run in time, since little of it is at rest: mirrors take a while until they carry the tail
current, longer until they no longer carry any, and the tail node follows the input that conducts,
for which part of the tail current is used up.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.decks import find_edge, find_step
from gmid.amplifier.settling import build_step_circuit
from gmid.amplifier.signal import OUTPUT
from gmid.amplifier.topology import build_circuit
from gmid.circuit.bias import solve_bias
from gmid.circuit.transient import Transient

if TYPE_CHECKING:
    from gmid.amplifier.prediction import Prediction

Array = NDArray[np.float64]

OVERDRIVE = 0.4
"""Differential input that switches the tail to one side [V]."""

WINDOW = 0.2
"""The slope is taken from minus to plus this share of the step, around its middle [-]."""

_EDGE_STRIDES = 4
_GROWTH = 1.6
_FINE = 0.1  # of the step, the change of the output within a stride
_MOST_STRIDES = 200


def measure_slew_rate(found: Prediction) -> Array:
    """Measure the differential slew rate in the step bench, from one end of the swing to the other.

    Parameters
    ----------
    found : Prediction
        The amplifier; its plan's demand for swing sets the step (`find_step`).

    Returns
    -------
    ndarray, shape (...)
        Mean slope of the differential output between minus and plus `WINDOW` of the step [V/s];
        not-a-number where it does not come that far.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> bool(5e6 < measure_slew_rate(found) < 50e6)
    True
    """
    step = find_step(found.plan)
    times, outputs = _run_step(found, step)
    ends = [_find_time(times, outputs, share * step) for share in (-WINDOW, WINDOW)]
    return np.asarray(2 * WINDOW * step / (ends[1] - ends[0]))


def _run_step(found: Prediction, step: float) -> tuple[Array, Array]:
    """Drive the bench from one end of the swing to the other.

    Returns times [s] and outputs [V] of shape (n, ...), until the last has left the window.
    """
    edge = find_edge(np.broadcast_to(found.signal.gbw, found.batch))
    rest = solve_bias(build_step_circuit(found, -step), found.devices, start=found.bias)
    run = Transient(rest, {"drive_p": step / edge, "drive_n": -step / edge})
    stride = edge / _EDGE_STRIDES
    times, outputs = [np.zeros(found.batch)], [run.voltage(*OUTPUT)]
    for k in range(_MOST_STRIDES):
        run.advance(stride, moves=k < _EDGE_STRIDES, begins=k == _EDGE_STRIDES)
        times.append(times[-1] + stride)
        outputs.append(run.voltage(*OUTPUT))
        if not np.any(outputs[-1] < WINDOW * step):
            break
        if k >= _EDGE_STRIDES:
            with np.errstate(divide="ignore"):
                fine = _FINE * step * stride / np.abs(outputs[-1] - outputs[-2])
            stride = np.minimum(_GROWTH * stride, np.maximum(fine, edge / _EDGE_STRIDES))
    return np.stack(times), np.stack(outputs)


def _find_time(times: Array, outputs: Array, level: float) -> Array:
    """Find when outputs rise through a level for the last time, in a straight line between."""
    above = outputs > level
    low = np.argmax(np.cumsum(~above, axis=0), axis=0)  # the last one that is not above
    high = np.minimum(low + 1, len(times) - 1)
    ta, tb, ya, yb = (
        np.take_along_axis(rows, k[None], axis=0)[0]
        for rows in (times, outputs) for k in (low, high)
    )  # fmt: skip
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(np.where(yb > level, ta + (tb - ta) * (level - ya) / (yb - ya), np.nan))


def output_currents(found: Prediction, difference: ArrayLike) -> tuple[Array, Array]:
    """Give what the outputs deliver while they are held at the common mode.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    difference : array_like, shape (...)
        Differential input [V].

    Returns
    -------
    out, into : ndarray, shape (...)
        Current out of `vop` and into `von` [A].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> out, into = output_currents(found, 0.4)
    >>> bool(10e-6 < out < 40e-6)
    True
    """
    circuit = build_circuit(
        found.plan, voltage=found.voltage, vcm=found.supply.common_mode.at(found.voltage),
        input_level=found.supply.input_level.at(found.voltage), difference=difference,
        reference_current=found.reference_current, loaded=False,
    )  # fmt: skip
    circuit.add_voltage_source("hold_p", "vop", "vcm", 0.0)
    circuit.add_voltage_source("hold_n", "von", "vcm", 0.0)
    bias = solve_bias(circuit, found.devices, start=found.bias)
    return bias.source_current("hold_p"), -np.asarray(bias.source_current("hold_n"))
