from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gmid.errors import DataFault
from gmid.quantity import (
    PREFIXES,
    UNIT_WORDS,
    choose_prefix,
    format_quantity,
    parse_quantities,
    parse_quantity,
    unit_power,
)


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("10 fF", "F", 1e-14),  # 10 * 1e-15 would be another double
        ("10f", "F", 1e-14),
        ("0.3 um", "m", 3e-07),
        ("0.07u", "m", 7e-08),
        ("1.1e1 pF", "F", 1.1e-11),
        ("5e-7", "m", 5e-07),
        ("0.5 \N{MICRO SIGN}m", "m", 5e-07),
        ("0.5 \N{GREEK SMALL LETTER MU}m", "m", 5e-07),
        ("1 Mohm", "ohm", 1e6),
        ("1 k\N{GREEK CAPITAL LETTER OMEGA}", "ohm", 1e3),
        ("0 ohm", "ohm", 0.0),
        ("-60 dB", "dB", -60.0),
        ("60 deg", "deg", 60.0),
        ("10 %", "%", 0.1),
        ("0.1", "%", 0.1),
        ("15 1/V", "1/V", 15.0),
        ("15 S/A", "1/V", 15.0),
        ("40 nV/rtHz", "V/rtHz", 4e-08),
        ("40 nV/sqrt(Hz)", "V/rtHz", 4e-08),
        ("1 pA^2/Hz", "A^2/Hz", 1e-24),
        ("1 um^2", "m^2", 1e-12),
        (1.8, "V", 1.8),
        (2, "V", 2.0),
    ],
)
def test_reads_numbers_exactly(text: str | float, unit: str, value: float) -> None:
    assert parse_quantity(text, unit) == value


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("20 V/us", "V/s", 2e7),
        ("20 MV/s", "V/s", 2e7),
        ("0.5 mV/ns", "V/s", 5e5),
        ("3.5 mV um", "V m", 3.5e-9),
        ("3.5 mV*um", "V m", 3.5e-9),
        ("3.5 mV \N{MIDDLE DOT} \N{MICRO SIGN}m", "V m", 3.5e-9),
        ("1 % um", "% m", 1e-8),
        ("1%um", "% m", 1e-8),
        ("1 fF/um2", "F/m^2", 1e-3),
        ("1 fF/um^2", "F/m^2", 1e-3),
        ("1 fF/\N{MICRO SIGN}m\N{SUPERSCRIPT TWO}", "F/m^2", 1e-3),
        ("20 fF/Mohm", "F/ohm", 2e-20),
        ("2 uA/um", "A/m", 2.0),
    ],
)
def test_reads_compound_units_exactly(text: str, unit: str, value: float) -> None:
    assert parse_quantity(text, unit) == value


@pytest.mark.parametrize(
    ("text", "value"), [("300 K", 26.85), ("27 C", 27.0), ("-40", -40.0), ("125 \xb0C", 125.0)]
)
def test_reads_temperatures_in_celsius(text: str, value: float) -> None:
    assert parse_quantity(text, "degC") == value


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("", "V"), ("abc", "V"), ("1.8 A", "V"), ("1 xV", "V"), ("1,2u", "m"), ("1m", "m"),
        ("2 m", "m"), ("1 % um", "V m"), ("20 V us", "V/s"), ("2m", "V m"), ("1u", "A/m"),
        ("300 K", "V"), ("3 m", "dB"), ("1e999", "V"), ("1e" + "9" * 5000, "V"), ("nan", "V"),
        ("inf", "V"), (math.nan, "V"), (math.inf, "V"), (10**400, "V"), (True, "V"),
    ],
)  # fmt: skip
def test_refuses_what_is_no_such_quantity(text: str | float, unit: str) -> None:
    with pytest.raises(DataFault, match=r"^a.toml:3: ") as caught:
        parse_quantity(text, unit, where="a.toml:3")
    assert len(str(caught.value)) < 6000


def test_a_bare_m_says_why_it_is_refused() -> None:
    with pytest.raises(DataFault, match="metres or millimetres"):
        parse_quantity("1m", "m")


@given(
    st.sampled_from(sorted(UNIT_WORDS)),
    st.floats(1e-30, 1e30, allow_nan=False),
    st.sampled_from([1.0, -1.0]),
    st.integers(3, 12),
)
def test_reads_back_what_it_writes(unit: str, size: float, sign: float, digits: int) -> None:
    value = sign * size
    text = format_quantity(value, unit, digits=digits)
    back = parse_quantity(text, unit)
    assert back == pytest.approx(value, rel=0.51 * 10.0 ** (1 - digits) + 1e-12)


@given(st.sampled_from(sorted(PREFIXES)), st.decimals(-999, 999, places=3))
def test_a_prefix_is_its_power_of_ten_in_the_digits(prefix: str, number: object) -> None:
    assert parse_quantity(f"{number} {prefix}V", "V") == float(f"{number}e{PREFIXES[prefix]}")


@given(st.text(max_size=30), st.sampled_from(sorted(UNIT_WORDS)))
def test_any_text_is_a_number_or_a_fault(text: str, unit: str) -> None:
    try:
        value = parse_quantity(text, unit)
    except DataFault:
        return
    assert math.isfinite(value)


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (0.0, "V", "0 V"),
        (999.96, "V", "1 kV"),
        (2e7, "V/s", "20 V/us"),
        (3.5e-9, "V m", "3.5 mV um"),
        (1e-3, "F/m^2", "1 fF/um^2"),
        (2e-20, "F/ohm", "20 fF/Mohm"),
        (1e-8, "% m", "1 % um"),
        (0.123, "%", "12.3 %"),
        (26.85, "degC", "26.85 C"),
    ],
)
def test_writes_as_the_trade_does(value: float, unit: str, text: str) -> None:
    assert format_quantity(value, unit) == text


def test_unit_power_of_a_foreign_unit_is_none() -> None:
    assert unit_power("uA", "V") is None
    assert unit_power("fF/um2", "F/m^2") == -3
    assert unit_power("fF/um", "F/m^2") is None


@pytest.mark.parametrize(
    ("text", "unit", "values"),
    [
        ("0.6", "V", [0.6]),
        ("180n, 0.5u,1 um", "m", [1.8e-07, 5e-07, 1e-06]),
        ("0:0.7:0.1", "V", [0.0, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7]),
        ("0.18u:0.3u:60n", "m", [1.8e-07, 2.4e-07, 3e-07]),
        ("25:5:-10", "1/V", [25.0, 15.0, 5.0]),
        ("1,2:4:1", "", [1.0, 2.0, 3.0, 4.0]),
        ("-40:125:165", "degC", [-40.0, 125.0]),
        ("1:1:5", "V", [1.0]),
    ],
)
def test_lists_and_ranges(text, unit, values):
    assert parse_quantities(text, unit) == values


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("0:1:0.3", "does not reach 1 in whole steps of 0.3"),
        ("5:25:-5", "does not reach 25"),
        ("0:1:0", "does not reach 1"),
        ("0:1", "is not a range"),
        ("0:1:2:3", "is not a range"),
        ("1,,2", "expected a number in V, found ''"),
        ("0:1:1e-9", "means 1000000001 values"),
        ("0:1:1m A", "expected a number in V"),
    ],
)
def test_wrong_lists_and_ranges(text, message):
    with pytest.raises(DataFault, match="--vds: ") as caught:
        parse_quantities(text, "V", where="--vds")
    assert message in str(caught.value)


@given(st.integers(-(10**6), 10**6), st.integers(1, 10**4), st.integers(0, 50), st.integers(-15, 3))
def test_ranges_are_the_decimals_written(start, step, count, power):
    stop = start + count * step
    values = parse_quantities(f"{start}e{power}:{stop}e{power}:{step}e{power}", "V")
    assert values == [float(f"{start + i * step}e{power}") for i in range(count + 1)]


def test_one_prefix_for_many():
    assert choose_prefix([1e-9, 999e-6, 0.0, float("nan"), None]) == ("u", -6)
    assert choose_prefix([1e3]) == ("k", 3)
    assert choose_prefix([999.9999999999]) == ("k", 3)
    assert choose_prefix([1e-30]) == ("a", -18)


def test_a_metre_is_written_so_that_it_can_be_read():
    assert parse_quantity(format_quantity(1.0, "m"), "m") == 1.0
