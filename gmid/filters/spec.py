"""What a filter shall do: `FilterSpec`, and what real amplifiers may do to it: `Tolerance`."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

from gmid.errors import DataFault, GmidError, raise_faults
from gmid.filters.sections import Section
from gmid.filters.spec_checks import find_spec_faults, find_tolerance_faults

Edge = float | tuple[float, float]


@dataclass(frozen=True, kw_only=True)
class FilterSpec:
    """A filter as it is asked for.

    Parameters
    ----------
    response : str
        ``butterworth``, ``chebyshev``, ``inverse-chebyshev``, ``elliptic``, ``bessel``, or
        ``sections`` for given ones.
    kind : str
        ``lowpass``, ``highpass`` or ``bandpass``.
    order : int, optional
        Of the lowpass prototype; without it the least that meets the mask.
    edge : float or pair of float, optional
        End of the ripple band (chebyshev, elliptic), 3.0103 dB point (butterworth, bessel), end
        of the passband at `ripple_db` (inverse-chebyshev) [Hz]. Needed except with sections.
    ripple_db : float, optional
        Variation of the gain inside the passband [dB].
    stop_edge : float or pair of float, optional
        Where the stopband begins [Hz].
    attenuation_db : float, optional
        Of the stopband, counted from the largest gain [dB].
    gain_db : float, optional
        At DC, at the centre, at high frequency by kind; without it the largest gain is 1 [dB].
    style : str
        ``active-rc`` or ``gm-c``.
    swing : float, optional
        Peak of the largest node, differential [V].
    snr_db : float, optional
        Rms sine of peak `swing` over the output noise in `noise_band` [dB].
    noise_band : pair of float, optional
        [Hz].
    distortion_db : float, optional
        Third harmonic at `swing`, negative [dB]; -40 dB for gm-c where it is not given.
    distortion_at : float, optional
        Frequency of the fundamental [Hz].
    capacitor : float, optional
        Integrating capacitor, per side [F]; without it the smallest that gives `snr_db`.
    smallest_capacitor : float
        Bound of every capacitor, per side [F].
    largest_resistor : float
        Bound of every resistor, per side [ohm].
    source_resistance : float
        In front of the input, per side [ohm].
    load_capacitance, load_resistance : float
        At the output, per side [F], [ohm].
    correct_elements : str
        ``none``, or ``nominal``: element values corrected for the nominal amplifier.
    sections : tuple of Section
        The sections of response ``sections``.
    numerator, denominator : tuple of float
        In their place, the coefficients in s [rad/s], highest power first.

    Raises
    ------
    Faults
        If values are missing, contradict each other or cannot be; `where` is the key.

    Examples
    --------
    >>> FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    FilterSpec(chebyshev lowpass, order 5, edge 400000 Hz, active-rc)
    """

    response: str
    kind: str = "lowpass"
    order: int | None = None
    edge: Edge | None = None
    ripple_db: float | None = None
    stop_edge: Edge | None = None
    attenuation_db: float | None = None
    gain_db: float | None = None
    style: str = "active-rc"
    swing: float | None = None
    snr_db: float | None = None
    noise_band: tuple[float, float] | None = None
    distortion_db: float | None = None
    distortion_at: float | None = None
    capacitor: float | None = None
    smallest_capacitor: float = 0.0
    largest_resistor: float = float("inf")
    source_resistance: float = 0.0
    load_capacitance: float = 0.0
    load_resistance: float = float("inf")
    correct_elements: str = "none"
    sections: tuple[Section, ...] = ()
    numerator: tuple[float, ...] = ()
    denominator: tuple[float, ...] = ()

    def __post_init__(self) -> None:
        for name in ("edge", "stop_edge", "noise_band", "sections", "numerator", "denominator"):
            if isinstance(getattr(self, name), list):
                object.__setattr__(self, name, tuple(getattr(self, name)))
        raise_faults(find_spec_faults(self))

    @property
    def passband(self) -> tuple[float, float]:
        """Where the tolerance counts [Hz]: 0 to the edge, the edge to infinity, or the pair."""
        if self.edge is None:
            raise DataFault(
                "the passband of these sections is not known.", where="filter.edge",
                hint="Give edge, a pair for a bandpass.",
            )  # fmt: skip
        if isinstance(self.edge, tuple):
            return self.edge
        return (0.0, self.edge) if self.kind == "lowpass" else (self.edge, float("inf"))

    @property
    def reference_frequency(self) -> float:
        """Where `gain_db` is meant [Hz]: DC, the geometric centre, or infinity."""
        low, high = self.passband
        return {"lowpass": 0.0, "highpass": float("inf")}.get(self.kind, math.sqrt(low * high))

    @property
    def harmonic_limit_db(self) -> float | None:
        """Largest third harmonic [dB]; gm-c has one even where none is asked for."""
        if self.distortion_db is None and self.style == "gm-c":
            return -40.0
        return self.distortion_db

    @property
    def harmonic_frequency(self) -> float:
        """Frequency of the fundamental whose third harmonic counts [Hz].

        As asked for, else a third of the edge; of a highpass the edge, of a bandpass its centre.
        """
        if self.distortion_at is not None:
            return self.distortion_at
        low, high = self.passband
        if self.kind == "lowpass":
            return high / 3
        return low if self.kind == "highpass" else math.sqrt(low * high)

    def with_values(self, **values: Any) -> FilterSpec:
        """Return the specification with some values replaced, checked again.

        Parameters
        ----------
        **values : object
            By name of the field.

        Returns
        -------
        FilterSpec
            The new one.

        Examples
        --------
        >>> spec = FilterSpec(response="butterworth", order=3, edge=1e6)
        >>> spec.with_values(order=5)
        FilterSpec(butterworth lowpass, order 5, edge 1000000 Hz, active-rc)
        """
        return replace(self, **values)

    def __repr__(self) -> str:
        edge = self.edge if isinstance(self.edge, tuple) else (self.edge,)
        size = "auto" if self.order is None else str(self.order)
        if self.response == "sections":
            size = f"{len(self.sections)} sections" if self.sections else "from coefficients"
            return f"FilterSpec({self.kind}, {size}, {self.style})"
        text = " to ".join(f"{f:.10g}" for f in edge if f is not None)
        return (
            f"FilterSpec({self.response} {self.kind}, order {size}, edge {text} Hz, {self.style})"
        )


@dataclass(frozen=True, kw_only=True)
class Tolerance:
    """How far the real filter may be from the ideal one.

    Parameters
    ----------
    passband_db : float
        Largest deviation of the gain inside the passband [dB].
    counts : str
        ``all``; ``shape``, flat gain aside; ``tuned-shape``, flat gain and a common shift of
        all frequencies aside.
    stopband_db : float
        What the attenuation may lose against the smaller of the ideal and the specified [dB].
    up_to : float, optional
        Where the stopband ends, and the passband of a highpass [Hz].
    delay : float, optional
        Largest relative deviation of the group delay in the passband [-].

    Raises
    ------
    Faults
        If a value cannot be; `where` is the key.

    Examples
    --------
    >>> Tolerance(passband_db=0.2).counts
    'all'
    """

    passband_db: float
    counts: str = "all"
    stopband_db: float = 1.0
    up_to: float | None = None
    delay: float | None = None

    def __post_init__(self) -> None:
        faults: list[GmidError] = find_tolerance_faults(self)
        raise_faults(faults)
