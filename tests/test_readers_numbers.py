"""Number words: fixed cases worked out by hand, and round trips."""

from __future__ import annotations

import math
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gmid.errors import DataFault, UsageFault
from gmid.sweep.numbers import is_ambiguous, is_missing, is_number, parse_number

POWERS = {"t": 12, "g": 9, "meg": 6, "k": 3, "m": -3, "u": -6, "n": -9, "p": -12, "f": -15,
          "a": -18}  # fmt: skip


@pytest.mark.parametrize(
    ("word", "value"),
    [
        ("0", 0.0), ("-0.5", -0.5), ("5.", 5.0), (".5", 0.5), ("+1e3", 1000.0), ("1.E-21", 1e-21),
        ("1.2D-06", 1.2e-6), ("1.2d+3", 1200.0), ("1.23-105", 1.23e-105), ("-1.5+100", -1.5e100),
        ("10.3u", 1.03e-5), ("206.u", 2.06e-4), ("415.99f", 4.1599e-13), ("0.", 0.0),
        ("4.2e+04meg", 4.2e10), ("3mA", 3e-3), ("18fF", 1.8e-14), ("1.8V", 1.8), ("1mil", 2.54e-5),
        ("2x", 2e6), ("3M", 3e-3), ("3MEG", 3e6), ("1F", 1e-15), ("1A", 1e-18), ("5\u00b5", 5e-6),
        ("5\u03bcA", 5e-6), (" 7n ", 7e-9),
    ],
)  # fmt: skip
def test_spice_words(word: str, value: float) -> None:
    assert parse_number(word) == value


@pytest.mark.parametrize(
    ("word", "value"),
    [
        ("3M", 3e6), ("3m", 3e-3), ("1F", 1.0), ("1f", 1e-15), ("1A", 1.0), ("1a", 1e-18),
        ("3mA", 3e-3), ("18 fF", 1.8e-14), ("2.5mS", 2.5e-3), ("1MHz", 1e6), ("10ohm", 10.0),
        ("1meg", 1e6), ("1.23-105", 1.23e-105), ("180nm", 1.8e-7),
    ],
)  # fmt: skip
def test_si_words(word: str, value: float) -> None:
    assert parse_number(word, suffixes="si") == value


@pytest.mark.parametrize(
    "word", ["nan", "-nan", "NaN", "inf", "-Inf", "1.#IND", "-1.#QNAN", "failed", "N/A", "***",
             "**********", "--", "", "  "]
)  # fmt: skip
def test_missing_words(word: str) -> None:
    assert is_missing(word)
    assert not is_number(word)
    with pytest.raises(DataFault, match="missing"):
        parse_number(word)


@pytest.mark.parametrize(
    "word", ["abc", "1.2.3", "1,5", "1e", "1.2e-", "1.2E-06-3", "0x10", "1_000", "+-1", "-", ".",
             "1 2", "1..", "e5", "1.23-05", "3u2"]
)  # fmt: skip
def test_words_that_are_no_numbers(word: str) -> None:
    assert not is_number(word)
    with pytest.raises(DataFault, match="expected a number"):
        parse_number(word)


def test_too_large_and_unknown_units() -> None:
    with pytest.raises(DataFault, match="too large"):
        parse_number("1e400")
    assert not is_number("10K", suffixes="si")
    assert not is_number("3parsec", suffixes="si")
    with pytest.raises(UsageFault, match="'spice' or 'si'"):
        parse_number("1", suffixes="other")


def test_ambiguity() -> None:
    assert [is_ambiguous(word) for word in ("3M", "1F", "1A", "3u", "3", "1e-3", "***")] == [
        True, True, True, False, False, False, False,
    ]  # fmt: skip


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_round_trip_of_17_digits(value: float) -> None:
    for text in (f"{value:.16e}", repr(value), f"{value:.16E}".replace("E", "D")):
        found = parse_number(text)
        assert found == value
        assert math.copysign(1, found) == math.copysign(1, value)


@given(
    st.integers(-(10**9), 10**9), st.integers(-20, 20), st.sampled_from(sorted(POWERS)),
    st.booleans(), st.sampled_from(["", "V", "S", "Hz"]),
)  # fmt: skip
def test_suffixes_give_the_nearest_double(
    mantissa: int, exponent: int, suffix: str, upper: bool, unit: str
) -> None:
    word = f"{mantissa}e{exponent}{suffix.upper() if upper else suffix}{unit}"
    exact = Fraction(mantissa) * Fraction(10) ** (exponent + POWERS[suffix])
    assert parse_number(word) == float(exact)


@given(st.text(max_size=12))
def test_hostile_words_never_crash(word: str) -> None:
    for suffixes in ("spice", "si"):
        if is_number(word, suffixes=suffixes):
            assert math.isfinite(parse_number(word, suffixes=suffixes))
        else:
            with pytest.raises(DataFault):
                parse_number(word, suffixes=suffixes)
