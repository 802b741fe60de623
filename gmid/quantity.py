"""Numbers with units as people write them: ``"0.5 um"`` <-> ``5e-07``.

The only place that knows prefixes.  The unit is always known from the key or option the
text belongs to, so that ``1m`` can be refused as a length and ``300 K`` never becomes 300
kilo.  A prefix is applied by writing the exponent into the digits, ``float("10e-15")``, so
that ``10 fF`` is the double nearest to 1e-14 and not ``10 * 1e-15``.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

from gmid.errors import DataFault

PREFIXES = {
    "T": 12,
    "G": 9,
    "M": 6,
    "k": 3,
    "": 0,
    "m": -3,
    "u": -6,
    "n": -9,
    "p": -12,
    "f": -15,
    "a": -18,
}
"""SI prefixes as powers of ten; micro is written ``u``, both Unicode signs are read."""

_EXPONENTS = {power: prefix for prefix, power in PREFIXES.items()}

UNIT_WORDS = {
    "m": ("m",),
    "V": ("V",),
    "A": ("A",),
    "S": ("S", "A/V", "1/ohm"),
    "F": ("F",),
    "Hz": ("Hz",),
    "ohm": ("ohm", "Ohm", "ohms", "\N{GREEK CAPITAL LETTER OMEGA}"),
    "W": ("W",),
    "s": ("s",),
    "1/V": ("1/V", "/V", "S/A"),
    "A/m": ("A/m",),
    "V/s": ("V/s",),
    "deg": ("deg", "\N{DEGREE SIGN}"),
    "degC": ("C", "degC", "\N{DEGREE SIGN}C"),
    "dB": ("dB",),
    "%": ("%",),
    "A^2/Hz": ("A^2/Hz", "A2/Hz", "A²/Hz"),
    "A/rtHz": ("A/rtHz", "A/sqrt(Hz)", "A/√Hz"),
    "V/rtHz": ("V/rtHz", "V/sqrt(Hz)", "V/√Hz"),
    "V m": ("V m", "V*m", "Vm"),
    "% m": (),
    "m^2": ("m^2", "m2", "m²"),
    "F/m^2": ("F/m^2", "F/m2", "F/m²"),
    "F/ohm": ("F/ohm",),
    "": ("",),
}
"""Spellings read for each unit; the key is the unit's own name in this package.

A ``% m`` is a ratio times a length, in SI a metre; it is only read with its parts spelled.
"""

COMPOUNDS = {
    "A/m": ("A", "/", "m"),
    "V/s": ("V", "/", "s"),
    "F/m^2": ("F", "/", "m^2"),
    "F/ohm": ("F", "/", "ohm"),
    "V m": ("V", " ", "m"),
    "% m": ("%", " ", "m"),
}
"""Units read from two parts with a prefix each, such as ``V/us``, ``fF/um2`` or ``% um``."""

_CUSTOMARY = {
    "V/s": ("V/us", 6),
    "F/m^2": ("fF/um^2", -3),
    "F/ohm": ("fF/Mohm", -21),
    "V m": ("mV um", -9),
    "% m": ("% um", -8),
}
"""How the trade writes compound units, and the power of ten that stands for."""

MOST_VALUES = 1_000_000
"""How many values a range may mean."""

_SQUARED = ("m^2", "A^2/Hz")
_NUMBER = re.compile(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,6})?)\s*(.*?)\s*$", re.DOTALL)
_LENGTHS = ("m", "V m", "% m", "m^2", "A/m", "F/m^2")


def parse_quantity(text: str | float, unit: str, *, where: str | None = None) -> float:
    """Read one number with a unit into SI.

    Parameters
    ----------
    text : str or float
        ``"0.5 um"``, ``"0.5u"`` (prefix alone), ``"5e-7"`` or a number, which is SI already.
        A bare ``1m`` is refused as a length, where it could be a metre or a millimetre, and
        a prefix alone as anything that holds a length.  Compound units carry a prefix on
        each part.
    unit : str
        The unit the text must be in, a key of `UNIT_WORDS`.
    where : str, optional
        Place for error messages.

    Returns
    -------
    float
        The value in SI; temperatures in degrees Celsius, percentages as ratios.

    Raises
    ------
    DataFault
        If the text is no number, or carries another unit or an unknown prefix.

    Examples
    --------
    >>> parse_quantity("0.5 um", "m"), parse_quantity("10 fF", "F"), parse_quantity("10 %", "%")
    (5e-07, 1e-14, 0.1)
    >>> parse_quantity("300 K", "degC")
    26.85
    >>> parse_quantity("20 V/us", "V/s"), parse_quantity("3.5 mV um", "V m")
    (20000000.0, 3.5e-09)
    """
    if isinstance(text, bool):
        raise _fault(f"expected a number in {_spoken(unit)}, found {str(text).lower()}.", where)
    if isinstance(text, (int, float)):
        return _finite(_as_float(text), str(text)[:40], where)
    match = _NUMBER.match(text)
    if match is None:
        raise _fault(f"expected a number in {_spoken(unit)}, found {text!r}.", where, unit)
    digits, tail = match.groups()
    if unit == "degC" and tail == "K":
        return _finite(round(float(digits) - 273.15, 9), text, where)
    if unit == "%":
        return _finite(
            _scaled(digits, -2 if tail == "%" else _power(tail, unit, text, where)), text, where
        )
    return _finite(_scaled(digits, _power(tail, unit, text, where)), text, where)


def parse_quantities(text: str, unit: str, *, where: str | None = None) -> list[float]:
    """Read values as an option takes them: one, a list ``a,b,c`` or a range, or a mixture.

    Parameters
    ----------
    text : str
        Such as ``"0.6"``, ``"180n,0.5u,1u"`` or ``"0:1.8:0.1"``, which is
        ``start:stop:step`` with both ends in; each number is read by `parse_quantity`.
    unit : str
        The unit the numbers must be in, a key of `UNIT_WORDS`.
    where : str, optional
        Place for error messages.

    Returns
    -------
    list of float
        In SI, in the order written; a range gives the doubles nearest to its decimal numbers.

    Raises
    ------
    DataFault
        If a number is wrong, or a range does not reach its end in whole steps.

    Examples
    --------
    >>> parse_quantities("0.1:0.4:0.1", "V"), parse_quantities("0.18u,500n", "m")
    ([0.1, 0.2, 0.3, 0.4], [1.8e-07, 5e-07])
    >>> parse_quantities("0:1:0.3", "V", where="--vds")
    Traceback (most recent call last):
    ...
    gmid.errors.DataFault: --vds: '0:1:0.3' does not reach 1 in whole steps of 0.3. \
Choose start:stop:step so that the last step ends on stop.
    """
    values: list[float] = []
    for part in text.split(","):
        ends = part.split(":")
        if len(ends) == 1:
            values.append(parse_quantity(part, unit, where=where))
        else:
            values += _expand_range(part, ends, unit, where)
    return values


def _expand_range(text: str, ends: list[str], unit: str, where: str | None) -> list[float]:
    """Count from start to stop in decimal arithmetic, so that 0.3 is the double 0.3."""
    from decimal import Decimal

    if len(ends) != 3:
        raise _fault(f"{text.strip()!r} is not a range.", where, hint="Write start:stop:step.")
    start, stop, step = (
        Decimal(repr(parse_quantity(end, unit, where=where)))  # as written, not as stored
        for end in ends
    )
    steps = (stop - start) / step if step else Decimal(-1)
    if steps < 0 or steps != steps.to_integral_value():
        raise _fault(
            f"{text.strip()!r} does not reach {ends[1].strip()} in whole steps of "
            f"{ends[2].strip()}.",
            where,
            hint="Choose start:stop:step so that the last step ends on stop.",
        )
    if steps >= MOST_VALUES:
        raise _fault(
            f"{text.strip()!r} means {int(steps) + 1} values, more than {MOST_VALUES}.",
            where,
            hint="Take a wider step.",
        )
    return [float(start + index * step) for index in range(int(steps) + 1)]


def unit_power(spelling: str, unit: str) -> int | None:
    """Tell the power of ten between a spelled unit and the SI unit it stands for.

    Parameters
    ----------
    spelling : str
        Such as ``"uA"``, ``"um"`` or ``"mS"``.
    unit : str
        A key of `UNIT_WORDS`.

    Returns
    -------
    int or None
        The exponent, or None when the spelling is not that unit with a prefix.

    Examples
    --------
    >>> unit_power("uA", "A"), unit_power("uA", "V"), unit_power("fF/um2", "F/m^2")
    (-6, None, -3)
    """
    word = _plain_micro(spelling.strip())
    for plain in UNIT_WORDS[unit]:
        if word == plain:
            return 0
        if plain and word.endswith(plain) and word[: -len(plain)] in PREFIXES:
            power = PREFIXES[word[: -len(plain)]]
            return 2 * power if unit in _SQUARED else power
    return _compound_power(word, unit)


def format_quantity(value: float, unit: str, *, digits: int = 4) -> str:
    """Write a value with the prefix that keeps it between 1 and 1000.

    Parameters
    ----------
    value : float
        In SI [unit].
    unit : str
        Unit name; no prefix is used for dB, %, deg, degC and 1/V, and compound units are
        written as the trade does, such as ``V/us`` or ``mV um``.
    digits : int
        Significant digits.

    Returns
    -------
    str
        Text that `parse_quantity` reads back to the printed digits.

    Examples
    --------
    >>> format_quantity(1.234567e-5, "A"), format_quantity(62.5, "dB")
    ('12.35 uA', '62.5 dB')
    >>> format_quantity(3.5e-9, "V m")
    '3.5 mV um'
    """
    if unit == "%":
        return f"{value * 100:.{digits}g} %"
    if unit == "degC":
        return f"{value:.{digits}g} C"
    if unit in _CUSTOMARY:
        word, power = _CUSTOMARY[unit]
        return f"{_scaled(f'{value:.{digits}g}', -power):.{digits}g} {word}"
    if unit in ("dB", "deg", "1/V", "A^2/Hz", "m^2", "") or value == 0 or value != value:
        return f"{value:.{digits}g} {unit}".rstrip()
    rounded = float(f"{value:.{digits}g}")
    powers = [p for p in sorted(_EXPONENTS, reverse=True) if p or unit != "m"]  # never "1 m"
    power = next((p for p in powers if abs(rounded) >= 10.0**p), -18)
    scaled = float(f"{value:.{digits + 3}g}") / 10.0**power
    text = f"{scaled:.{digits}g}"
    if "e+" in text:
        text = f"{float(text):.0f}"
    return f"{text} {_EXPONENTS[power]}{unit}"


def choose_prefix(values: Iterable[float | None]) -> tuple[str, int]:
    """Choose one prefix for a column or an axis: the middle value comes between 1 and 1000.

    Parameters
    ----------
    values : iterable of float or None
        In SI; zeros, gaps and what is not finite have no say.

    Returns
    -------
    tuple of str and int
        Prefix and the power of ten it stands for.

    Examples
    --------
    >>> choose_prefix([0.0, 2e-6, 3e-6]), choose_prefix([])
    (('u', -6), ('', 0))
    """
    sizes = sorted(abs(value) for value in values if value and value - value == 0)
    middle = float(f"{sizes[len(sizes) // 2]:.9e}") if sizes else 1.0
    power = next((p for p in sorted(_EXPONENTS, reverse=True) if middle >= 10.0**p), -18)
    return _EXPONENTS[power], power


def _scaled(digits: str, power: int) -> float:
    """Move the decimal point of written digits by `power` places, exactly."""
    mantissa, _, exponent = digits.lower().partition("e")
    return float(f"{mantissa}e{int(exponent or 0) + power}")


def _plain_micro(word: str) -> str:
    return word.replace("\N{MICRO SIGN}", "u").replace("\N{GREEK SMALL LETTER MU}", "u")


def _compound_power(word: str, unit: str) -> int | None:
    """Add the powers of the two parts of a compound unit; None when they do not fit."""
    if unit not in COMPOUNDS:
        return None
    first, sign, second = COMPOUNDS[unit]
    parts = re.split(r"\s*/\s*" if sign == "/" else r"\s*[*·]\s*|\s+|(?<=%)(?=\w)", word)
    if len(parts) != 2:
        return None
    upper = (-2 if parts[0] == "%" else None) if first == "%" else unit_power(parts[0], first)
    lower = unit_power(parts[1], second)
    if upper is None or lower is None:
        return None
    return upper - lower if sign == "/" else upper + lower


def _power(tail: str, unit: str, text: str, where: str | None) -> int:
    """Read what follows the digits: unit with prefix, or prefix alone."""
    if tail == "":
        return 0
    word = _plain_micro(tail)
    if word == "m" and unit == "m":
        raise _fault(
            f"{text.strip()!r} could be metres or millimetres.",
            where,
            hint="Write the length in um or nm, or in metres as 1e-6.",
        )
    power = unit_power(word, unit)
    if power is not None:
        return power
    if word in PREFIXES and unit not in ("dB", "deg", "degC", "%", *_LENGTHS[1:]):
        return PREFIXES[word]
    raise _fault(f"expected a number in {_spoken(unit)}, found {text.strip()!r}.", where, unit)


def _as_float(number: float) -> float:
    try:
        return float(number)
    except OverflowError:
        return float("inf")


def _finite(value: float, text: str, where: str | None) -> float:
    if value - value != 0:
        raise _fault(f"expected a finite number, found {text.strip()!r}.", where)
    return value


def _spoken(unit: str) -> str:
    return {"": "no unit (a plain ratio)", "degC": "C (or K)", "%": "% (or a ratio)"}.get(
        unit, unit
    )


_SAMPLES = {
    "m": "0.5 um", "V": "0.6 V", "A": "10 uA", "S": "1 mS", "F": "1 pF", "Hz": "20 MHz",
    "ohm": "100 kohm", "degC": "27 C", "%": "10 %", "dB": "60 dB", "1/V": "15 1/V",
    "V/s": "20 V/us", "deg": "60 deg", "s": "10 us", "W": "1 mW", "A/m": "2 uA/um",
    "V/rtHz": "40 nV/rtHz", "A/rtHz": "1 pA/rtHz", "m^2": "1 um^2", "V m": "3.5 mV um",
    "% m": "1 % um", "F/m^2": "1 fF/um2", "F/ohm": "20 fF/Mohm",
}  # fmt: skip


def _fault(
    message: str, where: str | None, unit: str | None = None, *, hint: str | None = None
) -> DataFault:
    if hint is None and unit in _SAMPLES:
        hint = f"Write it as in {_SAMPLES[unit]!r}."
    return DataFault(message, where=where, hint=hint)
