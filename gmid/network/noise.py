"""Noise of a network by the adjoint method: one solution a frequency serves all sources.

In a half circuit every source has its own full density; a differential density [V^2/Hz] is
then twice the one found.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import NoSolution, UnknownName, UsageFault, advise
from gmid.network.modes import find_poles
from gmid.network.pencil import ComplexArray, FloatArray, solve_pencil
from gmid.network.quadrature import integrate_log
from gmid.network.structure import Output, Source, Structure

_FAR = 1e4


@dataclass(frozen=True, eq=False)
class Noise:
    """Noise at an output over frequency, and what each source gives to it.

    Parameters
    ----------
    frequency : ndarray of float, shape (nf,) or (..., nf)
        [Hz].
    shares : ndarray of float, shape (..., nf, n_sources)
        Power density at the output from each source [V^2/Hz].
    names, owners : tuple of str, length n_sources
        The sources, and the devices they belong to.
    gain : ndarray of complex, shape (..., nf), optional
        Transfer from the input that the noise may be referred to.

    Examples
    --------
    >>> Noise(np.array([1e3]), np.array([[4e-18, 0.0]]), ("a", "b"), ("m1", "m1")).density
    array([2.e-09])
    """

    frequency: FloatArray
    shares: FloatArray
    names: tuple[str, ...]
    owners: tuple[str, ...]
    gain: ComplexArray | None = None

    @property
    def power(self) -> FloatArray:
        """Power density at the output, shape (..., nf) [V^2/Hz]."""
        return np.asarray(self.shares.sum(axis=-1))

    @property
    def density(self) -> FloatArray:
        """Density at the output, shape (..., nf) [V/sqrt(Hz)]."""
        return np.sqrt(self.power)

    @property
    def input_power(self) -> FloatArray:
        """Power density referred to the input, shape (..., nf) [V^2/Hz]."""
        if self.gain is None:
            raise UsageFault("this noise has no input.", hint="Give a source to compute_noise.")
        return np.asarray(self.power / np.abs(self.gain) ** 2)

    @property
    def input_density(self) -> FloatArray:
        """Density referred to the input, shape (..., nf) [V/sqrt(Hz)]."""
        return np.sqrt(self.input_power)

    def by_owner(self) -> dict[str, FloatArray]:
        """Sum the shares of each device.

        Returns
        -------
        dict of str to ndarray of float, shape (..., nf)
            Power density at the output [V^2/Hz], in the order of the sources.

        Examples
        --------
        >>> found = Noise(np.ones(1), np.array([[1.0, 2.0]]), ("a", "b"), ("m1", "m1"))
        >>> found.by_owner()
        {'m1': array([3.])}
        """
        return _group(self.shares, self.owners)

    def __repr__(self) -> str:
        return f"Noise({self.frequency.shape[-1]} frequencies, sources {', '.join(self.names)})"


@dataclass(frozen=True, eq=False)
class IntegratedNoise:
    """Noise at an output within a band.

    Parameters
    ----------
    band : tuple of float
        [Hz].
    shares : ndarray of float, shape (..., n_sources)
        Mean square at the output from each source [V^2].
    names, owners : tuple of str, length n_sources
        The sources, and the devices they belong to.

    Examples
    --------
    >>> IntegratedNoise((1.0, 2.0), np.array([9e-12, 16e-12]), ("a", "b"), ("a", "b"))
    IntegratedNoise(1 to 2 Hz, sources a, b)
    """

    band: tuple[float, float]
    shares: FloatArray
    names: tuple[str, ...]
    owners: tuple[str, ...]

    @property
    def power(self) -> FloatArray:
        """Mean square, shape (...) [V^2]."""
        return np.asarray(self.shares.sum(axis=-1))

    @property
    def rms(self) -> FloatArray:
        """Root mean square, shape (...) [V]."""
        return np.sqrt(self.power)

    def by_owner(self) -> dict[str, FloatArray]:
        """Sum the shares of each device.

        Returns
        -------
        dict of str to ndarray of float, shape (...)
            Mean square at the output [V^2], in the order of the sources.

        Examples
        --------
        >>> found = IntegratedNoise((1, 2), np.array([1.0, 2.0]), ("a", "b"), ("m1", "m2"))
        >>> {owner: float(power) for owner, power in found.by_owner().items()}
        {'m1': 1.0, 'm2': 2.0}
        """
        return _group(self.shares, self.owners)

    def __repr__(self) -> str:
        low, high = self.band
        return f"IntegratedNoise({low:g} to {high:g} Hz, sources {', '.join(self.names)})"


def _group(shares: FloatArray, owners: tuple[str, ...]) -> dict[str, FloatArray]:
    total: dict[str, FloatArray] = {}
    for k, owner in enumerate(owners):
        total[owner] = total[owner] + shares[..., k] if owner in total else shares[..., k]
    return total


@dataclass(frozen=True, eq=False)
class _Sources:
    """All noise sources of a network as arrays over a last axis of sources."""

    inject: FloatArray
    white: FloatArray
    flicker: FloatArray
    exponent: FloatArray

    @classmethod
    def of(cls, network: Structure) -> _Sources:
        sources = network.noise_sources
        if not sources:
            raise UsageFault(
                "the network has no noise source.",
                hint="Give its resistors a temperature, or use add_noise.",
            )
        columns = [
            s.signs[1] * network.observe(s.nodes[1]) - s.signs[0] * network.observe(s.nodes[0])
            for s in sources
        ]
        batch = np.broadcast_shapes(*(s.batch for s in sources))
        rows = [
            np.stack([np.broadcast_to(getattr(s, key), batch) for s in sources], axis=-1)
            for key in ("white", "flicker", "exponent")
        ]
        return cls(np.stack(columns, axis=-1), *rows)

    def density(self, frequency: FloatArray) -> FloatArray:
        """Return the densities of the currents, shape (..., nf, n_sources) [A^2/Hz]."""
        f = frequency[..., :, None]
        white, flicker = self.white[..., None, :], self.flicker[..., None, :]
        if not np.any(self.flicker):
            return np.asarray(white + 0.0 * f)
        if np.any(f <= 0):
            raise UsageFault("flicker noise has no value at 0 Hz.", hint="Start above 0 Hz.")
        return np.asarray(white + flicker * f ** -self.exponent[..., None, :])


def compute_noise(
    network: Structure, output: Output, frequency: ArrayLike, *, source: Source | None = None
) -> Noise:
    """Compute the noise at an output, the share of every source, and the noise at the input.

    Parameters
    ----------
    network : Network
        The network, its independent sources off.
    output : str, tuple of str, or mapping
        A node, a pair (plus, minus), or weights by node.
    frequency : array_like of float, shape (nf,) or (..., nf)
        [Hz]; leading axes broadcast with the batch of the network.
    source : str or mapping, optional
        The input that the noise is to be referred to.

    Returns
    -------
    Noise
        Densities over frequency.

    Raises
    ------
    UsageFault
        If there is no noise source, or flicker noise is asked for at 0 Hz.
    NoSolution
        If the equations have no unique solution.

    References
    ----------
    R. Rohrer, L. Nagel, R. Meyer, L. Weber, "Computationally efficient electronic-circuit
    noise calculations", IEEE J. Solid-State Circuits 6, 1971 (from memory).

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_resistor("r1", "out", "0", 1e3, temperature=26.85)
    >>> (compute_noise(net, "out", [1e3]).density * 1e9).round(5).tolist()
    [4.07035]
    """
    f = np.atleast_1d(np.asarray(frequency, dtype=np.float64))
    sources = _Sources.of(network)
    if f.size:
        network.check(2j * np.pi * float(f.min()))
    adjoint = solve_pencil(
        network.assemble(), 2j * np.pi * f, network.observe(output)[:, None], transpose=True
    )[..., 0]
    seen = adjoint @ sources.inject
    shares = (seen.real**2 + seen.imag**2) * sources.density(f)
    gain = None if source is None else adjoint @ network.drive(source)
    listed = network.noise_sources
    return Noise(f, shares, tuple(s.name for s in listed), tuple(s.owner for s in listed), gain)


def integrate_noise(
    network: Structure, output: Output, band: tuple[float, float], *, accuracy: float = 1e-6
) -> IntegratedNoise:
    """Integrate the noise at an output over a band.

    Adaptive quadrature over log frequency; panels are halved until every batch item meets
    the accuracy. A band may start at 0 (without flicker noise) and end at infinity: what lies
    10 000 times beyond the outermost poles is then added in closed form.

    Parameters
    ----------
    network : Network
        The network, its independent sources off.
    output : str, tuple of str, or mapping
        A node, a pair (plus, minus), or weights by node.
    band : tuple of float
        Lower and upper end [Hz].
    accuracy : float
        Relative accuracy of the mean square of every batch item [-].

    Returns
    -------
    IntegratedNoise
        Mean squares.

    Raises
    ------
    UsageFault
        If the band is empty, or starts at 0 while there is flicker noise.
    NoSolution
        If the integral does not converge.

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_resistor("r1", "out", "0", [1e3, 1e6], temperature=26.85)
    >>> net.add_capacitor("c1", "out", "0", 1e-12)
    >>> (integrate_noise(net, "out", (0.0, np.inf)).rms * 1e6).round(3).tolist()
    [64.358, 64.358]
    """
    low, high = float(band[0]), float(band[1])
    if not 0 <= low < high:
        raise UsageFault(f"a noise band from {low:g} to {high:g} Hz is empty or negative.")
    start, stop = _inner_band(network, low, high)
    shares = integrate_log(
        lambda f: compute_noise(network, output, f).shares, start, stop, accuracy=accuracy
    )
    if low == 0:
        shares = shares + start * compute_noise(network, output, [start]).shares[..., 0, :]
    if high == np.inf:
        shares = shares + _upper_tail(network, output, stop)
    listed = network.noise_sources
    return IntegratedNoise(
        (low, high), shares, tuple(s.name for s in listed), tuple(s.owner for s in listed)
    )


def _inner_band(network: Structure, low: float, high: float) -> tuple[float, float]:
    if low > 0 and high < np.inf:
        return low, high
    if low == 0 and any(np.any(s.flicker > 0) for s in network.noise_sources):
        raise UsageFault("flicker noise cannot be integrated from 0 Hz.", hint="Start above 0 Hz.")
    corners = np.abs(find_poles(network)) / (2 * np.pi)
    corners = corners[np.isfinite(corners) & (corners > 0)]
    if not corners.size:
        raise NoSolution("the noise of a network without poles has no end.")
    start = low if low > 0 else min(float(corners.min()), high) / _FAR
    return start, high if high < np.inf else max(float(corners.max()), start) * _FAR


def _upper_tail(network: Structure, output: Output, stop: float) -> FloatArray:
    """Add what lies above, where every share falls as 1/f^2 or faster."""
    shares = compute_noise(network, output, [stop, 2 * stop]).shares
    total = shares.sum(axis=-1)
    if np.any(total[..., 1] * 2 * stop > 0.6 * total[..., 0] * stop):
        raise NoSolution(
            "the noise integral up to infinite frequency does not converge.",
            hint="Give a finite band, or the output a capacitance.",
        )
    ratio = np.divide(shares[..., 1, :], shares[..., 0, :], where=shares[..., 0, :] > 0,
                      out=np.full(shares[..., 0, :].shape, 0.25))  # fmt: skip
    slope = -np.log2(np.clip(ratio, 1e-6, 0.6))
    return np.asarray(stop * shares[..., 0, :] / (slope - 1.0))


def find_owner_share(noise: Noise | IntegratedNoise, owner: str) -> FloatArray:
    """Return the part of the noise power that one device causes.

    Parameters
    ----------
    noise : Noise or IntegratedNoise
        A result.
    owner : str
        The device.

    Returns
    -------
    ndarray of float, shape (..., nf) or (...)
        Between 0 and 1 [-].

    Raises
    ------
    UnknownName
        If no noise source belongs to such a device.

    Examples
    --------
    >>> found = IntegratedNoise((1, 2), np.array([1.0, 3.0]), ("a", "b"), ("m1", "m2"))
    >>> float(find_owner_share(found, "m2"))
    0.75
    """
    groups = noise.by_owner()
    if owner not in groups:
        raise UnknownName(f"no noise source belongs to {owner}.", hint=advise(owner, groups))
    return np.asarray(groups[owner] / noise.power)
