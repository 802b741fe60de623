"""Noise of a realisation: how much, whose, and the signal-to-noise ratio.

All here is differential: twice the power of the half circuit.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UsageFault
from gmid.filters.realisation import Amplifiers, Realisation
from gmid.network import integrate_noise
from gmid.network.pencil import FloatArray


@dataclass(frozen=True, eq=False)
class FilterNoise:
    """Differential noise at the output of a filter within a band.

    Parameters
    ----------
    band : tuple of float
        [Hz].
    shares : mapping of str to ndarray of float, shape (...)
        Mean square from each element and amplifier [V^2].

    Examples
    --------
    >>> noise = FilterNoise((0.0, 1e6), {"R1_f": np.array(9e-10), "A1": np.array(16e-10)})
    >>> round(float(noise.rms) * 1e6, 6), round(float(noise.snr_db(0.5)), 2)
    (50.0, 76.99)
    """

    band: tuple[float, float]
    shares: Mapping[str, FloatArray]

    @property
    def power(self) -> FloatArray:
        """Mean square, shape (...) [V^2]."""
        return np.asarray(sum(self.shares.values()))

    @property
    def rms(self) -> FloatArray:
        """Root mean square, shape (...) [V]."""
        return np.sqrt(self.power)

    def snr_db(self, swing: float) -> FloatArray:
        """Return the ratio of the rms value of a sine to the noise.

        Parameters
        ----------
        swing : float
            Peak of the sine at the output [V].

        Returns
        -------
        ndarray of float, shape (...)
            [dB].
        """
        return np.asarray(10 * np.log10(swing**2 / 2 / self.power))

    def __repr__(self) -> str:
        worst = float(np.max(self.rms))
        low, high = self.band
        return f"FilterNoise({low:g} to {high:g} Hz, {worst * 1e6:.4g} uV)"


def measure_noise(
    realisation: Realisation, band: tuple[float, float], amplifiers: Amplifiers = None, *,
    temperature: ArrayLike = 27.0, rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0,
) -> FilterNoise:  # fmt: skip
    """Integrate the noise at the output of a filter.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    band : tuple of float
        [Hz]; may start at 0 and end at infinity.
    amplifiers : AmplifierModel or mapping of str to AmplifierModel, optional
        With their noise; ideal amplifiers have none, ideal transconductors have ``4kT gm``.
    temperature : array_like, shape (...)
        [degC].
    rscale, cscale : array_like, shape (...)
        Multiply all resistors, all capacitors [-].

    Returns
    -------
    FilterNoise
        With the noise of a source resistance.

    Raises
    ------
    UsageFault
        If the band is empty, or starts at 0 while there is flicker noise.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6)
    >>> made = realise(spec, capacitor=1e-12)
    >>> found = measure_noise(made, (0.0, float("inf")), temperature=26.85)
    >>> round(float(found.power) / (1.380649e-23 * 300 * 4 / 1e-12), 6)
    1.0
    """
    if not 0 <= band[0] < band[1]:
        raise UsageFault(f"a noise band from {band[0]:g} to {band[1]:g} Hz is empty or negative.")
    net = realisation.network(amplifiers, temperature=temperature, rscale=rscale, cscale=cscale)
    found = integrate_noise(net, realisation.output, band)
    shares: dict[str, FloatArray] = {}
    for owner, power in found.by_owner().items():
        name = owner.removesuffix(".2")
        shares[name] = shares.get(name, np.zeros(())) + 2 * power
    return FilterNoise(band, shares)
