"""What can be wrong with a specification; every fault names its key."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from gmid.errors import DataFault, GmidError, UnknownName, advise

if TYPE_CHECKING:
    from gmid.filters.spec import FilterSpec, Tolerance

RESPONSES = ("butterworth", "chebyshev", "inverse-chebyshev", "elliptic", "bessel", "sections")
KINDS = ("lowpass", "highpass", "bandpass")
STYLES = ("active-rc", "gm-c")
COUNTS = ("all", "shape", "tuned-shape")
LARGEST_ORDER = 20
"""Of the lowpass prototype; also where the search from a mask ends."""

_WORDS = {
    "response": RESPONSES, "kind": KINDS, "style": STYLES, "correct_elements": ("none", "nominal"),
}  # fmt: skip
_NEEDED = {
    "chebyshev": ("ripple_db",),
    "inverse-chebyshev": ("ripple_db", "stop_edge", "attenuation_db"),
    "elliptic": ("ripple_db", "attenuation_db"),
}
_POSITIVE = (
    "swing", "snr_db", "distortion_at", "capacitor", "largest_resistor", "load_resistance",
    "ripple_db", "attenuation_db",
)  # fmt: skip
_NOT_NEGATIVE = ("smallest_capacitor", "source_resistance", "load_capacitance")
_KEYS = {
    "ripple_db": "ripple", "attenuation_db": "attenuation", "gain_db": "gain", "snr_db": "snr",
    "distortion_db": "distortion", "passband_db": "passband", "stopband_db": "stopband",
}  # fmt: skip


def name_key(field: str, *, table: str = "filter") -> str:
    """Return the key of the request file that belongs to a field.

    Parameters
    ----------
    field : str
        Name of the field of a specification.
    table : str
        Table of the request.

    Returns
    -------
    str
        Such as ``filter.ripple``.

    Examples
    --------
    >>> name_key("ripple_db")
    'filter.ripple'
    """
    return f"{table}.{_KEYS.get(field, field)}"


def _fault(field: str, message: str, hint: str | None = None) -> DataFault:
    return DataFault(message, where=name_key(field), hint=hint)


def find_spec_faults(spec: FilterSpec) -> list[GmidError]:
    """Collect all that is wrong with a specification.

    Parameters
    ----------
    spec : FilterSpec
        The specification.

    Returns
    -------
    list of GmidError
        Empty if nothing is.

    Examples
    --------
    >>> from gmid.filters import FilterSpec
    >>> find_spec_faults(FilterSpec(response="bessel", order=3, edge=1e6))
    []
    """
    faults: list[GmidError] = []
    for field, known in _WORDS.items():
        word = getattr(spec, field)
        if word not in known:
            faults.append(UnknownName(
                f"{word!r} is not a known {field}.", where=name_key(field),
                hint=advise(str(word), known),
            ))  # fmt: skip
    if faults:
        return faults
    finders = (
        _check_numbers,
        _check_family,
        _check_order,
        _check_edges,
        _check_given,
        _check_noise,
    )
    for finder in finders:
        faults.extend(finder(spec))
    return faults


def _check_numbers(spec: FilterSpec) -> Iterator[GmidError]:
    for field in _POSITIVE:
        value = getattr(spec, field)
        if value is not None and not value > 0:
            yield _fault(field, f"{_KEYS.get(field, field)} is positive, found {value:g}.")
    for field in _NOT_NEGATIVE:
        value = getattr(spec, field)
        if not 0 <= value < math.inf:
            yield _fault(field, f"{field} is not negative, found {value:g}.")
    if spec.distortion_db is not None and not spec.distortion_db < 0:
        yield _fault("distortion_db", "distortion lies below the fundamental: a negative number "
                     f"of dB, found {spec.distortion_db:g} dB.")  # fmt: skip
    if spec.gain_db is not None and not math.isfinite(spec.gain_db):
        yield _fault("gain_db", f"gain is a finite number of dB, found {spec.gain_db:g}.")
    if spec.capacitor is not None and spec.capacitor < spec.smallest_capacitor:
        yield _fault(
            "capacitor", f"capacitor = {spec.capacitor:g} F lies below smallest_capacitor = "
            f"{spec.smallest_capacitor:g} F.", "Change one of them.")  # fmt: skip


def _check_family(spec: FilterSpec) -> Iterator[GmidError]:
    for field in _NEEDED.get(spec.response, ()):
        if getattr(spec, field) is None:
            yield _fault(field, f"{spec.response} needs {_KEYS.get(field, field)}.")
    if spec.response in ("butterworth", "bessel") and spec.ripple_db is not None:
        yield _fault(
            "ripple_db", f"a {spec.response} response has no ripple; its edge is the 3.0103 dB "
            "point.", "Remove ripple, or choose chebyshev.")  # fmt: skip
    ripple, attenuation = spec.ripple_db, spec.attenuation_db
    if ripple is not None and attenuation is not None and 0 < attenuation <= ripple:
        yield _fault(
            "ripple_db", f"a ripple of {ripple:g} dB is not below the attenuation of "
            f"{attenuation:g} dB.", "Ask for less ripple or more attenuation.")  # fmt: skip
    if ripple is not None and ripple > 20:
        yield _fault("ripple_db", f"a ripple of {ripple:g} dB leaves no passband.",
                     "Ask for less than 20 dB.")  # fmt: skip


def _check_order(spec: FilterSpec) -> Iterator[GmidError]:
    order = spec.order
    if spec.response == "sections":
        if order is not None:
            yield _fault("order", "given sections have the order that they have.", "Remove order.")
        return
    if order is not None:
        whole = isinstance(order, int) and not isinstance(order, bool)
        if not whole or not 1 <= order <= LARGEST_ORDER:
            yield _fault("order", f"order is a whole number from 1 to {LARGEST_ORDER}, "
                         f"found {order!r}.")  # fmt: skip
        elif spec.response == "elliptic" and order == 1:
            yield _fault("order", "an elliptic response of order 1 has no stopband.",
                         "Ask for order 2 or more.")  # fmt: skip
        return
    for field in ("stop_edge", "attenuation_db"):
        if getattr(spec, field) is None and field not in _NEEDED.get(spec.response, ()):
            yield _fault(field, f"an order from the mask needs {_KEYS.get(field, field)}.",
                         "Give it, or an order.")  # fmt: skip


def _check_edges(spec: FilterSpec) -> Iterator[GmidError]:
    sane = True
    for field in ("edge", "stop_edge"):
        value = getattr(spec, field)
        if value is None:
            if field == "edge" and spec.response != "sections":
                yield _fault("edge", f"a {spec.kind} needs an edge.")
            sane = False
            continue
        faults = list(_check_edge(spec.kind, field, value))
        sane = sane and not faults
        yield from faults
    if sane:
        yield from _check_stop(spec)
    elif spec.stop_edge is not None and spec.attenuation_db is None:
        yield _fault("attenuation_db", "a stop_edge needs an attenuation.")


def _check_edge(kind: str, field: str, value: Any) -> Iterator[GmidError]:
    pair = isinstance(value, tuple)
    if pair != (kind == "bandpass"):
        need = "a pair of frequencies" if kind == "bandpass" else "one frequency"
        found = "a pair" if pair else "one"
        yield _fault(field, f"the {field} of a {kind} is {need}, found {found}.")
        return
    values: tuple[float, ...] = value if pair else (value,)
    if len(values) != (2 if pair else 1) or not all(0 < f < math.inf for f in values):
        yield _fault(field, f"{field} needs positive frequencies, found {value}.")
    elif pair and not values[0] < values[1]:
        yield _fault(field, f"the pair {field} rises, found {values[0]:g} and {values[1]:g} Hz.")


def _check_stop(spec: FilterSpec) -> Iterator[GmidError]:
    if spec.attenuation_db is None:
        yield _fault("attenuation_db", "a stop_edge needs an attenuation.")
    edge, stop = spec.edge, spec.stop_edge
    if spec.kind == "bandpass":
        assert isinstance(edge, tuple)
        assert isinstance(stop, tuple)
        good, word = stop[0] < edge[0] and edge[1] < stop[1], "on both sides of"
    else:
        assert isinstance(edge, float | int)
        assert isinstance(stop, float | int)
        good = stop > edge if spec.kind == "lowpass" else stop < edge
        word = "above" if spec.kind == "lowpass" else "below"
    if not good:
        yield _fault("stop_edge", f"the stop_edge of a {spec.kind} lies {word} its edge, "
                     f"found {stop} Hz with {edge} Hz.")  # fmt: skip


def _check_given(spec: FilterSpec) -> Iterator[GmidError]:
    given = spec.response == "sections"
    fields = [f for f in ("sections", "numerator", "denominator") if getattr(spec, f)]
    if not given:
        for field in fields:
            yield _fault(field, f"{field} contradicts response = {spec.response!r}.",
                         'Use response = "sections", or remove them.')  # fmt: skip
        return
    if spec.sections and len(fields) > 1:
        yield _fault("sections", "sections and coefficients are both given.", "Remove one of them.")
    elif not spec.sections and fields != ["numerator", "denominator"]:
        yield _fault("sections", "response = 'sections' needs sections, or numerator and "
                     "denominator.")  # fmt: skip
    elif fields == ["numerator", "denominator"]:
        if spec.denominator[0] == 0 or len(spec.denominator) < 2:
            yield _fault("denominator", "the denominator begins with the highest power of s and "
                         "has at least one pole.")  # fmt: skip
        elif len(spec.numerator) > len(spec.denominator) or not any(spec.numerator):
            yield _fault("numerator", "the numerator has no more powers than the denominator and "
                         "is not zero.")  # fmt: skip


def _check_noise(spec: FilterSpec) -> Iterator[GmidError]:
    band = spec.noise_band
    if band is not None and not (len(band) == 2 and 0 <= band[0] < band[1]):
        yield _fault("noise_band", f"noise_band is a rising pair of frequencies, found {band}.")
    if spec.snr_db is not None:
        for field in ("swing", "noise_band"):
            if getattr(spec, field) is None:
                yield _fault(field, f"an snr needs {field}.")


def find_tolerance_faults(tolerance: Tolerance) -> list[GmidError]:
    """Collect all that is wrong with a tolerance.

    Parameters
    ----------
    tolerance : Tolerance
        The tolerance.

    Returns
    -------
    list of GmidError
        Empty if nothing is.

    Examples
    --------
    >>> from gmid.filters import Tolerance
    >>> find_tolerance_faults(Tolerance(passband_db=0.2, counts="shape"))
    []
    """
    faults: list[GmidError] = []
    if tolerance.counts not in COUNTS:
        faults.append(UnknownName(
            f"{tolerance.counts!r} is not a known counts.", where="tolerance.counts",
            hint=advise(str(tolerance.counts), COUNTS),
        ))  # fmt: skip
    for field in ("passband_db", "stopband_db", "up_to", "delay"):
        value = getattr(tolerance, field)
        if value is not None and not 0 < value < math.inf:
            key = name_key(field, table="tolerance")
            name = key.removeprefix("tolerance.")
            faults.append(DataFault(f"{name} is positive, found {value:g}.", where=key))
    return faults
