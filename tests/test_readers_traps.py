"""Traps of the layouts, each in a small text written by hand."""

from __future__ import annotations

import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gmid.errors import GmidError
from gmid.sweep.readers import read_text, recognise
from gmid.sweep.readers.pairs import find_pairs
from gmid.sweep.source import open_bytes
from gmid.sweep.texttable import TextTable


def read(text: str, layout: str = "auto", **options: object) -> list[TextTable]:
    return read_text(open_bytes(text.encode(), name="a.txt"), layout, **options)


def columns(table: TextTable) -> dict[str, list[object]]:
    return {column.name: column.values.tolist() for column in table.columns}


def test_listing_with_two_header_lines_between_x_and_y() -> None:
    text = (
        "****** dc transfer curves  tnom= 25.000 temp= 27.000\n"
        "x\n\n   volt        voltage    current   \n               d          vd\n"
        " 0.          300.0000m  -1.200p\n 50.00000m   300.0000m   -3.4n\ny\n\n"
        "          ***** job concluded\n"
    )
    (table,) = read(text)
    assert columns(table) == {
        "scale": [0.0, 0.05], "v(d)": [0.3, 0.3], "i(vd)": [-1.2e-12, -3.4e-9]
    }  # fmt: skip
    assert table.layout == "print-listing"
    assert [table.line_of(row) for row in (0, 1)] == [6, 7]


def test_listing_x_is_mega_and_bare_points() -> None:
    text = "#     v(d)   id(m1)\n1. 10.3u 2x\n2. 206.u 1.E-21\n3. 415.99f 0.\n"
    (table,) = read(text)
    assert columns(table) == {
        "scale": [1.0, 2.0, 3.0], "v(d)": [1.03e-05, 2.06e-4, 4.1599e-13],
        "id(m1)": [2e6, 1e-21, 0.0],
    }  # fmt: skip


def test_listing_negative_values_eat_the_blank() -> None:
    (table,) = read("#     v(d)   id(m1)\n0.1 1.2e-03-3.4e-05\n0.2-1.2e-03 3.4u\n")
    assert columns(table)["id(m1)"] == [-3.4e-05, 3.4e-06]
    assert columns(table)["v(d)"] == [1.2e-3, -1.2e-3]


def test_listing_of_complex_numbers() -> None:
    text = "AC\n--------\nIndex   frequency   v(out)\n--------\n"
    text += "0\t1.0e+03,\t0.0e+00\t5.0e-01,\t-2.5e-01\t\n"
    (table,) = read(text)
    assert columns(table) == {"frequency": [1000.0], "v(out)": [0.5 - 0.25j]}


def test_listing_begins_anew_for_each_step() -> None:
    head = "--------\nIndex   v-sweep   id\n--------\n"
    rows = "0\t0.0\t{0}\n1\t0.1\t{0}\n"
    one, two = read(
        "n l=0.2u\n" + head + rows.format(1.0) + "\nn l=0.4u\n" + head + rows.format(2.0)
    )
    assert (columns(one)["id"], columns(two)["id"]) == ([1.0, 1.0], [2.0, 2.0])
    assert (one.meta["title"], two.meta["title"]) == ("n l=0.2u", "n l=0.4u")


def test_stepped_cells_of_two_kinds() -> None:
    head = "freq\tI(Vg)\nStep Information: L=180n  (Run: 1/1)\n"
    (table,) = read(head + "1e3\t(1e-9,-2e-9)\n2e3\t(3e-9,4e-9)\n")
    assert columns(table)["I(Vg)"] == [1e-9 - 2e-9j, 3e-9 + 4e-9j]
    (table,) = read(head + "1e3\t(-20dB,90\N{DEGREE SIGN})\n2e3\t(0dB,180deg)\n")
    np.testing.assert_allclose(columns(table)["I(Vg)"], [0.1j, -1.0], atol=1e-15)


def test_stepped_micro_in_latin_1() -> None:
    data = "x\ty\r\nStep Information: L=0.18\u00b5 M=3meg\r\n0\t1\r\n".encode("latin-1")
    (table,) = read_text(open_bytes(data, name="a.txt"))
    assert columns(table) == {"L": [1.8e-07], "M": [3e6], "x": [0.0], "y": [1.0]}


def test_trace_of_an_operating_point_with_records() -> None:
    text = """HEADER
"PSFversion" "1.00"
TYPE
"V" FLOAT DOUBLE PROP(
"units" "V"
)
"mos" STRUCT(
"region" INT LONG PROP(
"units" ""
)
"ids" FLOAT DOUBLE PROP(
"units" "A"
)
"gm" FLOAT DOUBLE PROP(
"units" "S"
)
) PROP(
"key" "inst"
)
VALUE
"d" "V" 9.0e-01
"M0" "mos" (
2
1.5e-05
2.5e-04
) PROP(
"model" "n"
)
END
"""
    (table,) = read(text)
    assert [(c.name, c.unit, c.values.tolist()) for c in table.columns] == [
        ("d", "V", [0.9]), ("M0:region", None, [2.0]), ("M0:ids", "A", [1.5e-05]),
        ("M0:gm", "S", [2.5e-04]),
    ]  # fmt: skip


def test_trace_of_complex_values_and_escaped_names() -> None:
    text = """HEADER
"PSFversion" "1.00"
TYPE
"sweep" FLOAT DOUBLE PROP(
"units" "Hz"
)
"A" COMPLEX DOUBLE PROP(
"key" "inst"
)
SWEEP
"freq" "sweep"
TRACE
"g\\<0\\>" "A"
VALUE
"freq" 1.0e+03
"g\\<0\\>" (1.0e-09 -2.0e-09)
END
"""
    (table,) = read(text)
    assert columns(table) == {"freq": [1000.0], "g<0>": [1e-9 - 2e-9j]}
    assert [column.unit for column in table.columns] == ["Hz", None]


def test_measurement_written_vertically() -> None:
    text = "index = 1\nlch = 1.8e-07\nid = 1.0e-05\n\nindex = 2\nlch = 3.6e-07\nid = 2u\n"
    (table,) = read(text)
    assert table.layout == "measurement"
    assert columns(table)["id"] == [1e-5, 2e-6]
    with pytest.raises(GmidError, match=r"a\.txt:5: the record lacks 'id'"):
        read(text.replace("id = 2u\n", ""))


def test_operating_points_in_two_columns_and_side_by_side() -> None:
    (table,) = read("   gm   5.2e-05\n   gds  1e-06\n\n   gm   6.2e-05\n   gds  2e-06\n")
    assert columns(table) == {"gm": [5.2e-05, 6.2e-05], "gds": [1e-6, 2e-6]}
    text = " device  m1  m2\n id  1u  2u\n gm  1e-5  2e-5\n"
    (table,) = read(text + "\n" + text.replace("1u", "3u"))
    assert columns(table)["@m1[id]"] == [1e-6, 3e-6]
    assert columns(table)["@m2[gm]"] == [2e-5, 2e-5]


def test_operating_points_with_a_pattern_for_records() -> None:
    text = "bias point 1\nvgs = 0.1\nid = 1e-9\nbias point 2\nvgs = 0.2\nid = 2e-9\n"
    (table,) = read(text, "operating-point", record="^bias")
    assert columns(table) == {"vgs": [0.1, 0.2], "id": [1e-9, 2e-9]}
    with pytest.raises(GmidError, match="is not valid"):
        read(text, "operating-point", record="(")
    with pytest.raises(GmidError, match="stands twice in one record"):
        read(text, "operating-point", record="^bias point 1")


def test_blocks_keep_their_own_parameters() -> None:
    text = "! L=0.18 T=300 K\n! VGS ID\n0 1\n1 2\n\n! L=0.36\n0 3\n1 4\n"
    one, two = read(text)
    assert [(c.name, c.unit) for c in one.columns][:2] == [("L", None), ("T", "K")]
    assert columns(two) == {"L": [0.36, 0.36], "VGS": [0.0, 1.0], "ID": [3.0, 4.0]}


def test_measured_blocks_with_list_and_any_outer_word() -> None:
    text = "BEGIN_DB\n XYZ_VAR vd 0.3\n XYZ_VAR vb -1\n#vg id ib\n 0 1.2e-12 -3e-13\nEND_DB\n"
    (table,) = read(text)
    assert columns(table) == {"vd": [0.3], "vb": [-1.0], "vg": [0.0], "id": [1.2e-12],
                              "ib": [-3e-13]}  # fmt: skip


def test_extension_says_nothing() -> None:
    for name in ("a.raw", "a.csv", "a.lis"):
        assert recognise(open_bytes(b"vgs,id\n0,1\n", name=name))[0][0] == "csv"


@given(
    st.lists(st.tuples(st.sampled_from(["L", "vds", "T", "w_f"]), st.floats(-1e6, 1e6),
                       st.sampled_from(["", " um", " V", " C"])), max_size=4,
             unique_by=lambda entry: entry[0]),
    st.sampled_from([" ", "  ", ", ", "; "]), st.sampled_from(["=", " = "]),
)  # fmt: skip
def test_pairs(entries: list[tuple[str, float, str]], gap: str, sign: str) -> None:
    text = gap.join(f"{name}{sign}{value!r}{unit}" for name, value, unit in entries)
    found = find_pairs(text)
    assert [(c.name, c.values[0], c.unit or "") for c in found] == [
        (name, value, unit.strip()) for name, value, unit in entries
    ]


@given(st.text(alphabet="aL=1.5 um\"'C,;()[]\n", max_size=200))
def test_hostile_pairs(text: str) -> None:
    for pair in find_pairs(text):
        assert re.fullmatch(r"\S+", pair.name)
        assert pair.values.size == 1


def test_blocks_longer_than_the_head_are_still_seen() -> None:
    rows = "".join(f"{k} {k}.5\n" for k in range(20_000))
    text = f"! L=1 um\n! vgs id\n{rows}\n! L=2 um\n! vgs id\n{rows}"
    one, two = read(text)
    assert (one.layout, one.rows, two.rows) == ("blocks", 20_000, 20_000)
    assert (columns(one)["L"][0], columns(two)["L"][0]) == (1.0, 2.0)
    with pytest.raises(GmidError, match=r"a\.txt:20004: a comment with parameters stands between"):
        read(text, "columns")
