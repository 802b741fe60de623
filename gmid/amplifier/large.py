"""Large signals: output swing, input range and static distortion, by bias solutions.

Sweeps are one more leading axis of the batch, so that all of their points are solved at once.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.signal import OUTPUT, differential_gain
from gmid.amplifier.symmetry import find_sides
from gmid.circuit.bias import Bias, solve_bias

if TYPE_CHECKING:
    from gmid.amplifier.prediction import Prediction

Array = NDArray[np.float64]
Names = NDArray[np.str_]
Start = dict[str, Array]
"""Node voltages to begin from [V]."""

GAIN_DROP = float(np.sqrt(0.5))
"""Small-signal gain, over that at rest, at which the output swing ends [-]."""

BY_GAIN = "gain"
"""What ends a swing that no transistor ends."""

_POINTS = 31
_FINE = 7
_HARMONIC_POINTS = 12


@dataclass(frozen=True, eq=False)
class Curve:
    """Static transfer from rest to one side; the other side is its mirror image.

    Parameters
    ----------
    input, output : ndarray, shape (n, ...)
        Differential voltages [V], the first ones zero.
    gain : ndarray, shape (n, ...)
        Small-signal gain there [-].
    saturation : ndarray, shape (n, ...)
        Smallest headroom of all transistors there [V].

    Examples
    --------
    >>> line = np.linspace(0, 1, 3)
    >>> Curve(line, 2 * line, 2 + 0 * line, 0.1 - line).output.tolist()
    [0.0, 1.0, 2.0]
    """

    input: Array
    output: Array
    gain: Array
    saturation: Array


@dataclass(frozen=True, eq=False)
class Swing:
    """How far the differential output goes.

    Parameters
    ----------
    by_gain : ndarray, shape (...)
        Peak at which the small-signal gain has fallen by 3 dB [V].
    by_saturation : ndarray, shape (...)
        Peak at which a transistor comes inside the saturation margin [V].
    tightest : ndarray of str, shape (...)
        The instance that does.

    Examples
    --------
    >>> swing = Swing(np.array(1.1), np.array(0.9), np.array("direct_p"))
    >>> float(swing.peak), str(swing.limit)
    (0.9, 'direct_p')
    """

    by_gain: Array
    by_saturation: Array
    tightest: Names

    @property
    def peak(self) -> Array:
        """The smaller of the two, which is judged [V]."""
        return np.minimum(self.by_gain, self.by_saturation)

    @property
    def limit(self) -> Names:
        """What ends it: `BY_GAIN`, or the instance that comes inside the margin."""
        return np.where(self.by_gain <= self.by_saturation, BY_GAIN, self.tightest)


def _solve_at(
    found: Prediction, *, difference: ArrayLike = 0.0, input_level: Array | None = None,
    start: Start | None = None,
) -> Bias:  # fmt: skip
    """Solve the bench at other inputs, from its own bias point unless another start is given."""
    level = found.supply.input_level.at(found.voltage) if input_level is None else input_level
    half = np.asarray(difference, dtype=np.float64) / 2
    circuit = found.circuit.with_values({"vip": level + half, "vin": level - half})
    return solve_bias(
        circuit, found.devices, start=found.bias if start is None else start,
        mirror=find_sides(circuit) if input_level is not None else None,
    )  # fmt: skip


def _start_between(bias: Bias, end: NDArray[np.intp], share: Array) -> Start:
    """Give node voltages between a point of a sweep and the one before it, in a straight line.

    Where the point has no solution they are those of the one before it.
    """
    start = {}
    for node, voltage in bias.voltages.items():
        swept = np.broadcast_to(voltage, bias.batch)
        before = np.take_along_axis(swept, np.maximum(end - 1, 0)[None], axis=0)[0]
        here = np.take_along_axis(swept, end[None], axis=0)[0]
        rise = np.where(np.isfinite(here), here - before, 0.0)
        start[node] = before + _along(share, rise)
    return start


def _all_headrooms(bias: Bias) -> Array:
    """Give the headroom of every transistor, those on the first axis."""
    names = (one.name for one in bias.circuit.transistors)
    return np.stack([np.broadcast_to(bias.headroom(name), bias.batch) for name in names])


def _smallest_headroom(bias: Bias) -> Array:
    return np.asarray(np.min(_all_headrooms(bias), axis=0))


def trace_curve(found: Prediction, input: Array) -> Curve:
    """Solve the static transfer at given inputs.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    input : ndarray, shape (n, ...)
        Differential inputs [V].

    Returns
    -------
    Curve
        Not-a-number where there is no solution.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> curve = trace_curve(found, np.array([0.0, 1e-3]))
    >>> bool(curve.output[1] > 0.05)
    True
    """
    return _read_curve(_solve_at(found, difference=input), input)


def _read_curve(bias: Bias, input: Array) -> Curve:
    """Read the static transfer from solutions at given inputs."""
    network = bias.linearise(drives=("vip", "vin"), noise=False)
    gain = differential_gain(network)(0.0).real
    output = bias.voltage(OUTPUT[0], OUTPUT[1])
    return Curve(np.broadcast_to(input, output.shape), output, gain, _smallest_headroom(bias))


def measure_swing(found: Prediction, margin: float) -> Swing:
    """Measure the output swing.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    margin : float
        Headroom that every transistor keeps [V].

    Returns
    -------
    Swing
        Peaks; zero where a transistor lacks the margin at rest.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> bool(0.5 < measure_swing(found, 0.05).by_gain < 1.8)
    True
    """
    scale = 2.5 * found.voltage / np.abs(found.signal.dc_gain)
    grid = np.linspace(0.0, 1.0, _POINTS) ** 1.5
    for count in (_POINTS // 2, _POINTS):  # what lies beyond the end takes long to solve
        inputs = _along(grid[:count], scale)
        bias = _solve_at(found, difference=inputs)
        curve = _read_curve(bias, inputs)
        left = _excesses(curve, curve.gain[:1], margin)
        if all((~(excess > 0)).any(axis=0).all() for excess in left):
            break
    share = np.linspace(0.0, 1.0, _FINE)
    ends = [_first_end(excess) for excess in left]
    inputs = np.concatenate([_between(curve.input, end, share) for end in ends])
    starts = [_start_between(bias, end, share) for end in ends]
    start = {node: np.concatenate([one[node] for one in starts]) for node in starts[0]}
    bias = _solve_at(found, difference=inputs, start=start)
    fine = _read_curve(bias, inputs)
    drop, room = _excesses(fine, curve.gain[:1], margin)
    names = np.array([one.name for one in bias.circuit.transistors])
    tightest = names[np.argmin(_all_headrooms(bias)[:, _FINE:], axis=0)]
    end = _first_end(room[_FINE:])
    return Swing(
        _cross(drop[:_FINE], fine.output[:_FINE]), _cross(room[_FINE:], fine.output[_FINE:]),
        np.take_along_axis(tightest, end[None], axis=0)[0],
    )  # fmt: skip


def _excesses(curve: Curve, gain: Array, margin: float) -> tuple[Array, Array]:
    """Give what is left of gain and of headroom."""
    return curve.gain / gain - GAIN_DROP, curve.saturation - margin


def _along(values: Array, scale: Array) -> Array:
    return values.reshape(-1, *(1,) * np.ndim(scale)) * scale


def _between(x: Array, end: NDArray[np.intp], share: Array) -> Array:
    """Give places between a point of a sweep and the one before it."""
    low = np.take_along_axis(x, np.maximum(end - 1, 0)[None], axis=0)[0]
    high = np.take_along_axis(x, end[None], axis=0)[0]
    return np.asarray(low + _along(share, high - low))


def _first_end(excess: Array) -> NDArray[np.intp]:
    ended = ~(excess > 0)
    last = excess.shape[0] - 1
    return np.asarray(np.where(ended.any(axis=0), np.argmax(ended, axis=0), last))


def _cross(excess: Array, y: Array) -> Array:
    k = _first_end(excess)
    upper = k[None]
    lower = np.maximum(k - 1, 0)[None]
    a, b = (np.take_along_axis(excess, index, axis=0)[0] for index in (lower, upper))
    ya, yb = (np.take_along_axis(y, index, axis=0)[0] for index in (lower, upper))
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(a > b, np.clip(a / (a - b), 0.0, 1.0), 0.0)
    return np.asarray(ya + share * (yb - ya))


@dataclass(frozen=True, eq=False)
class InputRange:
    """The input common-mode range in which every transistor keeps the saturation margin.

    Parameters
    ----------
    low, high : ndarray, shape (...)
        Its ends [V]; equal where the margin is lacking at the intended level.

    Examples
    --------
    >>> InputRange(np.array(0.5), np.array(1.4)).low.tolist()
    0.5
    """

    low: Array
    high: Array


def measure_input_range(found: Prediction, margin: float) -> InputRange:
    """Measure the input common-mode range.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    margin : float
        Headroom that every transistor keeps [V].

    Returns
    -------
    InputRange
        Within the supply, and within what the tables cover.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> span = measure_input_range(found, 0.0)
    >>> bool(span.low < 0.9 < span.high)
    True
    """
    level = np.broadcast_to(found.supply.input_level.at(found.voltage), found.batch)
    low = np.stack([level, level])
    high = np.stack([np.zeros(found.batch), np.broadcast_to(found.voltage, found.batch)])
    share = np.linspace(0.0, 1.0, 9)
    x, start = low + _along(share, high - low), None
    for is_last in (False, True):
        bias = _solve_at(found, input_level=x, start=start)
        excess = np.where(bias.inside, _smallest_headroom(bias) - margin, -1.0)
        if not is_last:
            end = _first_end(excess)
            x, start = _between(x, end, share), _start_between(bias, end, share)
    return InputRange(*_cross(excess, x))


def measure_third_harmonic(found: Prediction, amplitude: ArrayLike) -> Array:
    """Measure the static third harmonic at the output of the open-loop bench.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    amplitude : array_like, shape (...)
        Peak of the differential output [V].

    Returns
    -------
    ndarray, shape (...)
        Third harmonic over the fundamental, for a sinusoidal input that drives the output to
        this peak [-].

    Notes
    -----
    With ``vid = X sin t`` the harmonic is ``(2/pi) integral of y sin 3t`` over half a period; a
    Gauss rule in ``sin t`` is exact for odd polynomials up to degree 21.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> bool(measure_third_harmonic(found, 0.2) < 0.05)
    True
    """
    wanted = np.broadcast_to(np.asarray(amplitude, dtype=np.float64), found.batch)
    peak = wanted / found.signal.dc_gain
    for _ in range(6):
        curve = trace_curve(found, peak[None])
        peak = peak - (curve.output[0] - wanted) / curve.gain[0]
    angle = (np.arange(_HARMONIC_POINTS) + 0.5) * np.pi / (2 * _HARMONIC_POINTS)
    output = trace_curve(found, _along(np.sin(angle), peak)).output
    parts = [np.tensordot(np.sin(k * angle), output, axes=1) * 2 / _HARMONIC_POINTS for k in (1, 3)]
    return np.abs(parts[1] / parts[0])
