"""`Section`: one first- or second-order factor of a filter."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UsageFault
from gmid.network.pencil import ComplexArray, FloatArray


@dataclass(frozen=True)
class Section:
    """One factor ``(k2 S^2 + k1 S + k0)/(S^2 + S/q + 1)`` with ``S = s/w0``, or of first order.

    Without `q` it is of first order, ``(k1 S + k0)/(S + 1)``.

    Parameters
    ----------
    f0 : float
        ``w0/(2 pi)`` [Hz].
    q : float, optional
        Quality factor of the pole pair [-].
    k2, k1, k0 : float
        Coefficients of the numerator, normalised to w0 [-].

    Raises
    ------
    UsageFault
        If f0 or q is not positive, a value is not finite, the numerator is zero, or a section
        of first order has a k2.

    Examples
    --------
    >>> Section(1e6, 0.5, k0=1.0)
    Section(f0=1e+06, q=0.5, k2=0, k1=0, k0=1)
    >>> Section(1e6, k0=1.0).order
    1
    """

    f0: float
    q: float | None = None
    k2: float = 0.0
    k1: float = 0.0
    k0: float = 0.0

    def __post_init__(self) -> None:
        values = (self.f0, 1.0 if self.q is None else self.q, self.k2, self.k1, self.k0)
        if not all(np.isfinite(values)):
            raise UsageFault(f"a section needs finite values, found {values}.")
        if self.f0 <= 0 or (self.q is not None and self.q <= 0):
            raise UsageFault(f"f0 and q of a section are positive, found {self.f0:g}, {self.q}.")
        if self.q is None and self.k2 != 0:
            raise UsageFault("a section of first order (no q) has no k2.")
        if self.k2 == self.k1 == self.k0 == 0:
            raise UsageFault(f"the section at {self.f0:g} Hz has no numerator.")

    @property
    def order(self) -> int:
        """Number of poles, 1 or 2."""
        return 1 if self.q is None else 2

    @property
    def w0(self) -> float:
        """Angular frequency [rad/s]."""
        return float(2 * np.pi * self.f0)

    @property
    def numerator(self) -> tuple[float, ...]:
        """Coefficients in S, highest power first; as many as the denominator has."""
        return (self.k1, self.k0) if self.q is None else (self.k2, self.k1, self.k0)

    @property
    def denominator(self) -> tuple[float, ...]:
        """Coefficients in S, highest power first."""
        return (1.0, 1.0) if self.q is None else (1.0, 1.0 / self.q, 1.0)

    @property
    def poles(self) -> ComplexArray:
        """Poles, shape (order,) [rad/s]."""
        if self.q is None:
            return np.array([complex(-self.w0)])
        half = 0.5 / self.q
        root = np.sqrt(complex(half**2 - 1.0))
        first = -half - root
        return np.array([self.w0 * first, self.w0 / first])

    @property
    def zeros(self) -> ComplexArray:
        """Finite zeros [rad/s]."""
        return self.w0 * np.roots(self.numerator).astype(np.complex128)

    def response(self, frequency: ArrayLike) -> ComplexArray:
        """Compute the transfer from the coefficients.

        Parameters
        ----------
        frequency : array_like of float, shape (...)
            [Hz]; infinity is allowed.

        Returns
        -------
        ndarray of complex, shape (...)
            The transfer [-].

        Examples
        --------
        >>> Section(1e6, 2.0, k1=0.5).response([1e6, np.inf]).real.tolist()
        [1.0, 0.0]
        """
        f = np.asarray(frequency, dtype=np.float64)
        far = f > self.f0
        with np.errstate(divide="ignore"):
            s = 1j * np.where(far, -self.f0 / f, np.where(far, 0.0, f) / self.f0)
        above = np.polyval(self.numerator[::-1], s), np.polyval(self.denominator[::-1], s)
        below = np.polyval(self.numerator, s), np.polyval(self.denominator, s)
        return np.where(far, above[0] / above[1], below[0] / below[1]).astype(np.complex128)

    def inner_response(self, frequency: ArrayLike) -> ComplexArray:
        """Compute the transfer to the inner node of a two-integrator loop with alpha = 1.

        Parameters
        ----------
        frequency : array_like of float, shape (...)
            [Hz], finite.

        Returns
        -------
        ndarray of complex, shape (...)
            ``H (S + 1/q) - (k2 S + k1)`` [-].

        Raises
        ------
        UsageFault
            If the section is of first order.

        Examples
        --------
        >>> Section(1e6, 2.0, k1=0.5).inner_response([1e6]).round(9).tolist()
        [1j]
        """
        if self.q is None:
            raise UsageFault("a section of first order has no inner node.")
        s = 1j * np.asarray(frequency, dtype=np.float64) / self.f0
        # multiplied out, the highest powers cancel
        top = (self.k0 - self.k2) * s + (self.k0 / self.q - self.k1)
        return np.asarray(top / np.polyval(self.denominator, s), dtype=np.complex128)

    def scaled(self, factor: float) -> Section:
        """Return the section with its gain multiplied.

        Parameters
        ----------
        factor : float
            May be negative [-].

        Returns
        -------
        Section
            The new section.

        Examples
        --------
        >>> Section(1e6, 0.5, k0=1.0).scaled(-2.0)
        Section(f0=1e+06, q=0.5, k2=0, k1=0, k0=-2)
        """
        k2, k1, k0 = (0.0 if k == 0 else k * factor for k in (self.k2, self.k1, self.k0))
        return replace(self, k2=k2, k1=k1, k0=k0)

    def __repr__(self) -> str:
        q = "" if self.q is None else f" q={self.q:.6g},"
        k2 = "" if self.q is None else f" k2={self.k2:.6g},"
        return f"Section(f0={self.f0:.6g},{q}{k2} k1={self.k1:.6g}, k0={self.k0:.6g})"


def cascade_response(sections: Iterable[Section], frequency: ArrayLike) -> ComplexArray:
    """Multiply the transfers of sections.

    Parameters
    ----------
    sections : iterable of Section
        The factors.
    frequency : array_like of float, shape (...)
        [Hz].

    Returns
    -------
    ndarray of complex, shape (...)
        The product [-].

    Examples
    --------
    >>> two = [Section(1e6, k0=2.0), Section(1e6, k0=3.0)]
    >>> cascade_response(two, [0.0]).real.tolist()
    [6.0]
    """
    f = np.asarray(frequency, dtype=np.float64)
    total = np.ones(f.shape, dtype=np.complex128)
    for section in sections:
        total = total * section.response(f)
    return total


def spread_frequencies(sections: Iterable[Section], *, decades: float = 3.0) -> FloatArray:
    """Choose frequencies that show every peak of a cascade.

    Parameters
    ----------
    sections : iterable of Section
        The factors.
    decades : float
        How far to go beyond the outermost poles.

    Returns
    -------
    ndarray of float, shape (n,)
        Ascending [Hz]: 40 a decade, and 33 across each resonance.

    Examples
    --------
    >>> f = spread_frequencies([Section(1e6, 10.0, k0=1.0)])
    >>> bool(f[0] <= 1e3 and f[-1] >= 1e9)
    True
    """
    listed = list(sections)
    edges = [np.abs(np.r_[s.poles, s.zeros[np.abs(s.zeros) > 0]]) / (2 * np.pi) for s in listed]
    low, high = (float(pick(np.concatenate(edges))) for pick in (np.min, np.max))
    count = int(40 * (np.log10(high / low) + 2 * decades)) + 1
    grid = [np.geomspace(low / 10**decades, high * 10**decades, count)]
    for section in listed:
        if section.q is not None and section.q > 0.7:
            grid.append(section.f0 * np.exp(np.sinh(np.linspace(-3, 3, 33)) / (2 * section.q) / 3))
    return np.unique(np.concatenate(grid))
