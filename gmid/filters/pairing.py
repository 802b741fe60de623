"""Which poles and zeros make up a section, and how a gain is shared among sections."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import lru_cache

import numpy as np

from gmid.filters.responses import RationalResponse
from gmid.filters.sections import Section, cascade_response, spread_frequencies
from gmid.network.pencil import ComplexArray, FloatArray

_REAL = 1e-9
_ZOOMS = 5


def pair_sections(response: RationalResponse) -> tuple[Section, ...]:
    """Make sections of poles and zeros: the highest Q takes the nearest zeros first.

    Real poles are paired two by two, so that at most one section is of first order. Zeros on
    the real axis and at infinity fill what is left, evenly: a bandpass of poles only becomes
    sections with one zero at DC and one at infinity.

    Parameters
    ----------
    response : RationalResponse
        The response.

    Returns
    -------
    tuple of Section
        Descending in Q, the one of first order last. The product of all is the response; each
        section but the first has a largest numerator coefficient of 1.

    References
    ----------
    R. Schaumann, M. Van Valkenburg, "Design of analog filters", 2001, chapter on cascades (from
    memory): pairing of poles with the closest zeros.

    Examples
    --------
    >>> from gmid.filters.responses import find_response
    >>> from gmid.filters import FilterSpec
    >>> pair_sections(find_response(FilterSpec(response="butterworth", order=3, edge=1e6)))
    (Section(f0=1e+06, q=1, k2=0, k1=0, k0=1), Section(f0=1e+06, k1=0, k0=1))
    """
    groups = _group_poles(response.poles)
    taken = _assign_zeros(groups, response.zeros)
    factor = response.gain
    sections = []
    for poles, zeros in zip(groups, taken, strict=True):
        section, leading = _make_section(poles, zeros)
        factor *= leading
        sections.append(section)
    return (sections[0].scaled(factor), *sections[1:])


def _split(roots: ComplexArray) -> tuple[list[complex], list[float]]:
    """Split into upper members of conjugate pairs and real ones."""
    size = np.abs(roots)
    upper = [complex(r) for r, a in zip(roots, size, strict=True) if r.imag > _REAL * a]
    real = [float(r.real) for r, a in zip(roots, size, strict=True) if abs(r.imag) <= _REAL * a]
    return upper, real


def _group_poles(poles: ComplexArray) -> list[tuple[complex, ...]]:
    upper, real = _split(poles)
    groups: list[tuple[complex, ...]] = [(p, p.conjugate()) for p in upper]
    real.sort()
    while len(real) > 1:
        # neighbours make the highest Q that real poles can have
        groups.append((complex(real.pop(0)), complex(real.pop(0))))
    groups.sort(key=lambda pair: (abs(pair[0] + pair[1]) / np.sqrt(abs(pair[0] * pair[1])),
                                  abs(pair[0])))  # fmt: skip
    return groups + [(complex(value),) for value in real]


def _assign_zeros(
    groups: list[tuple[complex, ...]], zeros: ComplexArray
) -> list[tuple[complex, ...]]:
    upper, real = _split(zeros)
    taken: list[list[complex]] = [[] for _ in groups]
    for k, poles in enumerate(groups):
        if upper and len(poles) == 2:
            near = min(upper, key=lambda z, p=poles[0]: abs(z - p))  # type: ignore[misc]
            upper.remove(near)
            taken[k] = [near, near.conjugate()]
    for fill in (1, 2):
        seconds = [k for k, poles in enumerate(groups) if len(poles) == 2 and len(taken[k]) < fill]
        firsts = [k for k, poles in enumerate(groups) if len(poles) == 1 and not taken[k]]
        for k in (*seconds, *firsts):
            if real:
                near_real = min(real, key=lambda z, p=groups[k][0]: abs(z - p))  # type: ignore[misc]
                real.remove(near_real)
                taken[k].append(complex(near_real))
    return [tuple(entry) for entry in taken]


def _make_section(poles: tuple[complex, ...], zeros: tuple[complex, ...]) -> tuple[Section, float]:
    """Return a section with a largest coefficient of 1, and what that took out of the gain."""
    w0 = float(np.sqrt(abs(np.prod(poles)))) if len(poles) == 2 else abs(poles[0])
    q = None if len(poles) == 1 else w0 / abs(poles[0] + poles[1])
    scaled = np.real(np.poly(np.asarray(zeros) / w0)) if zeros else np.ones(1)
    top = np.zeros(3)
    top[3 - len(scaled):] = scaled  # fmt: skip
    largest = float(np.max(np.abs(top)))
    # (s - z1)...(s - zm) is w0**m of that, and the denominator w0**n
    power = len(poles) - len(zeros)
    k2, k1, k0 = (float(k) for k in top / largest)
    return Section(w0 / (2 * np.pi), q, k2, k1, k0), largest / w0**power


def find_peak_gain(sections: Sequence[Section]) -> float:
    """Find the largest gain of a cascade over all frequencies.

    Parameters
    ----------
    sections : sequence of Section
        The factors.

    Returns
    -------
    float
        Largest magnitude, DC and infinity included [-].

    Examples
    --------
    >>> round(find_peak_gain([Section(1e6, 1.0, k0=1.0)]), 5)
    1.1547
    """
    listed = list(sections)
    ends = np.abs(cascade_response(listed, np.array([0.0, np.inf])))
    inside = refine_peak(lambda f: np.abs(cascade_response(listed, f)), spread_frequencies(listed))
    return max(inside, float(ends.max()))


def refine_peak(size: Callable[[FloatArray], FloatArray], frequency: FloatArray) -> float:
    """Find the largest of a magnitude, from samples that show all its peaks.

    Parameters
    ----------
    size : callable
        Magnitudes at frequencies of any shape [Hz].
    frequency : ndarray of float, shape (n,)
        Ascending [Hz]; between two of them there is at most one peak.

    Returns
    -------
    float
        The largest magnitude; every peak within 2 % of the largest sample is followed up.

    Examples
    --------
    >>> round(refine_peak(lambda f: 1 / (1 + (f - 1.234) ** 2), np.linspace(0.5, 2.0, 9)), 7)
    1.0
    """
    sampled = size(frequency)
    padded = np.pad(sampled, 1, constant_values=-np.inf)
    tops = (sampled >= padded[:-2]) & (sampled >= padded[2:]) & (sampled > 0.98 * sampled.max())
    k = np.flatnonzero(tops)
    if not k.size:
        return float(sampled.max())
    low = frequency[np.maximum(k - 1, 0)]
    high = frequency[np.minimum(k + 1, frequency.size - 1)]
    row, share = np.arange(k.size), np.linspace(0.0, 1.0, 9)
    best = sampled.max()
    for _ in range(_ZOOMS):
        f = low[:, None] * (high / low)[:, None] ** share
        found = size(f)
        best = max(best, found.max())
        top = np.argmax(found, axis=1)
        low, high = f[row, np.maximum(top - 1, 0)], f[row, np.minimum(top + 1, 8)]
    return float(best)


def level_sections(sections: Sequence[Section]) -> tuple[Section, ...]:
    """Share the gain among sections so that every output has the same peak.

    Parameters
    ----------
    sections : sequence of Section
        In the order of the cascade.

    Returns
    -------
    tuple of Section
        The same sections with other gains; the product is unchanged.

    Examples
    --------
    >>> two = level_sections([Section(1e6, 2.0, k0=1.0), Section(1e6, k0=1.0)])
    >>> peaks = [find_peak_gain(two[:1]), find_peak_gain(two)]
    >>> abs(peaks[0] / peaks[1] - 1) < 1e-9
    True
    """
    target = find_peak_gain(sections)
    levelled: list[Section] = []
    passed = 1.0
    for k, section in enumerate(sections[:-1], start=1):
        share = target / (find_peak_gain(sections[:k]) * passed)
        levelled.append(section.scaled(share))
        passed *= share
    return (*levelled, sections[-1].scaled(1.0 / passed))


def find_alpha(section: Section, before: Sequence[Section]) -> float:
    """Find the factor of a two-integrator loop that gives both its nodes the same peak.

    Parameters
    ----------
    section : Section
        Of second order.
    before : sequence of Section
        What precedes it in the cascade.

    Returns
    -------
    float
        alpha of ``G12 = alpha w0 CB`` [-]; 1 where the inner node carries nothing.

    Examples
    --------
    >>> round(find_alpha(Section(1e6, 1.0, k0=1.0), []), 4)
    1.2712
    """
    return _find_alpha(section, tuple(before))


@lru_cache(maxsize=256)
def _find_alpha(section: Section, before: tuple[Section, ...]) -> float:
    peak = refine_peak(
        lambda f: np.abs(cascade_response(before, f) * section.inner_response(f)),
        spread_frequencies([*before, section]),
    )
    return peak / find_peak_gain([*before, section]) if peak > 0 else 1.0
