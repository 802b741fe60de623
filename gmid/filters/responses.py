"""Zeros, poles and gain of the wanted response, its order from the mask, and its stop edge."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import DataFault
from gmid.filters.spec import FilterSpec
from gmid.filters.spec_checks import LARGEST_ORDER, name_key
from gmid.network.pencil import ComplexArray, FloatArray

_ROUNDING = 1e-9


@dataclass(frozen=True, eq=False)
class RationalResponse:
    """A response as zeros, poles and gain.

    Parameters
    ----------
    zeros, poles : ndarray of complex
        [rad/s].
    gain : float
        Factor of the highest powers.
    order : int
        Of the lowpass prototype; the number of poles where there is none.

    Examples
    --------
    >>> one = RationalResponse(np.array([]), np.array([-1.0 + 0j]), 1.0, 1)
    >>> abs(one([0.0])).tolist()
    [1.0]
    """

    zeros: ComplexArray
    poles: ComplexArray
    gain: float
    order: int

    def __call__(self, frequency: ArrayLike) -> ComplexArray:
        """Evaluate at frequencies of any shape [Hz]; infinity is allowed."""
        f = np.asarray(frequency, dtype=np.float64)
        far = np.isinf(f)
        s = 2j * np.pi * np.where(far, 1.0, f)[..., None]
        paired = self.zeros.size
        ratio = np.prod((s - self.zeros) / (s - self.poles[:paired]), axis=-1)
        rest = np.prod(1.0 / (s - self.poles[paired:]), axis=-1)
        limit = self.gain if paired == self.poles.size else 0.0
        return np.where(far, limit, self.gain * ratio * rest).astype(np.complex128)

    def attenuation_db(self, frequency: ArrayLike) -> FloatArray:
        """Return the attenuation, not counted from the largest gain but from 1.

        Parameters
        ----------
        frequency : array_like of float, shape (...)
            [Hz].

        Returns
        -------
        ndarray of float, shape (...)
            [dB]; infinite at a zero.

        Examples
        --------
        >>> one = RationalResponse(np.array([]), np.array([-1.0 + 0j]), 1.0, 1)
        >>> one.attenuation_db(1 / (2 * np.pi)).round(4).tolist()
        3.0103
        """
        size = np.abs(self(frequency))
        with np.errstate(divide="ignore"):
            return np.asarray(-20 * np.log10(size), dtype=np.float64)


def find_response(spec: FilterSpec) -> RationalResponse:
    """Find the response that a specification asks for.

    Parameters
    ----------
    spec : FilterSpec
        The specification.

    Returns
    -------
    RationalResponse
        With the gain that is asked for.

    Raises
    ------
    DataFault
        If the mask cannot be met, by the given order or any, or the gain is asked for where the
        response is zero; `where` is the key.

    Examples
    --------
    >>> spec = FilterSpec(response="butterworth", edge=1e6, stop_edge=2e6, attenuation_db=30.0)
    >>> find_response(spec).order
    5
    """
    if spec.response == "sections":
        found = _from_given(spec)
    elif spec.order is None:
        found = _search_order(spec)
    else:
        found = _design(spec, spec.order)
        if spec.stop_edge is not None and not _meets(spec, found):
            raise _weak_order(spec, spec.order)
    return _set_gain(spec, found)


def find_stop_edge(spec: FilterSpec, order: int) -> float:
    """Return where the stopband of a response with ripples begins, over the edge.

    Parameters
    ----------
    spec : FilterSpec
        Inverse Chebyshev or elliptic.
    order : int
        Of the lowpass prototype.

    Returns
    -------
    float
        Ratio of the lowpass prototype, above 1 [-].

    References
    ----------
    S. Darlington, "Simple algorithms for elliptic filters and generalizations thereof", IEEE
    Trans. Circuits Syst. 25, 1978 (from memory): the degree equation.

    Examples
    --------
    >>> spec = FilterSpec(response="elliptic", order=3, edge=1.0, ripple_db=0.5,
    ...                   attenuation_db=21.92)
    >>> round(find_stop_edge(spec, 3), 3)
    1.5
    """
    assert spec.ripple_db is not None
    assert spec.attenuation_db is not None
    selectivity = math.sqrt(_excess(spec.attenuation_db) / _excess(spec.ripple_db))
    if spec.response == "inverse-chebyshev":
        return math.cosh(math.acosh(selectivity) / order)
    from scipy.optimize import brentq
    from scipy.special import ellipk, ellipkm1

    k1 = 1.0 / selectivity
    wanted = order * float(ellipk(k1**2) / ellipkm1(k1**2))

    # over the complementary parameter, so that a steep filter loses no digits
    def degree(log_rest: float) -> float:
        rest = math.exp(log_rest)
        return math.log(float(ellipkm1(rest) / ellipk(rest)) / wanted)

    rest = math.exp(float(brentq(degree, -600.0, -1e-12, xtol=1e-13)))
    return 1.0 / math.sqrt(1.0 - rest)


def _excess(decibels: float) -> float:
    return math.expm1(decibels * math.log(10) / 10)


def _design(spec: FilterSpec, order: int) -> RationalResponse:
    from scipy import signal

    edge = 2 * np.pi * np.asarray(spec.edge, dtype=np.float64)
    ripple, attenuation = spec.ripple_db, spec.attenuation_db
    makers: dict[str, tuple[Any, tuple[float | None, ...]]] = {
        "butterworth": (signal.butter, ()),
        "bessel": (partial(signal.bessel, norm="mag"), ()),
        "chebyshev": (signal.cheby1, (ripple,)),
        "inverse-chebyshev": (signal.cheby2, (attenuation,)),
        "elliptic": (signal.ellip, (ripple, attenuation)),
    }
    maker, given = makers[spec.response]
    if spec.response == "inverse-chebyshev":
        edge = _widen(spec.kind, edge, find_stop_edge(spec, order))
    zpk = maker(order, *given, edge, btype=spec.kind, analog=True, output="zpk")
    zeros, poles, gain = zpk
    return RationalResponse(
        np.asarray(zeros, dtype=np.complex128), np.asarray(poles, dtype=np.complex128),
        float(np.real(gain)), order,
    )  # fmt: skip


def _widen(kind: str, edge: FloatArray, ratio: float) -> FloatArray:
    """Move an edge outward by a ratio of the lowpass prototype."""
    if kind == "lowpass":
        return edge * ratio
    if kind == "highpass":
        return edge / ratio
    width, centre = (edge[1] - edge[0]) * ratio, math.sqrt(edge[0] * edge[1])
    middle = math.hypot(width / 2, centre)
    return np.array([centre**2 / (middle + width / 2), middle + width / 2])


def _meets(spec: FilterSpec, found: RationalResponse) -> bool:
    """Tell whether the stopband of the mask is met."""
    assert spec.attenuation_db is not None
    if spec.response in ("inverse-chebyshev", "elliptic"):
        own = _widen(spec.kind, np.asarray(spec.edge), find_stop_edge(spec, found.order))
        return bool(_selectivity(spec, own) <= _selectivity(spec, spec.stop_edge) * (1 + _ROUNDING))
    assert spec.stop_edge is not None
    reached = found.attenuation_db(np.asarray(spec.stop_edge))
    return bool(np.min(reached) >= spec.attenuation_db - _ROUNDING)


def _selectivity(spec: FilterSpec, frequency: ArrayLike | None) -> float:
    """Return a stop edge over the edge, both as the lowpass prototype sees them."""
    edge = np.asarray(spec.edge, dtype=np.float64)
    stop = np.asarray(frequency, dtype=np.float64)
    if spec.kind == "lowpass":
        return float(stop / edge)
    if spec.kind == "highpass":
        return float(edge / stop)
    return float(np.min(np.abs(stop**2 - edge[0] * edge[1]) / (stop * (edge[1] - edge[0]))))


def _search_order(spec: FilterSpec) -> RationalResponse:
    for order in range(2 if spec.response == "elliptic" else 1, LARGEST_ORDER + 1):
        found = _design(spec, order)
        if _meets(spec, found):
            return found
    raise DataFault(
        f"no {spec.response} response up to order {LARGEST_ORDER} has {spec.attenuation_db:g} dB "
        f"at the stop_edge {spec.stop_edge} Hz.", where=name_key("stop_edge"),
        hint="Move it away from the edge, ask for less attenuation, or take an elliptic response.",
    )  # fmt: skip


def _weak_order(spec: FilterSpec, order: int) -> DataFault:
    try:
        hint = f"Order {_search_order(spec.with_values(order=None)).order} does."
    except DataFault as fault:
        hint = fault.hint or ""
    return DataFault(
        f"a {spec.response} response of order {order} does not have {spec.attenuation_db:g} dB at "
        f"the stop_edge {spec.stop_edge} Hz.", where=name_key("order"), hint=hint,
    )  # fmt: skip


def _from_given(spec: FilterSpec) -> RationalResponse:
    if not spec.sections:
        top, bottom = np.trim_zeros(spec.numerator, "f"), np.asarray(spec.denominator)
        zeros, poles = np.roots(top), np.roots(bottom)
        gain = float(top[0] / bottom[0])
    else:
        zeros = np.concatenate([section.zeros for section in spec.sections])
        poles = np.concatenate([section.poles for section in spec.sections])
        gain = 1.0
        for section in spec.sections:
            leading = np.trim_zeros(section.numerator, "f")
            gain *= float(leading[0]) * section.w0 ** (section.order + 1 - len(leading))
    if np.any(poles.real >= 0):
        raise DataFault(
            f"the denominator has a pole at {poles[np.argmax(poles.real)]:.4g} rad/s: not stable.",
            where=name_key("denominator"),
        )  # fmt: skip
    return RationalResponse(
        zeros.astype(np.complex128), poles.astype(np.complex128), gain, len(poles)
    )


def _set_gain(spec: FilterSpec, found: RationalResponse) -> RationalResponse:
    if spec.gain_db is None:
        return found
    if spec.edge is None and spec.kind == "bandpass":
        raise DataFault("the centre of these sections is not known.", where=name_key("edge"),
                        hint="Give edge, or leave gain out.")  # fmt: skip
    place = {"lowpass": 0.0, "highpass": math.inf}.get(spec.kind)
    now = found(spec.reference_frequency if place is None else place)
    if abs(now) < 1e-12 * np.abs(found(np.abs(found.poles) / (2 * np.pi))).max():
        raise DataFault(
            f"the response is zero where the gain of a {spec.kind} is meant.",
            where=name_key("gain_db"), hint="Correct kind, or leave gain out.",
        )  # fmt: skip
    factor = 10 ** (spec.gain_db / 20) / abs(now)
    return RationalResponse(found.zeros, found.poles, float(found.gain * factor), found.order)
