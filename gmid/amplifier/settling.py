"""Settling of a small step in the step bench, which has capacitive feedback."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.decks import FEEDBACK_SHARE, HOLD
from gmid.amplifier.signal import OUTPUT
from gmid.circuit.bias import solve_bias
from gmid.network import Network
from gmid.network.modes import Modes, expand_transfer

if TYPE_CHECKING:
    from gmid.amplifier.prediction import Prediction
    from gmid.circuit.circuit import Circuit

Array = NDArray[np.float64]

_DRIVE = {"drive_p": 0.5, "drive_n": -0.5}
_POINTS = 4000
_SLOW = 1e-5


def build_step_circuit(found: Prediction, level: ArrayLike = 0.0) -> Circuit:
    """Put an amplifier into the step bench: capacitive feedback of gain -1.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    level : array_like, shape (...)
        Differential drive [V].

    Returns
    -------
    Circuit
        With the sources `drive_p` and `drive_n`. Large resistors beside the feedback capacitors
        make the rest state the one that the capacitors alone would keep.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> "drive_p" in build_step_circuit(found).nodes
    True
    """
    bench = found.circuit.without(["vip", "vin", "clp", "cln"])
    middle = found.supply.input_level.at(found.voltage)
    half = np.asarray(level, dtype=np.float64) / 2
    load = np.asarray(found.plan.load_capacitance, dtype=np.float64)
    for side, far, sign in (("p", "n", 1.0), ("n", "p", -1.0)):
        drive, virtual, out = f"drive_{side}", f"vi{side}", f"vo{far}"
        bench.add_voltage_source(drive, drive, "0", middle + sign * half)
        for name, node in ((f"in{side}", drive), (f"fb{side}", out)):
            bench.add_capacitor(f"c{name}", node, virtual, FEEDBACK_SHARE * load)
            bench.add_resistor(f"r{name}", node, virtual, HOLD)
        bench.add_capacitor(f"cl{side}", f"vo{side}", "0", (1 - FEEDBACK_SHARE / 2) * load)
    return bench


def build_step_network(found: Prediction) -> Network:
    """Put an amplifier into the step bench and linearise it.

    Parameters
    ----------
    found : Prediction
        The amplifier.

    Returns
    -------
    Network
        With the sources `drive_p` and `drive_n`.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> "virtual_p" in build_step_network(found).nodes
    False
    """
    bench = build_step_circuit(found)
    bias = solve_bias(bench, found.devices, start=found.bias)
    return bias.linearise(drives=tuple(_DRIVE), noise=False)


def measure_settling(found: Prediction, *, accuracy: float = 0.01) -> Array:
    """Measure the time in which a small step settles.

    Parameters
    ----------
    found : Prediction
        The amplifier.
    accuracy : float
        Band around the final value, relative to it [-].

    Returns
    -------
    ndarray, shape (...)
        From the step on [s]; not-a-number if it does not settle.

    Notes
    -----
    The step response is the sum of the network's modes. Those slower than a hundred thousand
    times the unity-gain period, which the resistors that hold the inputs make, are left out of
    the transient and belong to the final value.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> bool(10e-9 < measure_settling(found) < 1e-6)
    True
    """
    network = build_step_network(found)
    right, weights = network.drive(_DRIVE)[:, None], network.observe(OUTPUT)[None]
    modes = expand_transfer(network.assemble(), right, weights)
    gbw = np.broadcast_to(found.signal.gbw, found.batch)
    span = 100.0 / (2 * np.pi * gbw)
    time = span[..., None] * np.linspace(0.0, 1.0, _POINTS)
    transient, final = _respond(modes, time, 1.0 / (_SLOW * 2 * np.pi * gbw))
    outside = np.abs(transient) > accuracy * np.abs(final)[..., None]
    last = _POINTS - 1 - np.argmax(outside[..., ::-1], axis=-1)
    a = np.take_along_axis(np.abs(transient), last[..., None], axis=-1)[..., 0]
    b = np.take_along_axis(
        np.abs(transient), np.minimum(last + 1, _POINTS - 1)[..., None], axis=-1
    )[..., 0]
    band = accuracy * np.abs(final)
    share = np.where(a > b, (a - band) / np.where(a > b, a - b, 1.0), 0.0)
    settled = (last + np.clip(share, 0.0, 1.0)) * span / (_POINTS - 1)
    return np.asarray(np.where(last < _POINTS - 1, settled, np.nan))


def _respond(modes: Modes, time: Array, slowest: Array) -> tuple[Array, Array]:
    """Give what is left of the transient at given times, and the final value."""
    transient = np.zeros(time.shape)
    final = np.zeros(time.shape[:-1])
    for k in range(modes.times.shape[-1]):
        tau, residue = modes.times[..., k], modes.residues[..., k, 0, 0]
        fast = np.abs(tau) < slowest
        still = np.abs(tau) < 1e-18
        rate = np.where(still | ~fast, 1.0, -1.0 / np.where(still, 1.0, tau))
        wave = (residue[..., None] * np.exp(rate[..., None] * time)).real
        transient -= np.where((fast & ~still)[..., None], wave, 0.0)
        final += np.where(fast, residue.real, 0.0)
    return transient, final
