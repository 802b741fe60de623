"""Measures of a response: gain, crossings, margins, bandwidth and peak.

A response is anything that turns frequencies of shape (..., nf) [Hz] into complex values of
shape (..., nf): a `Transfer`, a loop gain, a closed form. It is surveyed on a grid, fast where
it has a ``scan``; each result is then refined by calls of the response itself, so that it does
not depend on the grid. What does not exist, such as the unity-gain frequency of a response
that stays below 1, is not-a-number in the arrays returned.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.errors import UsageFault
from gmid.network.pencil import ComplexArray, FloatArray

Response = Callable[[FloatArray], ComplexArray]
"""Frequencies (..., nf) [Hz] to complex values (..., nf)."""

_Kind = TypeVar("_Kind", bound=np.generic)
_PER_DECADE = 10
_LARGEST_STEP = np.deg2rad(100.0)
_FLOOR = 1e-6
_ROUNDS = 14
_CLOSE = 1e-13
_ACCEPTED = 1e-11
_ITERATIONS = 80
_CHORDS = 5


@dataclass(frozen=True, eq=False)
class _Survey:
    """A response on a grid dense enough to follow its phase, counted from DC."""

    frequency: FloatArray
    values: ComplexArray
    phase: FloatArray

    @classmethod
    def take(cls, response: Response, band: tuple[float, float], dc: FloatArray) -> _Survey:
        f, values = _sample(response, band)
        for _ in range(_ROUNDS):
            steps = np.abs(_angle(values[..., 1:], values[..., :-1]))
            wide = (steps > _LARGEST_STEP) & _matters(values)[..., 1:]
            wide = np.any(wide.reshape(-1, f.size - 1), axis=0)
            if not wide.any():
                break
            middle = np.sqrt(f[1:] * f[:-1])[wide]
            extra = getattr(response, "scan", response)(middle)
            order = np.argsort(np.concatenate([f, middle]))
            f = np.concatenate([f, middle])[order]
            values = np.concatenate([values, extra], axis=-1)[..., order]
        steps = _angle(values[..., 1:], values[..., :-1])
        first = _angle(values[..., :1], np.asarray(dc)[..., None].astype(np.complex128))
        return cls(f, values, np.cumsum(np.concatenate([first, steps], axis=-1), axis=-1))


@dataclass(frozen=True, eq=False)
class LoopMeasures:
    """What is asked of a loop gain or of an amplifier that is to be put into a loop.

    Parameters
    ----------
    dc_gain : ndarray of float, shape (...)
        Gain at DC with its sign [-].
    gbw : ndarray of float, shape (...)
        First frequency at which the gain falls through 1 [Hz].
    phase_margin : ndarray of float, shape (...)
        180 degrees less the phase lag there, counted from DC [deg].

    Examples
    --------
    >>> measure_loop(lambda f: 1e3 / (1 + 1j * f / 1e3))
    LoopMeasures(dc_gain=1000, gbw=999999, phase_margin=90.0573)
    """

    dc_gain: FloatArray
    gbw: FloatArray
    phase_margin: FloatArray
    _response: Response
    _survey: _Survey

    @cached_property
    def gain_margin(self) -> FloatArray:
        """Inverse of the gain where the lag reaches 180 degrees, of shape (...) [-].

        Infinite if it does not while the gain is above a millionth of its largest value.
        """
        return _measure_gain_margin(self._response, self._survey)

    def __repr__(self) -> str:
        values = {name: getattr(self, name) for name in ("dc_gain", "gbw", "phase_margin")}
        parts = (
            f"{name}={value:.6g}" if np.ndim(value) == 0 else f"{name}{np.shape(value)}"
            for name, value in values.items()
        )
        return f"LoopMeasures({', '.join(parts)})"


def _sample(response: Response, band: tuple[float, float]) -> tuple[FloatArray, ComplexArray]:
    low, high = band
    if not 0 < low < high < np.inf:
        raise UsageFault(f"cannot search between {low:g} and {high:g} Hz.")
    f = np.geomspace(low, high, int(np.ceil(_PER_DECADE * np.log10(high / low))) + 1)
    return f, np.asarray(getattr(response, "scan", response)(f))


def _matters(values: ComplexArray) -> NDArray[np.bool_]:
    """Tell where a response is above a millionth of its largest value."""
    size = np.abs(values)
    return np.asarray(size > _FLOOR * size.max(axis=-1, keepdims=True))


def _angle(value: ComplexArray, reference: ComplexArray) -> FloatArray:
    return np.asarray(np.angle(value * np.conj(reference)))


Excess = Callable[[ComplexArray], FloatArray]
"""What is to become zero, from the values of a response."""


def _call(response: Response, log_frequency: FloatArray) -> ComplexArray:
    return np.asarray(response(np.exp(log_frequency)[..., None])[..., 0])


def _locate(response: Response, excess: Excess, low: FloatArray, high: FloatArray) -> FloatArray:
    """Find log frequencies where an excess is zero, with few calls of the response itself.

    Where there is a scan, its root is corrected by a few steps along its slope; only if those
    leave more than rounding is the bracket closed on the response itself.
    """

    def exact(x: FloatArray) -> FloatArray:
        return excess(_call(response, x))

    scan = getattr(response, "scan", None)
    if scan is not None:
        x = _close_bracket(lambda x: excess(_call(scan, x)), low, high)
        there = high > low
        slope = (excess(_call(scan, x + 1e-4)) - excess(_call(scan, x - 1e-4))) / 2e-4
        rising = there & (slope != 0)
        for _ in range(_CHORDS):
            left = exact(x)
            if not np.any(there & (np.abs(left) > _ACCEPTED)):
                return x
            x = np.where(rising, np.clip(x - left / np.where(rising, slope, 1.0), low, high), x)
    return _close_bracket(exact, low, high)


def _close_bracket(
    function: Callable[[FloatArray], FloatArray], low: FloatArray, high: FloatArray
) -> FloatArray:
    """Close brackets by the Illinois variant of false position, all items together.

    An item whose bracket has no width keeps its place.
    """
    a, b = np.asarray(low, dtype=np.float64), np.asarray(high, dtype=np.float64)
    ya, yb = function(a), function(b)
    for _ in range(_ITERATIONS):
        if np.all((np.abs(yb) <= _CLOSE) | (np.abs(b - a) <= _CLOSE) | np.isnan(yb)):
            break
        slope = np.where(yb == ya, 1.0, yb - ya)
        x = np.clip(np.where(yb == 0, b, b - yb * (b - a) / slope), low, high)
        y = function(x)
        kept = np.sign(y) == np.sign(yb)
        a, ya = np.where(kept, a, b), np.where(kept, 0.5 * ya, yb)
        b, yb = x, y
    return b


def _first_fall(above: NDArray[np.bool_]) -> tuple[NDArray[np.intp], NDArray[np.bool_]]:
    """Find the first place where a condition ends, and whether there is one."""
    falls = above[..., :-1] & ~above[..., 1:]
    return np.asarray(np.argmax(falls, axis=-1)), np.asarray(falls.any(axis=-1))


def _pick(array: NDArray[_Kind], index: NDArray[np.intp]) -> NDArray[_Kind]:
    shape = (*index.shape, array.shape[-1])
    return np.take_along_axis(np.broadcast_to(array, shape), index[..., None], axis=-1)[..., 0]


def _refine_fall(
    response: Response, f: FloatArray, values: ComplexArray, level: FloatArray
) -> tuple[FloatArray, NDArray[np.intp]]:
    size = np.abs(values)
    index, there = _first_fall((size > level[..., None]) & np.isfinite(size))

    low, high = np.log(_pick(f, index)), np.log(_pick(f, index + there))
    with np.errstate(divide="ignore", invalid="ignore"):
        x = _locate(response, lambda value: np.log(np.abs(value) / level), low, high)
    return np.where(there, np.exp(x), np.nan), index


def measure_dc_gain(response: Response) -> FloatArray:
    """Return the gain at DC with its sign.

    Parameters
    ----------
    response : callable
        The response.

    Returns
    -------
    ndarray of float, shape (...)
        [-].

    Examples
    --------
    >>> float(measure_dc_gain(lambda f: -10 / (1 + 1j * f)))
    -10.0
    """
    return np.asarray(np.real(response(np.zeros(1))[..., 0]))


def measure_gain(response: Response, frequency: ArrayLike) -> FloatArray:
    """Return the magnitude of a response.

    Parameters
    ----------
    response : callable
        The response.
    frequency : array_like of float, shape (nf,) or (..., nf)
        [Hz].

    Returns
    -------
    ndarray of float, shape (..., nf)
        [-].

    Examples
    --------
    >>> measure_gain(lambda f: 10 / (1 + 1j * f), [0.0]).tolist()
    [10.0]
    """
    return np.abs(response(np.asarray(frequency, dtype=np.float64)))


def find_crossing(
    response: Response, level: ArrayLike = 1.0, *, band: tuple[float, float] = (1.0, 1e12)
) -> FloatArray:
    """Find the first frequency at which the gain falls through a level; gbw for level 1.

    Parameters
    ----------
    response : callable
        The response.
    level : array_like of float, shape (...)
        Gain to look for [-].
    band : tuple of float
        Where to search [Hz].

    Returns
    -------
    ndarray of float, shape (...)
        [Hz]; not-a-number where the gain does not fall through the level inside the band.

    Examples
    --------
    >>> float(find_crossing(lambda f: 1e6 / (1j * f)).round(6))
    1000000.0
    """
    f, values = _sample(response, band)
    batch = np.broadcast_shapes(values.shape[:-1], np.shape(level))
    wanted = np.broadcast_to(np.asarray(level, dtype=np.float64), batch)
    return _refine_fall(response, f, values, wanted)[0]


def find_bandwidth(
    response: Response, *, drop: float = 2.0, band: tuple[float, float] = (1.0, 1e12)
) -> FloatArray:
    """Find where the power gain has first fallen by a factor from its value at DC.

    Parameters
    ----------
    response : callable
        The response.
    drop : float
        Factor of power; 2 is the 3.01 dB point [-].
    band : tuple of float
        Where to search [Hz].

    Returns
    -------
    ndarray of float, shape (...)
        [Hz]; not-a-number where there is none inside the band.

    Examples
    --------
    >>> float(find_bandwidth(lambda f: 10 / (1 + 1j * f / 1e3)).round(9))
    1000.0
    """
    level = np.abs(measure_dc_gain(response)) / np.sqrt(drop)
    return find_crossing(response, level, band=band)


def measure_loop(
    response: Response, *, band: tuple[float, float] = (1.0, 1e12), sign: int | None = None
) -> LoopMeasures:
    """Measure DC gain, unity-gain frequency and margins in one survey.

    Parameters
    ----------
    response : callable
        A loop gain, or an amplifier's gain of either sign.
    band : tuple of float
        Where to search [Hz].
    sign : int, optional
        Sign of the feedback, for a response that has no value at DC (an ideal integrator); its
        `dc_gain` is then not-a-number. By default the sign of the gain at DC.

    Returns
    -------
    LoopMeasures
        Arrays of the batch; not-a-number where the gain does not fall through 1.

    References
    ----------
    H. W. Bode, "Network analysis and feedback amplifier design", 1945 (from memory).

    Examples
    --------
    >>> found = measure_loop(lambda f: 1e3 / (1 + 1j * f / 1e3) / (1 + 1j * f / 1e6))
    >>> float(found.phase_margin.round(2))
    51.9
    """
    dc = measure_dc_gain(response) if sign is None else np.asarray(np.nan)
    survey = _Survey.take(response, band, dc if sign is None else np.asarray(float(sign)))
    batch = survey.values.shape[:-1]
    gbw, index = _refine_fall(response, survey.frequency, survey.values, np.ones(batch))
    x = np.log(np.where(np.isnan(gbw), band[0], gbw))
    start = _pick(survey.values, index)
    lag = _pick(survey.phase, index) + _angle(_call(response, x), start)
    margin = np.where(np.isnan(gbw), np.nan, 180.0 + np.rad2deg(lag))
    dc = np.broadcast_to(dc, batch).copy()
    return LoopMeasures(dc, gbw, margin, response, survey)


def _measure_gain_margin(response: Response, survey: _Survey) -> FloatArray:
    index, there = _first_fall((survey.phase > -np.pi) | ~_matters(survey.values))
    if not there.any():
        known = np.isfinite(survey.phase[..., 0])
        return np.where(known, np.inf, np.nan)
    start, lag = _pick(survey.values, index), _pick(survey.phase, index)

    def excess(value: ComplexArray) -> FloatArray:
        return np.asarray(np.pi + lag + _angle(value, start))

    low, high = (np.log(_pick(survey.frequency, index + k)) for k in (0, there))
    size = np.abs(_call(response, _locate(response, excess, low, high)))
    margin = np.where(there, 1.0 / np.where(there, size, 1.0), np.inf)
    return np.where(np.isfinite(survey.phase[..., 0]), margin, np.nan)


def find_peak(
    response: Response, *, band: tuple[float, float] = (1.0, 1e12)
) -> tuple[FloatArray, FloatArray]:
    """Find the largest gain inside a band.

    Parameters
    ----------
    response : callable
        The response.
    band : tuple of float
        Where to search [Hz]; a peak narrower than a tenth of a decade may hide.

    Returns
    -------
    frequency, gain : ndarray of float, shape (...)
        Place [Hz] and size [-] of the peak; an end of the band if there is none inside.

    Examples
    --------
    >>> f, gain = find_peak(lambda f: 1 / (1 - f**2 + 1j * f), band=(0.01, 100.0))
    >>> round(float(f), 4), round(float(gain), 5)
    (0.7071, 1.1547)
    """
    f, values = _sample(response, band)
    index = np.asarray(np.argmax(np.abs(values), axis=-1))
    low = np.log(_pick(f, np.maximum(index - 1, 0)))
    high = np.log(_pick(f, np.minimum(index + 1, f.size - 1)))
    share = np.linspace(0.0, 1.0, 9)
    for _ in range(14):
        x = low[..., None] + (high - low)[..., None] * share
        size = np.abs(response(np.exp(x)))
        best = np.asarray(np.argmax(size, axis=-1))
        low, high = _pick(x, np.maximum(best - 1, 0)), _pick(x, np.minimum(best + 1, 8))
    return np.exp(_pick(x, best)), _pick(size, best)
