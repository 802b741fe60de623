"""How far a response is from the ideal one, under the chosen meaning of the tolerance.

``all`` counts every deviation; ``shape`` leaves flat gain aside; ``tuned-shape`` leaves flat
gain and a common frequency shift aside, since tuning takes it out.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.errors import UsageFault
from gmid.filters.deviation_fit import (
    REACH,
    find_group_delay,
    find_step,
    interpolate,
    read_between,
    spread_points,
)
from gmid.network.pencil import ComplexArray, FloatArray

Response = Callable[[FloatArray], ComplexArray]
"""Frequencies of any shape [Hz] to complex values."""

MEANINGS = ("all", "shape", "tuned-shape")
"""What a tolerance may count."""

_TABLE = 20_001
_STEP = 1e-4
_ROUNDING = 1e-9
_TURNS = 3
_DECIBEL = 20.0 / np.log(10.0)


@dataclass(frozen=True)
class Allowance:
    """How much a response may differ from the ideal one.

    Parameters
    ----------
    passband_db : float
        Largest deviation in the passband [dB].
    counts : str
        One of `MEANINGS`.
    stopband_db : float
        By how much the attenuation may fall short [dB].
    delay : float, optional
        Largest relative deviation of the group delay in the passband [-].
    shift : float
        Largest frequency shift that tuning still takes out [-].
    gain_db : float
        Largest flat gain that is still left aside [dB].

    Raises
    ------
    UsageFault
        If the meaning is not known, or a value is not positive.

    Examples
    --------
    >>> Allowance(0.2).counts
    'tuned-shape'
    """

    passband_db: float
    counts: str = "tuned-shape"
    stopband_db: float = 1.0
    delay: float | None = None
    shift: float = 0.1
    gain_db: float = 2.0

    def __post_init__(self) -> None:
        if self.counts not in MEANINGS:
            raise UsageFault(
                f"a tolerance counts {self.counts!r}?", hint=f"Choose {', '.join(MEANINGS)}."
            )
        for name in ("passband_db", "stopband_db", "delay", "shift", "gain_db"):
            value = getattr(self, name)
            if value is not None and not value > 0:
                raise UsageFault(f"an allowance is positive, found {value} for {name}.")


@dataclass(frozen=True, eq=False)
class Deviation:
    """Deviations of a batch of responses.

    Parameters
    ----------
    passband_db : ndarray of float, shape (...)
        Largest deviation that counts in the passband [dB].
    gain_db : ndarray of float, shape (...)
        Flat gain left aside [dB].
    shift : ndarray of float, shape (...)
        Relative frequency shift left aside; negative where the response lies too low [-].
    stopband_db : ndarray of float, shape (...)
        Largest shortfall of the attenuation; minus infinity without a stopband [dB].
    delay : ndarray of float, shape (...)
        Largest relative deviation of the group delay; zero where it is not asked for [-].
    allowance : Allowance
        What they are held against.

    Examples
    --------
    >>> one = Deviation(*np.array([0.1, 0.0, 0.0, 0.9, 0.0]), Allowance(0.2))
    >>> float(one.usage), one.binding
    (0.9, 'stopband')
    """

    passband_db: FloatArray
    gain_db: FloatArray
    shift: FloatArray
    stopband_db: FloatArray
    delay: FloatArray
    allowance: Allowance

    @property
    def parts(self) -> dict[str, FloatArray]:
        """Used parts by name: passband, stopband, delay, shift, gain [-]."""
        limit = self.allowance
        return {
            "passband": np.asarray(self.passband_db / limit.passband_db),
            "stopband": np.maximum(self.stopband_db / limit.stopband_db, 0.0),
            "delay": np.asarray(self.delay if limit.delay is None else self.delay / limit.delay),
            "shift": np.asarray(np.abs(self.shift) / limit.shift),
            "gain": np.asarray(np.abs(self.gain_db) / limit.gain_db),
        }

    @property
    def usage(self) -> FloatArray:
        """The largest used part; above 1 where the tolerance is broken [-]."""
        return np.asarray(np.max(np.stack(list(self.parts.values())), axis=0))

    def pick(self, k: int) -> Deviation:
        """Return one entry of the first axis.

        Parameters
        ----------
        k : int
            Which one.

        Returns
        -------
        Deviation
            Without that axis.
        """
        names = ("passband_db", "gain_db", "shift", "stopband_db", "delay")
        return replace(self, **{name: getattr(self, name)[k] for name in names})

    @property
    def binding(self) -> str:
        """Name of the part that is used most anywhere in the batch."""
        parts = self.parts
        return max(parts, key=lambda name: float(np.max(parts[name])))


class Yardstick:
    """An ideal response, where it counts, and how a real one is held against it.

    Parameters
    ----------
    ideal : callable
        The ideal response.
    passband : tuple of float
        Ends of the passband, both above 0 [Hz].
    allowance : Allowance
        What may differ.
    stopbands : sequence of tuple
        Each (low, high) [Hz], where attenuation counts.
    attenuation_db : float
        Specified attenuation below the largest ideal gain of the passband; the smaller of this
        and the ideal one is required [dB].
    points : int
        Frequencies in the passband.

    Raises
    ------
    UsageFault
        If a band is empty.

    Examples
    --------
    >>> one = Yardstick(lambda f: 1 / (1 + 1j * f / 1e3), (1.0, 1e3), Allowance(0.2), points=80)
    >>> slow = one.measure(1 / (1 + 1j * one.frequency / 0.98e3))
    >>> round(float(slow.shift), 3), bool(slow.passband_db < 1e-3)
    (-0.02, True)
    """

    def __init__(
        self, ideal: Response, passband: tuple[float, float], allowance: Allowance, *,
        stopbands: tuple[tuple[float, float], ...] = (), attenuation_db: float = np.inf,
        points: int = 60,
    ) -> None:  # fmt: skip
        for low, high in (passband, *stopbands):
            if not 0 < low < high < np.inf:
                raise UsageFault(f"a band from {low:g} to {high:g} Hz is empty or has no end.")
        self.ideal = ideal
        self.allowance = allowance
        self.passband, self.stopbands = passband, stopbands
        low, high = (float(np.log(f)) for f in passband)
        self._log = np.linspace(low - REACH, high + REACH, _TABLE)
        values = ideal(np.exp(self._log))
        self._table = np.log(np.abs(values))
        self._slope = np.gradient(self._table, self._log)
        inside = (self._log >= low) & (self._log <= high)
        self.reference_db = float(_DECIBEL * self._table[inside].max())
        self._place = np.log(self._choose(values[inside], self._log[inside], points, passband))
        self._ideal = np.interp(self._place, self._log, self._table)
        # tuning moves the passband over the response, so that is needed on either side as well
        steps = max(4, points // 10) if self._is_tuned else 1
        extra = np.linspace(0.0, REACH, steps)[1:]
        self._grid = np.concatenate([low - np.flip(extra), self._place, high + extra])
        self._on_grid = np.interp(self._grid, self._log, self._table)
        f = np.exp(self._grid)
        parts = [f]
        self._delay: tuple[FloatArray, FloatArray] | None = None
        if allowance.delay is not None:
            parts += [f * (1 - _STEP), f * (1 + _STEP)]
            wide = np.exp(self._log)
            delay = find_group_delay(wide[:-1], values[:-1], wide[1:], values[1:])
            middle = 0.5 * (self._log[1:] + self._log[:-1])
            self._delay = middle, delay
        self._stops = [self._prepare(band, attenuation_db) for band in stopbands]
        near = 0.5 * REACH if self._is_tuned else 0.0
        stop = [spread_points(band, points, near) for band in stopbands]
        self._stop = np.log(np.concatenate(stop)) if stop else np.zeros(0)
        self.frequency = np.concatenate([*parts, np.exp(self._stop)])

    @property
    def shown(self) -> NDArray[np.intp]:
        """Places in `frequency`, ascending, that make a response to look at."""
        n, kinds = self._grid.size, 1 if self.allowance.delay is None else 3
        listed = np.concatenate([np.arange(n), np.arange(kinds * n, self.frequency.size)])
        order = np.argsort(self.frequency[listed], kind="stable")
        return np.asarray(listed[order])

    @property
    def _is_tuned(self) -> bool:
        return self.allowance.counts == "tuned-shape"

    def _prepare(
        self, band: tuple[float, float], attenuation_db: float
    ) -> tuple[FloatArray, FloatArray]:
        """Tabulate the attenuation that is required over a stopband."""
        f = np.geomspace(*band, _TABLE // 4)
        with np.errstate(divide="ignore"):
            fall = self.reference_db - _DECIBEL * np.log(np.abs(self.ideal(f)))
        return np.log(f), np.minimum(fall, attenuation_db)

    @staticmethod
    def _choose(
        values: ComplexArray, place: FloatArray, points: int, band: tuple[float, float]
    ) -> FloatArray:
        """Put the points where gain and phase move, some of them everywhere."""
        moves = np.abs(np.diff(np.log(np.abs(values)))) + np.abs(
            np.angle(values[1:] * np.conj(values[:-1]))
        )
        steps = moves + 0.3 * moves.sum() / moves.size
        length = np.concatenate([[0.0], np.cumsum(steps)])
        chosen = np.exp(np.interp(np.linspace(0.0, length[-1], points), length, place))
        chosen[0], chosen[-1] = band
        return np.asarray(chosen)

    def measure(self, response: ArrayLike) -> Deviation:
        """Measure responses.

        Parameters
        ----------
        response : array_like of complex, shape (..., nf)
            Values at `frequency`.

        Returns
        -------
        Deviation
            Of shape (...).
        """
        values = np.asarray(response)
        n = self._grid.size
        with np.errstate(divide="ignore"):
            size = np.log(np.abs(values))
        error = size[..., :n] - self._on_grid
        tuning, low, high = self._fit(error)
        gain = np.zeros(low.shape) if self.allowance.counts == "all" else 0.5 * (low + high)
        worst = np.asarray(_DECIBEL * np.maximum(high - gain, gain - low))
        short = self._find_shortfall(size, gain, tuning)
        delay = self._find_delay_error(values, tuning)
        decibel = np.asarray(_DECIBEL * gain)
        return Deviation(worst, decibel, np.expm1(-tuning), short, delay, self.allowance)

    def confirm(self, evaluate: Response) -> Deviation:
        """Measure a response that is given as a function.

        Parameters
        ----------
        evaluate : callable
            From frequencies (nf,) [Hz] to values (..., nf).

        Returns
        -------
        Deviation
            Of the batch of the response.
        """
        return self.measure(evaluate(self.frequency))

    def _fit(self, error: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Find the tuning with the least range; also the least and largest deviation there."""
        start = np.zeros(error.shape[:-1])
        if not self._is_tuned:
            return start, error.min(axis=-1), error.max(axis=-1)
        slope = np.gradient(error, self._grid, axis=-1)
        limit = 0.98 * REACH
        for _ in range(_TURNS):
            place = self._place - start[..., None]
            off, tilt = interpolate(self._grid, error, slope, place)
            here = np.interp(place, self._log, self._table) - self._ideal + off
            tilt = tilt + np.interp(place, self._log, self._slope)
            moved = np.clip(start + find_step(here, tilt), -limit, limit)
            step, start = moved - start, moved
        here = here - step[..., None] * tilt
        return start, here.min(axis=-1), here.max(axis=-1)

    def _find_shortfall(self, size: FloatArray, gain: FloatArray, tuning: FloatArray) -> FloatArray:
        """Hold the attenuation against what is required where the tuning puts each point."""
        short = np.full(gain.shape, -np.inf)
        if not self._stop.size:
            return short
        level = size[..., -self._stop.size :] - gain[..., None]
        fall = self.reference_db - _DECIBEL * level
        place = self._stop + tuning[..., None]
        for where, required in self._stops:
            inside = (place >= where[0] - _ROUNDING) & (place <= where[-1] + _ROUNDING)
            wanted = np.where(inside, np.interp(place, where, required), -np.inf)
            short = np.maximum(short, (wanted - fall).max(axis=-1))
            # the ends of the band lie between two points
            for end, needed in ((where[0], required[0]), (where[-1], required[-1])):
                point = np.broadcast_to(end - tuning, gain.shape)
                short = np.maximum(short, needed - read_between(self._stop, fall, point))
        return short

    def _find_delay_error(self, values: ComplexArray, tuning: FloatArray) -> FloatArray:
        if self._delay is None:
            return np.zeros(tuning.shape)
        n = self._grid.size
        one, two = (self.frequency[k * n : (k + 1) * n] for k in (1, 2))
        found = find_group_delay(one, values[..., n : 2 * n], two, values[..., 2 * n : 3 * n])
        if self._is_tuned:
            slope = np.gradient(found, self._grid, axis=-1)
            found, _ = interpolate(self._grid, found, slope, self._place - tuning[..., None])
            found = found * np.exp(-tuning)[..., None]
        wanted = np.interp(self._place, *self._delay)
        return np.asarray(np.abs(found / wanted - 1.0).max(axis=-1))

    def __repr__(self) -> str:
        low, high = self.passband
        return f"Yardstick({low:g} to {high:g} Hz, {self.allowance.counts})"
