"""Layouts of rows, `csv` and `columns`, against hand-written samples and a plain reader."""

from __future__ import annotations

import struct
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from gmid.errors import DataFault, GmidError, UnknownName, UsageFault
from gmid.sweep.readers import LAYOUTS, read_text, recognise
from gmid.sweep.readers.segments import cut_segments, parse_in_order
from gmid.sweep.source import TextSource, open_source
from gmid.sweep.texttable import TextTable


def opened(folder: Path, text: str | bytes, name: str = "a.txt") -> TextSource:
    file = folder / name
    file.write_bytes(text if isinstance(text, bytes) else text.encode())
    return open_source(file, name=name)


def read_one(folder: Path, text: str, **options: object) -> TextTable:
    tables = read_text(opened(folder, text), **options)  # type: ignore[arg-type]
    assert len(tables) == 1
    return tables[0]


def plainly(text: str, separator: str | None) -> list[list[float]]:
    """Read columns of plain numbers below one header line, as simply as can be."""
    rows = [line for line in text.splitlines()[1:] if line.strip()]
    return [list(column) for column in zip(*[map(float, r.split(separator)) for r in rows])]  # noqa: B905


def values(table: TextTable) -> list[list[float]]:
    return [column.values.tolist() for column in table.columns]


def heads(table: TextTable) -> list[tuple[str, str | None]]:
    return [(column.name, column.unit) for column in table.columns]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("L [um],vgs[V],vds (V),id (uA),gm/uS\n1,2,3,4,5\n",
         [("L", "um"), ("vgs", "V"), ("vds", "V"), ("id", "uA"), ("gm", "uS")]),
        ('"Id, A",id_uA,gm/id,v(s)\n1,2,3,4\n',
         [("Id", "A"), ("id", "uA"), ("gm/id", None), ("v(s)", None)]),
        ('"ID (A)";"VGS (V)"\n1;2\n', [("ID", "A"), ("VGS", "V")]),
        ("vgs\tid\nV\tuA\n1\t2\n", [("vgs", "V"), ("id", "uA")]),
        ("L,vgs,x\n[um],(V),-\n1,2,3\n", [("L", "um"), ("vgs", "V"), ("x", "-")]),
        ("vgs,id,\n1,2,\n3,4,\n", [("vgs", None), ("id", None)]),
        ("vgs,id\n1,2,\n3,4,\n", [("vgs", None), ("id", None)]),
        ("# vgs [V], id [uA]\n1,2\n3,4\n", [("vgs", "V"), ("id", "uA")]),
        ("@m1[gm],@m1[as],i(vd),v(d)\n1,2,3,4\n",
         [("@m1[gm]", None), ("@m1[as]", None), ("i(vd)", None), ("v(d)", None)]),
        ("v_s,V_G,c_F,gm_S,L_um,temp_C\n1,2,3,4,5,6\n",
         [("v_s", None), ("V_G", None), ("c_F", None), ("gm", "S"), ("L", "um"), ("temp", "C")]),
        ("id/W,vds/V,Sid [A^2/Hz],w [lambda]\n1,2,3,4\n",
         [("id/W", None), ("vds", "V"), ("Sid", "A^2/Hz"), ("w", "lambda")]),
    ],
)  # fmt: skip
def test_csv_heads(tmp_path: Path, text: str, expected: list[tuple[str, str | None]]) -> None:
    table = read_one(tmp_path, text)
    assert table.layout == "csv"
    assert heads(table) == expected
    spelled = table.meta["spellings"].split("\t")
    assert len(spelled) == len(expected)


def test_csv_decimal_comma(tmp_path: Path) -> None:
    for separator in (";", "\t"):
        text = f"vgs{separator}id\n0,5{separator}1,25e-6\n1{separator}-2,5E-6\n"
        assert values(read_one(tmp_path, text)) == [[0.5, 1.0], [1.25e-6, -2.5e-6]]
    with pytest.raises(GmidError, match=r"a\.txt:3: expected a number for 'id', found '1\.234,5'"):
        read_one(tmp_path, "vgs;id\n0,5;1,5\n1,5;1.234,5\n")
    with pytest.raises(GmidError, match=r"a\.txt:3: expected a number for 'id', found '1\.234'"):
        read_one(tmp_path, "vgs;id\n0,5;1,5\n1,5;1.234\n")
    with pytest.raises(DataFault, match="Decimal commas cannot be told"):
        read_one(tmp_path, "vgs,id\n0,5,1,5\n0,6,1,7\n")


def test_csv_text_columns_comments_blank_lines(tmp_path: Path) -> None:
    text = (
        "# corner=tt\n! T=27 C\ndevice,corner,vgs\nnmos,tt,0.5\n\n"
        "% half way\nnmos ,ff,0.6\npmos,ff,0.7\n\n"
    )
    table = read_one(tmp_path, text)
    assert values(table) == [["nmos", "nmos", "pmos"], ["tt", "ff", "ff"], [0.5, 0.6, 0.7]]
    assert [table.line_of(row) for row in range(3)] == [4, 7, 8]
    assert table.meta["comment"] == "# corner=tt\n! T=27 C"


def test_fast_text_columns_and_uneven_lines(tmp_path: Path) -> None:
    table = read_one(tmp_path, "device,vgs\nn1,0.5\n\nn2,0.6\n")
    assert values(table) == [["n1", "n2"], [0.5, 0.6]]
    assert [table.line_of(row) for row in range(2)] == [2, 4]


def test_csv_suffixes(tmp_path: Path) -> None:
    text = "vgs,id,gm\n100m,3uA,2M\n200m,4uA,3e-3\n"
    table = read_one(tmp_path, text)
    assert values(table) == [[0.1, 0.2], [3e-6, 4e-6], [2e6, 3e-3]]
    assert "a.txt:2: '2M' is read as 2e+06" in table.meta["note"]
    assert values(read_one(tmp_path, text, suffixes="spice"))[2] == [2e-3, 3e-3]


def test_columns_with_header_and_fortran(tmp_path: Path) -> None:
    text = " v-sweep   v(d)   i(vd)  \n 0.0D+00  3.0D-01 -4.0D-13 \n 5.0D-02  3.0D-01 -5.0D-13 \n"
    table = read_one(tmp_path, text)
    assert table.layout == "columns"
    assert table.names == ["v-sweep", "v(d)", "i(vd)"]
    assert values(table) == [[0.0, 0.05], [0.3, 0.3], [-4e-13, -5e-13]]
    table = read_one(tmp_path, "a b\n1.0 1.23-105\n2.0 1.0\n")
    assert values(table)[1] == [1.23e-105, 1.0]


def test_columns_units_apart(tmp_path: Path) -> None:
    table = read_one(tmp_path, "L [um]  vgs [V]  id (uA)\n1 2 3\n4 5 6\n")
    assert heads(table) == [("L", "um"), ("vgs", "V"), ("id", "uA")]


def test_columns_repeated_scale(tmp_path: Path) -> None:
    rows = "0.0 1.0 0.0 5.0\n0.5 2.0 0.5 6.0\n"
    table = read_one(tmp_path, "v-sweep a v-sweep b\n" + rows)
    assert table.names == ["v-sweep", "a", "b"]
    assert table.meta["dropped"] == "v-sweep (column 3 repeats column 1)"
    with pytest.raises(DataFault, match="no header; columns 1, 3, 5"):
        read_one(tmp_path, rows)
    table = read_one(tmp_path, rows, columns=["vgs", "id", "gm"])
    assert table.names == ["vgs", "id", "gm"]
    assert values(table) == [[0.0, 0.5], [1.0, 2.0], [5.0, 6.0]]
    assert read_one(tmp_path, rows, columns=["a", "b", "c", "d"]).names == ["a", "b", "c", "d"]
    with pytest.raises(DataFault, match=r"a\.txt:2: the scale 'vgs' is 0.5 in one column and 0.7"):
        read_one(tmp_path, rows.replace("0.5 6.0", "0.7 6.0"), columns=["vgs", "id", "gm"])
    kept = read_one(tmp_path, "v-sweep a v-sweep b\n0 1 0 5\n1 2 3 6\n")
    assert kept.names == ["v-sweep", "a", "v-sweep", "b"]


def test_headerless(tmp_path: Path) -> None:
    with pytest.raises(DataFault, match=r"a\.txt:1: the 3 columns have no header.*columns = \["):
        read_one(tmp_path, "1 2 3\n4 5 6\n")
    with pytest.raises(DataFault, match="2 names are listed for 3 columns"):
        read_one(tmp_path, "1 2 3\n4 5 6\n", columns=["a", "b"])
    table = read_one(tmp_path, "1,2,3\n4,5,6\n", columns=["a [V]", "b", "c"])
    assert heads(table)[0] == ("a", "V")
    with pytest.raises(DataFault, match="columns have no header"):
        read_one(tmp_path, "1,2,3\n4,5,6\n")


ROWS = "".join(f"{0.1 * j:.3f} {j}.5e-06 7\n" for j in range(1, 9))


@pytest.mark.parametrize(
    ("spoil", "message"),
    [
        (("3.5e-06 7", "3.5e-06"),
         r"a.txt:4: expected 3 columns as in the header \(line 1\), found 2."),
        (("3.5e-06 7", "3.5e-06 7 8"), r"a.txt:4: expected 3 columns .*found 4."),
        (("1.5e-06 7", "1.5e-06"), r"a.txt:2: expected 3 columns .*found 2."),
        (("1.5e-06 7", "abc 7"), r"a.txt:2: expected a number for 'id', found 'abc'."),
        (("8.5e-06 7\n", "8.5e-06\n"), r"a.txt:9: expected 3 columns .*found 2."),
        (("3.5e-06", "nan"), r"a.txt:4: the value of 'id' is missing: found 'nan'."),
        (("3.5e-06", "failed"), r"a.txt:4: the value of 'id' is missing: found 'failed'."),
        (("3.5e-06", "******"), r"a.txt:4: the value of 'id' is missing"),
        (("3.5e-06", "1.#IND"), r"a.txt:4: the value of 'id' is missing"),
        (("3.5e-06", "inf"), r"a.txt:4: the value of 'id' is missing"),
        (("3.5e-06", "1e999"), r"a.txt:4: the value of 'id' is beyond the range"),
        (("3.5e-06", "abc"), r"a.txt:4: expected a number for 'id', found 'abc'."),
        (("0.300 ", "vgs id gm\n0.300 "), r"a.txt:4: a second table begins here: 'vgs id gm'"),
        (("0.300 ", "x y\n0.300 "), r"a.txt:4: a second table begins here: 'x y'"),
        (("8.5e-06 7\n", "8.5e-"), r"a.txt:9: expected 3 columns"),
    ],
)  # fmt: skip
@pytest.mark.parametrize("separator", [" ", ",", ";", "\t"])
def test_faults_name_the_line(
    tmp_path: Path, spoil: tuple[str, str], message: str, separator: str
) -> None:
    assert spoil[0] in ROWS
    text = ("vgs id gm\n" + ROWS.replace(*spoil, 1)).replace(" ", separator)
    message = message.replace("'vgs id gm'", f"{f'vgs{separator}id{separator}gm'!r}")
    message = (
        message.replace("'x y'", f"{f'x{separator}y'!r}")
        .replace("\\", r"\\")
        .replace(r"\\(", r"\(")
        .replace(r"\\)", r"\)")
    )
    with pytest.raises(GmidError, match=message):
        read_one(tmp_path, text)


def test_empty_field_and_second_table(tmp_path: Path) -> None:
    with pytest.raises(
        DataFault, match=r"a\.txt:3: the value of 'b' is missing: the field is empty"
    ):
        read_one(tmp_path, "a,b,c\n1,2,3\n4,,6\n7,8,9\n")
    with pytest.raises(DataFault, match=r"a\.txt:2: expected 2 columns as in the header.*found 3"):
        read_one(tmp_path, "a b\n1 2 3\n4 5 6\n")
    with pytest.raises(DataFault, match="column 2 has no name"):
        read_one(tmp_path, "a,,c\n1,2,3\n4,5,6\n")


def test_several_faults_at_once_and_a_bound(tmp_path: Path) -> None:
    with pytest.raises(GmidError) as caught:
        read_one(tmp_path, "a,b\n1,2\nx1,2\n3,nan\n1\n")
    assert [line.split(" ")[0] for line in str(caught.value).splitlines()] == [
        "a.txt:3:", "a.txt:4:", "a.txt:5:"
    ]  # fmt: skip
    with pytest.raises(GmidError, match="stopped after 20 faults"):
        read_one(tmp_path, "a,b\n1,2\n" + "1,2\n" * 100 + "1\n" * 50)


def test_cut_off_inside_the_last_number(tmp_path: Path) -> None:
    for last in ("4.500e-0", "4.500e-", "4.50"):
        with pytest.raises(GmidError, match=r"a\.txt:5: "):
            read_one(tmp_path, f"a,b\n1,1.500e-06\n2,2.500e-06\n3,3.500e-06\n4,{last}")
    table = read_one(tmp_path, "a,b\n1,1.5e-06\n2,2.5e-06\n3,3.5e-06\n4,4e-06")
    assert table.rows == 4


def test_glued_numbers_get_a_hint(tmp_path: Path) -> None:
    with pytest.raises(GmidError, match="run into each other"):
        read_one(tmp_path, "a b\n1.0 2.0\n1.0-2.0\n1.0 3.0\n")


def test_logs_and_unknown_texts(tmp_path: Path) -> None:
    with pytest.raises(DataFault, match=r"a\.txt:2: this is no table but a log: 'Error: singular"):
        read_one(tmp_path, "Circuit: test\nError: singular matrix\n")
    with pytest.raises(DataFault, match="layout of the file is not recognised"):
        read_one(tmp_path, "only words stand here\nand here\n")
    with pytest.raises(UnknownName, match="Did you mean columns"):
        read_one(tmp_path, ROWS, layout="colums")
    with pytest.raises(UsageFault, match="no option 'colums'"):
        read_one(tmp_path, ROWS, colums=["a"])
    for layout in LAYOUTS:
        with pytest.raises(DataFault):
            read_one(tmp_path, "only words stand here\nand here\n", layout=layout)


def test_recognition(tmp_path: Path) -> None:
    assert recognise(opened(tmp_path, "a,b\n1,2\n"))[0] == ("csv", 0.8)
    assert recognise(opened(tmp_path, "a\tb\n1\t2\n"))[0][0] == "csv"
    assert recognise(opened(tmp_path, "a b\n1 2\n")) == [("columns", 0.7)]
    assert recognise(opened(tmp_path, "0,05 1,2\n0,06 1,3\n"))[0][0] == "columns"
    table = read_one(tmp_path, "x y\n0,05 1,2\n0,06 1,3\n")
    assert values(table) == [[0.05, 0.06], [1.2, 1.3]]


def test_long_file_equals_the_plain_reader(tmp_path: Path) -> None:
    rows = np.random.default_rng(5).normal(size=(45_000, 5))
    for separator in (",", "\t", " "):
        lines = [separator.join(map(repr, row)) for row in rows.tolist()]
        text = separator.join("abcde") + "\n" + "\n".join(lines) + "\n"
        table = read_one(tmp_path, text)
        assert values(table) == plainly(text, separator)
        assert (table.first_line, table.line_of(44_999)) == (2, 45_001)
    lines[40_000] = lines[40_000].replace(" ", " x", 1)
    with pytest.raises(GmidError, match=r"a\.txt:40002: expected a number for 'b'"):
        read_one(tmp_path, " ".join("abcde") + "\n" + "\n".join(lines))


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=40)
@given(
    st.lists(st.tuples(*[st.floats(allow_nan=False, allow_infinity=False)] * 3), min_size=1),
    st.sampled_from([",", ";", "\t", " "]), st.sampled_from(["{!r}", "{:.16e}", "{: .16E}"]),
    st.booleans(),
)  # fmt: skip
def test_numbers_survive_to_the_bit(
    tmp_path: Path, rows: list[tuple[float, ...]], separator: str, form: str, crlf: bool
) -> None:
    lines = [separator.join("xyz")] + [separator.join(map(form.format, row)) for row in rows]
    text = ("\r\n" if crlf else "\n").join([*lines, ""])
    table = read_one(tmp_path, text)
    for column, expected in zip(table.columns, zip(*rows, strict=True), strict=True):
        assert struct.pack(f"{len(rows)}d", *column.values) == struct.pack(
            f"{len(rows)}d", *expected
        )


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=60)
@given(st.text(alphabet='01.e-+,; \t\nabnV()[]#*"', min_size=1, max_size=80))
def test_hostile_texts_never_crash(tmp_path: Path, text: str) -> None:
    for layout in ("auto", *LAYOUTS):
        try:
            for table in read_text(opened(tmp_path, text), layout):
                assert table.rows > 0
                assert len({column.values.size for column in table.columns}) == 1
        except GmidError as caught:
            error = caught
        else:
            continue
        assert str(error).startswith("a.txt")


@given(st.lists(st.binary(min_size=1, max_size=9)), st.integers(1, 20))
def test_segments_keep_every_byte(blocks: list[bytes], size: int) -> None:
    left = iter([*blocks, b""])
    cut = list(cut_segments(lambda: next(left), size=size))
    pieces = list(parse_in_order(iter(cut), b"".join))
    assert b"".join(pieces) == b"".join(blocks)
    assert all(piece.endswith(b"\n") and len(piece) >= size for piece in pieces[:-1])
    assert all(block for segment in cut for block in segment)
