from __future__ import annotations

import tomllib
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gmid.documents import write_document
from gmid.errors import DataFault

SCALARS = (
    st.text(st.characters(exclude_categories=["Cs"]), max_size=150)
    | st.integers(-(2**63), 2**63 - 1)
    | st.floats(allow_nan=False)
    | st.booleans()
)
KEYS = st.text(st.characters(exclude_categories=["Cs"]), max_size=6) | st.sampled_from(["t", "u"])
DATA: st.SearchStrategy[Any] = st.dictionaries(
    KEYS,
    st.recursive(
        SCALARS,
        lambda inner: st.lists(inner, max_size=4) | st.dictionaries(KEYS, inner, max_size=4),
        max_leaves=12,
    ),
    max_size=4,
)


@given(DATA, st.sampled_from([(), ("t", "u")]), st.text(max_size=20))
def test_reads_back_as_written(data: dict[str, Any], tables: tuple[str, ...], note: str) -> None:
    comments: dict[tuple[str | int, ...], str] = {(key,): note for key in data}
    note = "".join(letter for letter in note if not "\ud800" <= letter <= "\udfff")
    text = write_document(data, tables=tables, heading=note, comments=comments)
    assert tomllib.loads(text) == data


def test_a_plan_looks_as_people_write_it() -> None:
    text = write_document(
        {
            "format": 1,
            "title": 'a "b"\n',
            "supply": {"voltage": "1.8 V", "low": 1.62},
            "process": {"table": "x.h5", "devices": {"n": "nmos"}},
            "matching": {"nmos": {"avt": "3.5 mV um", "abeta": "1 % um"}},
            "plan": [
                {
                    "transistors": {
                        "pair": {"device": "nmos", "length": "0.4 um", "count": 4},
                        "load": {"device": "pmos", "length": "0.6 um", "count": np.int64(1)},
                    },
                    "name": "a1",
                    "positions": ("A1", "A2"),
                    "demands": {"input_noise": {"density": "40 nV/rtHz"}, "gbw": np.float64(2e7)},
                },
                {"name": "a2"},
            ],
        },
        heading="Sized amplifiers.\n\nEdit counts, then check.",
        tables=["devices", "demands", "transistors"],
        comments={("supply", "low"): "worst case", ("plan", 1): "the second"},
    )
    assert text == (
        "# Sized amplifiers.\n#\n# Edit counts, then check.\n\n"
        'format = 1\ntitle = "a \\"b\\"\\n"\n\n'
        '[supply]\nvoltage = "1.8 V"\n# worst case\nlow = 1.62\n\n'
        '[process]\ntable = "x.h5"\n\n[process.devices]\nn = "nmos"\n\n'
        '[matching]\nnmos = { avt = "3.5 mV um", abeta = "1 % um" }\n\n'
        '[[plan]]\nname = "a1"\npositions = ["A1", "A2"]\n\n'
        '[plan.transistors]\npair = { device = "nmos", length = "0.4 um", count = 4 }\n'
        'load = { device = "pmos", length = "0.6 um", count = 1 }\n\n'
        '[plan.demands]\ninput_noise = { density = "40 nV/rtHz" }\ngbw = 20000000.0\n\n'
        '# the second\n[[plan]]\nname = "a2"\n'
    )


def test_long_lists_take_a_line_an_item() -> None:
    text = write_document({"conditions": [f"corner{index}/27" for index in range(12)]})
    assert text.count("\n") == 14
    assert max(map(len, text.splitlines())) <= 100


@pytest.mark.parametrize("value", [None, {"b": [1, None]}, object(), b"raw", "\ud800"])
def test_what_toml_cannot_hold_is_named(value: object) -> None:
    with pytest.raises(DataFault, match=r"^a"):
        write_document({"a": value})


def test_keys_are_texts() -> None:
    with pytest.raises(DataFault, match="3 cannot be a key"):
        write_document({"a": {3: 1}})


@pytest.mark.parametrize("value", [float("inf"), -float("inf"), 1e22, 1e-300, -0.0, 5e-324])
def test_floats_are_exact(value: float) -> None:
    assert repr(tomllib.loads(write_document({"x": value}))["x"]) == repr(value)
