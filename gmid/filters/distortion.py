"""Third harmonic of a filter, from the cubic term of its amplifiers.

Each amplifier delivers ``Imax (x - 4 x^3/d + ...)`` for ``x = gm vx/Imax``, so that a sine makes
a third harmonic of ``Imax x^3/d``. It is carried to the output by the real filter at three times
the frequency, and all amplifiers are added with their phases. Good below x = 0.2, 2.5 dB
optimistic at 0.6, useless above 1.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.filters.demand_ports import Ports, Reciprocals
from gmid.network.pencil import ComplexArray, FloatArray

WEAK_INVERSION = 12.4
"""Divisor d of a plain pair in weak inversion; 16 at an inversion coefficient of 1, 19 at
gm/Id = 13, 25 at 8, 32 in strong inversion [-]."""

LARGEST_DRIVE = 0.6
"""Largest x for which the estimate is good to some decibels [-]."""


@dataclass(frozen=True, eq=False)
class ThirdHarmonic:
    """Third harmonic at the output and what each amplifier is driven with.

    Parameters
    ----------
    frequency : float
        Of the fundamental [Hz].
    ratio : float
        Third harmonic over fundamental at the output [-].
    drive : ndarray of float, shape (K,)
        x of each amplifier, peak signal current over largest current [-].
    shares : ndarray of float, shape (K,)
        Third harmonic from each amplifier alone [-].

    Examples
    --------
    >>> found = ThirdHarmonic(1e5, 1e-3, np.array([0.1, 0.2]), np.array([2e-4, 8e-4]))
    >>> round(found.decibels, 9), found.is_trusted
    (-60.0, True)
    """

    frequency: float
    ratio: float
    drive: FloatArray
    shares: FloatArray

    @property
    def decibels(self) -> float:
        """Third harmonic over fundamental [dB]."""
        return float(20.0 * np.log10(max(self.ratio, 1e-30)))

    @property
    def is_trusted(self) -> bool:
        """Whether no amplifier is driven beyond `LARGEST_DRIVE`."""
        return bool(np.all(self.drive <= LARGEST_DRIVE))


def estimate_third_harmonic(
    ports: Ports, real: Reciprocals, largest_current: ArrayLike, *, frequency: float,
    amplitude: float, divisor: ArrayLike = WEAK_INVERSION,
) -> ThirdHarmonic:  # fmt: skip
    """Estimate the third harmonic of a filter with real amplifiers.

    Parameters
    ----------
    ports : Ports
        The filter.
    real : Reciprocals
        Its amplifiers, of shape (K,), gm finite.
    largest_current : array_like of float, shape (K,)
        Largest current that each can deliver, per side [A].
    frequency : float
        Of the fundamental [Hz].
    amplitude : float
        Peak differential input [V].
    divisor : array_like of float, shape (K,)
        d of each amplifier's cubic term [-].

    Returns
    -------
    ThirdHarmonic
        First-order estimate: harmonics do not act back on the drive.

    Examples
    --------
    >>> from gmid.filters import AmplifierModel, FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> real = Reciprocals.of(AmplifierModel(gm_total=1e-3))
    >>> found = estimate_third_harmonic(Ports(made), real, [20e-6], frequency=3e5, amplitude=0.5)
    >>> -100 < found.decibels < -60
    True
    """
    f = np.array([frequency, 3.0 * frequency])
    half = 0.5 * amplitude
    currents = ports.find_currents(real, f[:1])[0]
    solved = ports.solve(f[:1])
    control = solved.at_control[0] @ currents + solved.input_control[0]
    end = complex(solved.at_end[0] @ currents + solved.input_end[0])
    largest = np.asarray(largest_current, dtype=np.float64)
    x: ComplexArray = np.asarray(half * control / real.gm / largest, dtype=np.complex128)
    source = largest * x**3 / np.asarray(divisor, dtype=np.float64)
    parts = ports.carry(real, f[1:])[0] * source / (half * end)
    return ThirdHarmonic(
        frequency, float(np.abs(parts.sum())), np.abs(x), np.asarray(np.abs(parts))
    )


def find_current_for(harmonic: ThirdHarmonic, wanted_db: float) -> float:
    """Return by how much all largest currents must grow for a wanted third harmonic.

    Parameters
    ----------
    harmonic : ThirdHarmonic
        At the currents assumed.
    wanted_db : float
        Third harmonic over fundamental [dB].

    Returns
    -------
    float
        Factor; the harmonic falls with the square of the currents. Not so small that an
        amplifier is driven beyond `LARGEST_DRIVE` [-].

    Examples
    --------
    >>> found = ThirdHarmonic(1e5, 1e-3, np.array([0.1]), np.array([1e-3]))
    >>> round(find_current_for(found, -80.0), 3)
    3.162
    """
    factor = np.sqrt(harmonic.ratio / 10.0 ** (wanted_db / 20.0))
    return float(max(factor, harmonic.drive.max() / LARGEST_DRIVE))
