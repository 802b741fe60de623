"""In which order sections follow one another, by trial.

At one impedance level an order has a noise power N and needs a sum B of transconductances. The
level is free: with the capacitors noise goes as 1/C, transconductance and current as C. So at one
signal-to-noise ratio the current goes with ``N B``, and the order with the least product is
chosen. Both are those of equal capacitors and equal peaks at all nodes.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import combinations, permutations

import numpy as np

from gmid.filters.pairing import level_sections
from gmid.filters.sections import Section, spread_frequencies
from gmid.network.pencil import ComplexArray, FloatArray

Cost = Callable[[tuple[Section, ...]], float]
"""What an order costs, given its sections with their gains shared."""

TRIED_ALL = 6
"""Up to so many sections all orders are tried; beyond, exchanges of two until none helps."""


def order_sections(
    sections: Sequence[Section], passband: tuple[float, float], *,
    noise_band: tuple[float, float] | None = None, style: str = "active-rc",
    cost: Cost | None = None,
) -> tuple[Section, ...]:  # fmt: skip
    """Put sections into the order of least cost and share the gain among them.

    Parameters
    ----------
    sections : sequence of Section
        Paired; their product is the response.
    passband : tuple of float
        Where the amplifiers' errors count [Hz]; may start at 0 and end at infinity.
    noise_band : tuple of float, optional
        Where noise counts [Hz]; the passband by default.
    style : str
        With ``gm-c`` a section that feeds in through a capacitor comes first, and B is the sum
        of all transconductors.
    cost : callable, optional
        Takes the place of noise power times transconductance.

    Returns
    -------
    tuple of Section
        Levelled, in the order of the cascade.

    Examples
    --------
    >>> pair = [Section(1e6, 5.0, k0=1.0), Section(6e5, k0=1.0)]
    >>> [section.order for section in order_sections(pair, (0.0, 1e6))]
    [1, 2]
    """
    listed = tuple(sections)
    if len(listed) == 1:
        return level_sections(listed)
    trial = CascadeCost(listed, passband, noise_band or passband, style)

    def judge(order: tuple[int, ...]) -> float:
        chosen = tuple(listed[k] for k in order)
        if style == "gm-c" and any(is_feed_in(section) for section in chosen[1:]):
            return np.inf
        return trial(order) if cost is None else cost(level_sections(chosen))

    best = _try_all(judge, len(listed)) if len(listed) <= TRIED_ALL else _exchange(judge, listed)
    return level_sections([listed[k] for k in best])


def is_feed_in(section: Section) -> bool:
    """Tell whether a section needs a capacitor at its input.

    Parameters
    ----------
    section : Section
        The section.

    Returns
    -------
    bool
        Whether its gain does not vanish at high frequency.

    Examples
    --------
    >>> is_feed_in(Section(1e6, k1=1.0)), is_feed_in(Section(1e6, 1.0, k1=1.0))
    (True, False)
    """
    return section.numerator[0] != 0


def _try_all(judge: Callable[[tuple[int, ...]], float], count: int) -> tuple[int, ...]:
    return min(permutations(range(count)), key=judge)


def _exchange(
    judge: Callable[[tuple[int, ...]], float], sections: tuple[Section, ...]
) -> tuple[int, ...]:
    start = sorted(
        range(len(sections)),
        key=lambda k: (not is_feed_in(sections[k]), sections[k].q or 0.0),
    )  # fmt: skip
    best, least = tuple(start), judge(tuple(start))
    while True:
        neighbours = [_swap(best, i, j) for i, j in combinations(range(len(best)), 2)]
        found = min(neighbours, key=judge)
        if not judge(found) < least:
            return best
        best, least = found, judge(found)


def _swap(order: tuple[int, ...], i: int, j: int) -> tuple[int, ...]:
    new = list(order)
    new[i], new[j] = new[j], new[i]
    return tuple(new)


class CascadeCost:
    """Noise power times needed transconductance of orders of the same sections.

    Parts that only depend on what precedes a section are kept, so that all orders of six
    sections cost some hundred evaluations.

    Parameters
    ----------
    sections : tuple of Section
        Their product is the response.
    passband, noise_band : tuple of float
        [Hz].
    style : str
        ``active-rc`` or ``gm-c``.

    Examples
    --------
    >>> pair = (Section(1e6, 5.0, k0=1.0), Section(6e5, k0=1.0))
    >>> trial = CascadeCost(pair, (0.0, 1e6), (0.0, 1e6), "active-rc")
    >>> trial((1, 0)) < trial((0, 1))
    True
    """

    def __init__(
        self, sections: tuple[Section, ...], passband: tuple[float, float],
        noise_band: tuple[float, float], style: str,
    ) -> None:  # fmt: skip
        self.sections = sections
        self.style = style
        self.frequency = spread_frequencies(sections)
        self.responses = [section.response(self.frequency) for section in sections]
        self.inner = [
            None if section.q is None else section.inner_response(self.frequency)
            for section in sections
        ]
        self.noisy, self.exact = (
            (self.frequency >= band[0]) & (self.frequency <= band[1])
            for band in (noise_band, passband)
        )
        for mask in (self.noisy, self.exact):
            if not mask.any():
                mask[:] = True
        self._peaks: dict[frozenset[int], float] = {}
        self._parts: dict[tuple[frozenset[int], int], tuple[float, dict[str, float]]] = {}
        self._needs: dict[tuple[frozenset[int], int, int | None], float] = {}

    def __call__(self, order: tuple[int, ...]) -> float:
        """Return the cost of an order, given as indices of the sections."""
        noise = need = 0.0
        for place, k in enumerate(order):
            before = frozenset(order[:place])
            noise += self._part(before, k)[0]
            following = order[place + 1] if place + 1 < len(order) else None
            key = (before, k, following)
            if key not in self._needs:
                self._needs[key] = self._need(*key)
            need += self._needs[key]
        return noise * need

    def _product(self, members: frozenset[int]) -> ComplexArray:
        total = np.ones(self.frequency.shape, dtype=np.complex128)
        for k in sorted(members):
            total = total * self.responses[k]
        return total

    def _peak(self, members: frozenset[int]) -> float:
        if members not in self._peaks:
            size = np.abs(self._product(members))
            self._peaks[members] = float(size.max())
        return self._peaks[members]

    def _part(self, before: frozenset[int], k: int) -> tuple[float, dict[str, float]]:
        """Return the noise a section causes at the output, and its conductances over C."""
        key = (before, k)
        if key not in self._parts:
            values = self._elements(before, k)
            self._parts[key] = (self._noise(before, k, values), values)
        return self._parts[key]

    def _elements(self, before: frozenset[int], k: int) -> dict[str, float]:
        section, whole = self.sections[k], self._peak(frozenset(range(len(self.sections))))
        entry = self._peak(before) / whole if before else 1.0
        gain = abs(entry * whole / self._peak(before | {k}))
        w0 = section.w0
        if section.q is None:
            return {"f": w0, "in_a": gain * abs(section.k0) * w0, "c_in": gain * abs(section.k1)}
        inner = np.abs(self._product(before) * self.inner[k])  # type: ignore[operator]
        alpha = float(inner.max()) / self._peak(before | {k}) or 1.0
        return {
            "ab": alpha * w0, "ba": w0 / alpha, "q": w0 / section.q,
            "in_a": gain * abs(section.k0) * w0 / alpha, "in_b": gain * abs(section.k1) * w0,
            "c_in": gain * abs(section.k2),
        }  # fmt: skip

    def _noise(self, before: frozenset[int], k: int, g: dict[str, float]) -> float:
        section = self.sections[k]
        f = self.frequency[self.noisy]
        s = 2j * np.pi * f
        if section.q is None:
            local = (g["f"] + g["in_a"]) / np.abs(s + section.w0) ** 2
        else:
            bottom = np.abs(s**2 + s * section.w0 / section.q + section.w0**2) ** 2
            at_b = (g["ab"] + g["q"] + g["in_b"]) * np.abs(s) ** 2
            local = (at_b + (g["ba"] + g["in_a"]) * g["ab"] ** 2) / bottom
        rest = frozenset(range(len(self.sections))) - before - {k}
        whole = self._peak(frozenset(range(len(self.sections))))
        passed = np.abs(self._product(rest)[self.noisy]) * self._peak(before | {k}) / whole
        return float(np.trapezoid(local * passed**2, f)) if f.size > 1 else float(local[0])

    def _need(self, before: frozenset[int], k: int, following: int | None) -> float:
        g = self._part(before, k)[1]
        if self.style == "gm-c":
            return sum(value for name, value in g.items() if name != "c_in")
        s = (2j * np.pi * self.frequency[self.exact]).astype(np.complex128)
        load: ComplexArray = np.zeros(s.shape, dtype=np.complex128)
        if following is not None:
            then = self._part(before | {k}, following)[1]
            load += s * then["c_in"] + (then["in_a"] + then.get("in_b", 0.0))
        section = self.sections[k]
        if section.q is None:
            feedback = s + g["f"]
            error = (load + feedback) * (g["in_a"] + s * g["c_in"] + feedback) / feedback
            return float(np.abs(error).max())
        return self._need_pair(section, g, s, load)

    def _need_pair(
        self, section: Section, g: dict[str, float], s: ComplexArray, load: ComplexArray
    ) -> float:
        """Sum the two largest relative errors of the response times gm, at C = 1."""
        loop = g["ab"] * g["ba"]
        y_a, y_b = s, s + g["q"]
        bottom = y_a * y_b + loop
        sign = np.sign(section.k0) * g["in_a"], np.sign(section.k1) * g["in_b"]
        feed = sign[1] + s * np.sign(section.k2) * g["c_in"]
        top = g["ab"] * sign[0] + y_a * feed
        safe = np.where(np.abs(top) > 1e-9 * np.abs(top).max(), top, np.inf)
        to_a: FloatArray = np.abs(feed / safe - y_b / bottom)
        to_b: FloatArray = np.abs(y_a / bottom)
        error_a = to_a * np.abs((g["ab"] + y_a) * (g["ba"] + g["in_a"] + y_a))
        outer = g["ab"] + g["in_b"] + s * g["c_in"] + y_b
        error_b = to_b * np.abs((g["ba"] + load + y_b) * outer)
        return float(error_a.max() + error_b.max())
