"""The common mode of a filter: it does not see the crossings.

What is negative feedback for the signal around a two-integrator loop is then positive feedback,
so that the common-mode gain of the amplifiers must stay small there.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.filters.elements import AmplifierModel
from gmid.filters.realisation import Realisation
from gmid.network import find_poles
from gmid.network.pencil import ComplexArray, FloatArray

LARGEST_GAIN = 1e3
"""Where the search for the limit of the common-mode gain ends [-]."""

_OUTPUT = 1e-3
_FIRST = 0.1
_STEP = 1.1
_TOGETHER = 24
_ACCURACY = 1e-4
_EDGE = 1e-9


@dataclass(frozen=True)
class CommonModeLimit:
    """Up to which common-mode gain a filter is stable.

    Parameters
    ----------
    gain : float
        Largest magnitude of the gain from input to output common mode, all amplifiers alike,
        up to which no pole is in the right half plane; infinite if there is none up to
        `LARGEST_GAIN` [-].
    sign : int
        1 if an amplifier that does not invert the common mode sets it, -1 if one that inverts.
    section : int
        Whose loop becomes unstable first, from 1; 0 without a limit.

    Examples
    --------
    >>> CommonModeLimit(2.5, -1, 1).gain
    2.5
    """

    gain: float
    sign: int
    section: int

    def describe(self) -> str:
        """Say why in one sentence."""
        if not np.isfinite(self.gain):
            return f"the common mode is stable up to a gain of {LARGEST_GAIN:g}"
        kind = "does not invert" if self.sign > 0 else "inverts"
        return (
            f"the common mode does not see the crossed wires: section {self.section} becomes "
            f"unstable with amplifiers whose common mode {kind} with a gain of {self.gain:.3g}"
        )


def find_common_mode_poles(
    realisation: Realisation, gain: ArrayLike, *, sign: int = -1
) -> ComplexArray:
    """Find the poles of the common mode with amplifiers of a given common-mode gain.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    gain : array_like of float, shape (...)
        Magnitude of the gain from input to output common mode [-].
    sign : int
        1 if it does not invert, -1 if it inverts.

    Returns
    -------
    ndarray of complex, shape (..., n)
        [rad/s].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=2, edge=1e6), capacitor=2e-12)
    >>> bool((find_common_mode_poles(made, 0.5).real < 0).all())
    True
    """
    model = _model(realisation, np.asarray(gain, dtype=np.float64), sign)
    return find_poles(realisation.network(model, common_mode=True))


def _model(realisation: Realisation, gain: ArrayLike, sign: int) -> dict[str, AmplifierModel]:
    """Make amplifiers whose low output impedance is that of a common-mode loop."""
    conductances = [
        1.0 / e.value if e.kind == "resistor" else e.value
        for e in realisation.elements if e.kind != "capacitor"
    ]  # fmt: skip
    strong = max(conductances) / _OUTPUT
    # an active-RC amplifier draws its current out of the output, a transconductor delivers it
    turn = -sign if realisation.style == "active-rc" else sign
    one = AmplifierModel(gm_total=turn * strong * np.asarray(gain), output_conductance=strong)
    return {place.name: one for place in realisation.amplifiers}


def find_common_mode_limit(realisation: Realisation, *, sign: int | None = None) -> CommonModeLimit:
    """Find the common-mode gain up to which a filter is stable.

    The outputs are taken to follow their common-mode loop, with an impedance far below that of
    the filter. An amplifier that does not invert the common mode drives its own integrator
    against its input; one that inverts makes a latch of the two-integrator loop.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    sign : int, optional
        1 for amplifiers that do not invert the common mode, -1 for those that invert; by
        default whichever allows less.

    Returns
    -------
    CommonModeLimit
        The limit and what sets it.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5),
    ...                capacitor=4e-12)
    >>> round(find_common_mode_limit(made, sign=-1).gain, 2)
    1.81
    """
    found = [_search(realisation, one) for one in ((-1, 1) if sign is None else (sign,))]
    return min(found, key=lambda limit: limit.gain)


def _search(realisation: Realisation, sign: int) -> CommonModeLimit:
    steps = int(np.ceil(np.log(LARGEST_GAIN / _FIRST) / np.log(_STEP))) + 1
    gains = np.concatenate([[0.0], _FIRST * _STEP ** np.arange(steps)])
    for part in np.array_split(gains[1:], max(1, steps // _TOGETHER)):
        bad = ~_are_stable(find_common_mode_poles(realisation, part, sign=sign))
        if bad.any():
            break
    else:
        return CommonModeLimit(np.inf, sign, 0)
    high = float(part[np.argmax(bad)])
    low = float(gains[np.searchsorted(gains, high) - 1])
    while high - low > _ACCURACY * high:
        between = np.linspace(low, high, _TOGETHER)
        bad = ~_are_stable(find_common_mode_poles(realisation, between[1:-1], sign=sign))
        k = int(np.argmax(np.append(bad, True)))
        low, high = float(between[k]), float(between[k + 1])
    return CommonModeLimit(low, sign, _find_culprit(realisation, high, sign))


def _are_stable(poles: ComplexArray) -> NDArray[np.bool_]:
    """Say of each row of poles whether all are in the left half plane."""
    size = np.where(np.isfinite(poles), np.abs(poles), 0.0)
    real: FloatArray = np.where(np.isfinite(poles), poles.real, -np.inf)
    return np.asarray(np.all(real <= _EDGE * size.max(axis=-1, keepdims=True), axis=-1))


def is_stable(poles: ComplexArray) -> bool:
    """Say whether all poles are in the left half plane.

    Parameters
    ----------
    poles : ndarray of complex, shape (..., n)
        [rad/s]; not-a-number is no pole.

    Returns
    -------
    bool
        The verdict for the whole batch.

    Examples
    --------
    >>> is_stable(np.array([-1.0 + 1j, -1.0 - 1j])), is_stable(np.array([0.1 + 0j]))
    (True, False)
    """
    there = poles[np.isfinite(poles)]
    return bool(np.all(there.real <= _EDGE * np.abs(there).max(initial=0.0)))


def _find_culprit(realisation: Realisation, gain: float, sign: int) -> int:
    """Find the section whose amplifiers, made harmless, stabilise the common mode."""
    full = _model(realisation, gain, sign)
    still = _model(realisation, 0.0, sign)
    rest = {}
    for section in dict.fromkeys(place.section for place in realisation.amplifiers):
        mixed = {
            place.name: (still if place.section == section else full)[place.name]
            for place in realisation.amplifiers
        }
        poles = find_poles(realisation.network(mixed, common_mode=True))
        rest[section] = float(np.max(poles.real[np.isfinite(poles)], initial=-np.inf))
    return min(rest, key=lambda section: rest[section])
