"""Expressions in column names."""

from __future__ import annotations

import contextlib

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gmid.errors import DataFault, UnknownName
from gmid.sweep.expression import parse_expression

NAMES = ["v-sweep", "v(d)", "v(s)", "i(vd)", "@m1[gm]", "v(g) -i(vd)", "ro", "id", "ID_2", "e"]


def value(text, **more):
    lookup = {name: np.array([float(i + 1)]) for i, name in enumerate(NAMES)}
    return parse_expression(text, NAMES).evaluate({**lookup, **more}).item()


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("v-sweep", 1), ("V-SWEEP", 1), ("v(d)-v(s)", -1), ("v(d) - v(s)", -1), ("-i(vd)", -4),
        ("1/ro", 1 / 7), ("@m1[gm]*2", 10), ("abs(-i(vd))", 4), ("v(g) -i(vd)", 6),
        ("`v(g) -i(vd)`*2", 12), ("1e-3*id", 8e-3), ("2*(id+ro)/3", 10), ("--id", 8), ("+id", 8),
        ("1-2-3", -4), ("8/4/2", 1), ("id_2", 9), ("id*e", 80), ("-id*-ro", 56), ("1.5e2", 150),
    ],
)  # fmt: skip
def test_value(text, expected):
    assert value(text) == pytest.approx(expected, rel=1e-15)


@pytest.mark.parametrize("text", ["", "(id", "id)", "id id", "*id", "id +", "abs id", "`id"])
def test_malformed(text):
    with pytest.raises(DataFault):
        parse_expression(text, NAMES)


@pytest.mark.parametrize(
    ("text", "advice"), [("idd", "id"), ("v(x)", "v(d)"), ("import os", "There are"), ("3id", "id")]
)
def test_unknown_column(text, advice):
    with pytest.raises(UnknownName, match="there is no column") as caught:
        parse_expression(text, NAMES)
    assert advice.split("(")[0] in str(caught.value)


def test_division_by_zero_is_left_to_the_grid_check():
    result = parse_expression("1/ro", ["ro"]).evaluate({"ro": np.array([0.0, 2.0])})
    assert not np.isfinite(result[0])
    assert result[1] == 0.5


@given(st.text(max_size=30))
def test_any_text_gives_a_value_or_a_clean_error(text):
    with contextlib.suppress(DataFault, UnknownName):
        parse_expression(text, NAMES)


NUMBERS = st.integers(1, 99).map(str)


@given(
    st.recursive(
        NUMBERS,
        lambda inner: st.one_of(
            st.tuples(inner, st.sampled_from(["+", "-", "*"]), inner).map("".join),
            inner.map(lambda text: f"({text})"),
            inner.map(lambda text: f"-({text})"),
        ),
        max_leaves=8,
    )
)
def test_arithmetic_is_that_of_the_language(text):
    expected = eval(text)
    assert parse_expression(text, []).evaluate({}).item() == pytest.approx(expected, rel=1e-12)
