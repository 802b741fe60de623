"""Small-signal figures of an amplifier, from the network of its bias point.

The bench: differential drive `vip`/`vin`, the load at both outputs, common-mode loop closed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.network import (
    DoubleInjection,
    Noise,
    Structure,
    Transfer,
    break_loop,
    compute_noise,
    measure_dc_gain,
    measure_loop,
    transfers,
)

Array = NDArray[np.float64]

DIFFERENTIAL = {"vip": 0.5, "vin": -0.5}
"""Drives the inputs with 1 V between them."""

COMMON = {"vip": 1.0, "vin": 1.0}
"""Drives both inputs with 1 V."""

OUTPUT = ("vop", "von")
"""The differential output."""

MEAN = {"vop": 0.5, "von": 0.5}
"""The output common mode."""

INJECTION = "inject"
"""Current source of 1 A from `von` into `vop`."""

_BAND = (1.0, 1e12)
_PEAK_GRID = np.geomspace(1e4, 1e10, 61)


@dataclass(frozen=True, eq=False)
class SignalPath:
    """What the open-loop bench shows, and the amplifier as a Norton source.

    Parameters
    ----------
    dc_gain : ndarray, shape (...)
        Differential gain into the load [-].
    gbw : ndarray, shape (...)
        Frequency at which it crosses 1 [Hz]; not-a-number if it never exceeds 1.
    phase_margin : ndarray, shape (...)
        At `gbw` [deg].
    gm_total : ndarray, shape (...)
        Short-circuit transconductance at DC [S].
    excess_pole : ndarray, shape (...)
        p of ``gm_total/(1 + jf/p)`` with the phase that the short-circuit transconductance
        has at `gbw` [Hz].
    output_conductance, output_capacitance : ndarray, shape (...)
        Own ones per side, at DC [S] and at `gbw` [F]; sense elements included, load not.
    input_capacitance : ndarray, shape (...)
        Per side, differential drive at a hundredth of `gbw` [F].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply()).signal
    >>> bool((abs(found.gm_total * 1e6 - 400) < 100).all())
    True
    """

    dc_gain: Array
    gbw: Array
    phase_margin: Array
    gm_total: Array
    excess_pole: Array
    output_conductance: Array
    output_capacitance: Array
    input_capacitance: Array

    @property
    def dc_gain_db(self) -> Array:
        """Differential gain into the load [dB]."""
        return to_db(self.dc_gain)


@dataclass(frozen=True, eq=False)
class CommonModeLoop:
    """The common-mode loop, opened at `vprobe`, and what gets through to the common mode.

    Parameters
    ----------
    dc_gain, gbw, phase_margin : ndarray, shape (...)
        Of the loop gain [-], [Hz], [deg].
    input_to_output_gain : ndarray, shape (...)
        From both inputs to the output common mode, at DC [-].
    input_to_output_peak : ndarray, shape (...)
        Its largest value over frequency [-].
    supply_gain : ndarray, shape (...)
        From the supply alone to the output common mode, at DC [-].
    settled_error : ndarray, shape (...)
        Output common mode less its reference, at the bias point [V].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> loop = predict(example_plan(), example_devices(), example_supply()).common_mode
    >>> bool((abs(loop.settled_error) < 5e-3).all())
    True
    """

    dc_gain: Array
    gbw: Array
    phase_margin: Array
    input_to_output_gain: Array
    input_to_output_peak: Array
    supply_gain: Array
    settled_error: Array

    @property
    def dc_gain_db(self) -> Array:
        """Loop gain at DC [dB]."""
        return to_db(self.dc_gain)

    @property
    def input_to_output_gain_db(self) -> Array:
        """Gain from the input to the output common mode, at DC [dB]."""
        return to_db(self.input_to_output_gain)


def to_db(gain: ArrayLike) -> Array:
    """Give the size of a gain in decibels.

    Parameters
    ----------
    gain : array_like, shape (...)
        [-].

    Returns
    -------
    ndarray, shape (...)
        [dB].

    Examples
    --------
    >>> float(to_db(-100.0))
    40.0
    """
    with np.errstate(divide="ignore"):
        return np.asarray(20.0 * np.log10(np.abs(gain)))


def differential_gain(network: Structure) -> Transfer:
    """Give the differential gain as a function of frequency.

    Parameters
    ----------
    network : Structure
        Of the amplifier's bench, or the half that it is about.

    Returns
    -------
    Transfer
        From the differential input to the differential output.

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> for side in "pn":
    ...     net.add_voltage_source(f"vi{side}", f"vi{side}", "0")
    ...     net.add_vccs(f"g{side}", ("0", f"vo{side}"), (f"vi{side}", "0"), 1e-3)
    ...     net.add_resistor(f"r{side}", f"vo{side}", "0", 1e5)
    >>> float(differential_gain(net)(0.0).real.round(6))
    100.0
    """
    return Transfer(network, DIFFERENTIAL, OUTPUT)


def measure_signal(
    network: Structure, load_conductance: Array, load_capacitance: Array
) -> SignalPath:
    """Measure the differential path.

    Parameters
    ----------
    network : Structure
        Of the amplifier's bench, or its differential half, with the source `inject` between the
        outputs.
    load_conductance, load_capacitance : ndarray, shape (...)
        What the bench puts at each output [S], [F].

    Returns
    -------
    SignalPath
        All figures.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> predict(example_plan(), example_devices(), example_supply()).signal.gbw.shape
    (3,)
    """
    loop = measure_loop(differential_gain(network), band=_BAND)
    gbw = np.where(np.isnan(loop.gbw), 1e6, loop.gbw)
    f = np.stack([np.zeros(gbw.shape), 0.01 * gbw, gbw], axis=-1)
    both = transfers(network, [DIFFERENTIAL, INJECTION], [OUTPUT, "i(vip)"], f)
    gain, impedance = both[..., 0, 0], both[..., 0, 1]
    admittance = 2.0 / impedance
    forward = gain * admittance
    lag = -np.angle(forward[..., 2] / forward[..., 0])
    w = 2 * np.pi * f
    return SignalPath(
        loop.dc_gain, loop.gbw, loop.phase_margin,
        gm_total=forward[..., 0].real,
        excess_pole=np.where(lag > 0, gbw / np.tan(np.clip(lag, 1e-9, np.pi / 2)), np.inf),
        output_conductance=admittance[..., 0].real - load_conductance,
        output_capacitance=admittance[..., 2].imag / w[..., 2] - load_capacitance,
        input_capacitance=-2.0 * both[..., 1, 1, 0].imag / w[..., 1],
    )  # fmt: skip


def measure_common_mode(
    network: Structure, settled_error: Array, *, loop_network: Structure | None = None
) -> CommonModeLoop:
    """Measure the common-mode loop.

    Parameters
    ----------
    network : Structure
        Of the amplifier's bench, or the half that it is about.
    settled_error : ndarray, shape (...)
        From the bias point [V].
    loop_network : Structure, optional, keyword-only
        The same with no source but the probe, which is smaller.

    Returns
    -------
    CommonModeLoop
        All figures.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> predict(example_plan(), example_devices(), example_supply()).common_mode.gbw.shape
    (3,)
    """
    loop = measure_loop(break_loop(loop_network or network, "vprobe"), band=_BAND)
    through = Transfer(network, COMMON, MEAN)
    at_dc = measure_dc_gain(through)
    return CommonModeLoop(
        loop.dc_gain, loop.gbw, loop.phase_margin,
        input_to_output_gain=at_dc,
        input_to_output_peak=np.maximum(_find_peak(through), np.abs(at_dc)),
        supply_gain=measure_dc_gain(Transfer(network, "vdd", MEAN)),
        settled_error=settled_error,
    )  # fmt: skip


def measure_margin(network: Structure, probe: str) -> Array:
    """Measure the phase margin of a loop, exactly wherever it is opened.

    Parameters
    ----------
    network : Structure
        With the probe in it.
    probe : str
        A voltage source in series with the loop.

    Returns
    -------
    ndarray, shape (...)
        [deg]; not-a-number where the loop gain never falls through 1.

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_vccs("gm", ("drive", "0"), ("gate", "0"), 1e-3)
    >>> net.add_resistor("r", "drive", "0", 1e5)
    >>> net.add_capacitor("c", "gate", "0", 1e-12)
    >>> net.add_voltage_source("vprobe", "drive", "gate")
    >>> float(measure_margin(net, "vprobe").round(1))
    90.6
    """
    return measure_loop(DoubleInjection(network, probe), band=_BAND).phase_margin


def _find_peak(response: Transfer) -> Array:
    """Find the largest gain: the best of a grid, then the best of a finer one around it."""
    size = np.abs(response.scan(_PEAK_GRID))
    k = np.argmax(size, axis=-1)
    step = np.log(_PEAK_GRID[1] / _PEAK_GRID[0])
    near = _PEAK_GRID[k][..., None] * np.exp(np.linspace(-step, step, 25))
    best = np.argmax(np.abs(response.scan(near)), axis=-1)[..., None]
    return np.asarray(np.abs(response(np.take_along_axis(near, best, axis=-1)))[..., 0])


def measure_noise(network: Structure, frequency: ArrayLike) -> Noise:
    """Measure the noise of the bench, the load resistors' included.

    Parameters
    ----------
    network : Structure
        Of the amplifier's bench, or the half that it is about.
    frequency : array_like, shape (nf,)
        [Hz].

    Returns
    -------
    Noise
        At the differential output, with the gain from the differential input.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply())
    >>> measure_noise(found.network, [1e6]).input_density.shape
    (3, 1)
    """
    return compute_noise(network, OUTPUT, frequency, source=DIFFERENTIAL)
