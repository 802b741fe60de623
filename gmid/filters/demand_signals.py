"""What large signals and noise ask of the amplifiers: currents, swings, noise densities."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gmid.filters.demand_ports import Ports, Reciprocals
from gmid.filters.distortion import (
    WEAK_INVERSION,
    ThirdHarmonic,
    estimate_third_harmonic,
    find_current_for,
)
from gmid.filters.elements import AmplifierModel
from gmid.filters.levels import measure_levels
from gmid.filters.noise import FilterNoise, measure_noise
from gmid.filters.realisation import Realisation
from gmid.filters.sections import spread_frequencies
from gmid.filters.spec import FilterSpec
from gmid.network.pencil import FloatArray


@dataclass(frozen=True, eq=False)
class Signals:
    """Signals at the largest swing.

    Parameters
    ----------
    amplitude : float
        Peak differential input at which the largest node has the swing [V].
    swing : ndarray of float, shape (K,)
        Peak differential output of each amplifier [V].
    current : ndarray of float, shape (K,)
        Peak signal current out of each, per side [A].
    frequency : ndarray of float, shape (K,)
        Where that peak is [Hz].

    Examples
    --------
    >>> Signals(0.6, np.ones(1), np.full(1, 1e-5), np.full(1, 4e5)).amplitude
    0.6
    """

    amplitude: float
    swing: FloatArray
    current: FloatArray
    frequency: FloatArray


def find_signals(
    realisation: Realisation, ports: Ports, swing: float, real: Reciprocals, top: float
) -> Signals:
    """Find swings and currents with a sine of any frequency at the input.

    The peak current is ``Vpk |GL + go + jw (CL + CF)|`` of each output, with the voltages and
    phases of the whole filter.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    ports : Ports
        Its network.
    swing : float
        Peak differential voltage of the largest node [V].
    real : Reciprocals
        The amplifiers; only their own conductance counts here.
    top : float
        Highest frequency of signals [Hz].

    Returns
    -------
    Signals
        At the input amplitude that gives the swing.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> ideal = Reciprocals(*np.zeros((4, 1)))
    >>> found = find_signals(made, Ports(made), 0.6, ideal, 1e7)
    >>> round(float(found.current[0]) * 1e6, 2)
    3.77
    """
    levels = measure_levels(realisation)
    amplitude = swing / max(levels.values())
    f = spread_frequencies(realisation.sections)
    f = f[(f > 0) & (f <= top)]
    flawless = Reciprocals(
        real.gm if realisation.style == "gm-c" else 0.0 * real.gm, 0.0 * real.gain,
        0.0 * real.pole, 0.0 * real.load,
    )  # fmt: skip
    size = np.abs(ports.find_currents(flawless, f))
    node = np.array([levels[place.output] for place in realisation.amplifiers])
    with np.errstate(divide="ignore", invalid="ignore"):
        own = np.where(real.gm > 0, real.gain / real.gm, 0.0)
    half = 0.5 * amplitude
    current = half * (size.max(axis=0) + own * node)
    return Signals(amplitude, amplitude * node, current, f[np.argmax(size, axis=0)])


def find_harmonic(
    spec: FilterSpec, ports: Ports, real: Reciprocals, signals: Signals, *,
    divisor: float = WEAK_INVERSION,
) -> tuple[ThirdHarmonic, float]:  # fmt: skip
    """Find by how much the largest currents must exceed the signal currents.

    Parameters
    ----------
    spec : FilterSpec
        With the third harmonic that is allowed, if any.
    ports : Ports
        The network.
    real : Reciprocals
        The amplifiers.
    signals : Signals
        At the largest swing.
    divisor : float
        d of the cubic term [-].

    Returns
    -------
    harmonic : ThirdHarmonic
        With the currents so found.
    factor : float
        At least 1 [-].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, distortion_db=-60.0)
    >>> made = realise(spec, capacitor=2e-12)
    >>> real = Reciprocals.of(AmplifierModel(gm_total=1e-4))
    >>> signals = find_signals(made, Ports(made), 0.6, real, 1e7)
    >>> harmonic, factor = find_harmonic(spec, Ports(made), real, signals)
    >>> harmonic.decibels <= -60.0 + 1e-6
    True
    """

    def estimate(current: FloatArray) -> ThirdHarmonic:
        return estimate_third_harmonic(
            ports, real, current, frequency=spec.harmonic_frequency,
            amplitude=signals.amplitude, divisor=divisor,
        )  # fmt: skip

    plain = estimate(signals.current)
    if spec.harmonic_limit_db is None:
        return plain, 1.0
    factor = max(1.0, find_current_for(plain, spec.harmonic_limit_db))
    return estimate(factor * signals.current), factor


@dataclass(frozen=True, eq=False)
class NoiseShare:
    """How the allowed noise is shared between passive elements and amplifiers.

    Parameters
    ----------
    allowed : float
        Mean square at the output [V^2].
    passive : FilterNoise
        With amplifiers that have none.
    active : ndarray of float, shape (K,)
        Mean square from each amplifier at a noise factor of 1 [V^2].
    factor : float
        Noise factor that uses up what is left, 0 if nothing is left [-].

    Examples
    --------
    >>> none = FilterNoise((1.0, 2.0), {"R1": np.array(1e-10)})
    >>> NoiseShare(2e-10, none, np.array([5e-11]), 2.0).factor
    2.0
    """

    allowed: float
    passive: FilterNoise
    active: FloatArray
    factor: float


def share_noise(
    spec: FilterSpec, realisation: Realisation, models: dict[str, AmplifierModel], *,
    temperature: float,
) -> NoiseShare | None:  # fmt: skip
    """Share the noise that the wanted ratio allows; amplifiers get what the passives leave.

    Parameters
    ----------
    spec : FilterSpec
        With swing, snr and noise band.
    realisation : Realisation
        The filter.
    models : dict of str to AmplifierModel
        The amplifiers; their noise factor is set to 1.
    temperature : float
        [degC].

    Returns
    -------
    NoiseShare or None
        None where no ratio is wanted.

    Examples
    --------
    >>> from gmid.filters import realise
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, swing=0.6, snr_db=60.0,
    ...                   noise_band=(1e3, 1e6))
    >>> made = realise(spec, capacitor=2e-12)
    >>> found = share_noise(spec, made, {"A1": AmplifierModel(gm_total=1e-4)}, temperature=27.0)
    >>> found.factor > 1.0
    True
    """
    if spec.snr_db is None or spec.swing is None or spec.noise_band is None:
        return None
    whole = measure_noise(realisation, spec.noise_band, models, temperature=temperature)
    active = np.array([float(whole.shares[place.name]) for place in realisation.amplifiers])
    rest = {name: value for name, value in whole.shares.items() if name not in models}
    passive = FilterNoise(whole.band, rest)
    allowed = spec.swing**2 / 2.0 / 10.0 ** (spec.snr_db / 10.0)
    left = allowed - float(passive.power) if rest else allowed
    return NoiseShare(allowed, passive, active, max(left, 0.0) / float(active.sum()))
