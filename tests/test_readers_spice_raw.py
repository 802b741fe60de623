"""SPICE3 raw files as text: dialects, flags, several plots, damage."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from gmid.errors import DataFault, GmidError
from gmid.sweep.readers import read_text
from gmid.sweep.source import open_source
from gmid.sweep.texttable import TextTable

NAMES = (("v(v-sweep)", "voltage"), ("i(vd)", "current"), ("@m1[gm]", "admittance"))
ROWS = [[0.5, -1.25e-6, 2.5e-5], [0.55, -1.5e-6, 2.75e-5], [0.6000000000000001, -2e-6, 3e-5]]


def body(rows: list[list[float]] | list[list[complex]], dialect: str) -> str:
    """Write points in one of the three dialects, or on one line each."""
    lines = []
    for index, row in enumerate(rows):
        words = [
            f"{v.real:.16e},{v.imag:.16e}" if isinstance(v, complex) else f"{v:.16e}" for v in row
        ]
        if dialect == "spaced":
            lines.append(f" {index}\t" + "\n\t".join(words) + "\n")
        elif dialect == "streamed":
            lines.append(f"{index}\t\t" + "\n\t".join(words))
        elif dialect == "dense":
            lines.append(f" {index}\t" + "\n\t".join(words))
        else:
            lines.append(f"{index} " + " ".join(words))
    return "\n".join(lines) + "\n"


def plot(
    rows: list[list[float]] | list[list[complex]], *, dialect: str = "spaced",
    flags: str = "real", names: tuple[tuple[str, str], ...] = NAMES, points: str | None = None,
    title: str = "nch l=0.2u",
) -> str:  # fmt: skip
    header = [
        f"Title: {title}", "Date: Tue Mar  3 10:00:00  2026",
        "Plotname: DC transfer characteristic", f"Flags: {flags}", f"No. Variables: {len(names)}",
        f"No. Points: {len(rows) if points is None else points}     ", "Variables:",
        *(f"\t{j}\t{name}\t{kind}" for j, (name, kind) in enumerate(names)), "Values:", "",
    ]  # fmt: skip
    return "\n".join(header) + body(rows, dialect)


def plainly(text: str, count: int) -> list[list[float]]:
    """Read the one real plot of a text by tokens, as simply as can be."""
    tokens = text.split("Values:")[1].split()
    step = count + 1
    return [[float(tokens[i]) for i in range(1 + j, len(tokens), step)] for j in range(count)]


def read(folder: Path, text: str, name: str = "a.raw") -> list[TextTable]:
    file = folder / name
    file.write_text(text)
    return read_text(open_source(file, name=name))


def values(table: TextTable) -> list[list[complex]]:
    return [column.values.tolist() for column in table.columns]


@pytest.mark.parametrize("dialect", ["spaced", "streamed", "dense", "oneline"])
@pytest.mark.parametrize("many", [1, 500])
def test_dialects(tmp_path: Path, dialect: str, many: int) -> None:
    rows = ROWS * many
    text = plot(rows, dialect=dialect)
    (table,) = read(tmp_path, text)
    assert values(table) == plainly(text, 3)
    assert values(table) == [list(column) for column in zip(*rows, strict=True)]
    assert [(c.name, c.unit) for c in table.columns] == [
        ("v(v-sweep)", "V"), ("i(vd)", "A"), ("@m1[gm]", "S")
    ]  # fmt: skip
    step = {"spaced": 4, "streamed": 3, "dense": 3, "oneline": 1}[dialect]
    for row in (0, 1, len(rows) - 1):
        assert table.line_of(row) == 12 + step * row
        assert text.splitlines()[table.line_of(row) - 1].split()[0] == str(row)
    assert table.meta["title"] == "nch l=0.2u"
    assert table.meta["plot"] == "DC transfer characteristic"


@pytest.mark.parametrize("many", [1, 600])
def test_several_plots_and_complex(tmp_path: Path, many: int) -> None:
    complex_rows = [[complex(1e6 * (k + 1), 0.0), complex(0.5, -k / 4)] for k in range(2 * many)]
    names = (("frequency", "frequency"), ("v(out)", "voltage"))
    text = (
        plot(ROWS * many, title="first")
        + plot(complex_rows, flags="complex", names=names, title="second", dialect="streamed")
        + plot(ROWS[:1], title="third", dialect="dense")
    )
    first, second, third = read(tmp_path, text)
    assert values(first) == [list(column) for column in zip(*ROWS * many, strict=True)]
    assert values(second) == [list(column) for column in zip(*complex_rows, strict=True)]
    assert second.columns[1].values.dtype == np.complex128
    assert second.columns[0].unit == "Hz"
    assert third.rows == 1
    assert [table.meta["title"] for table in (first, second, third)] == ["first", "second", "third"]
    assert [table.meta["step"] for table in (first, second, third)] == ["1", "2", "3"]
    lines = text.splitlines()
    for table in (first, second, third):
        for row in {0, table.rows - 1}:
            assert lines[table.line_of(row) - 1].split()[0] == str(row)


def test_many_small_plots(tmp_path: Path) -> None:
    tables = read(tmp_path, "".join(plot(ROWS[:1], title=f"t{k}") for k in range(300)))
    assert [table.meta["title"] for table in tables] == [f"t{k}" for k in range(300)]


def test_names_and_types(tmp_path: Path) -> None:
    names = (
        ("v(v-sweep)", "voltage"), ("v(g) -i(vd)", "voltage grid=3"), ("v(@m1[vth])", "voltage"),
        ("q", "notype"), ("cgg", "capacitance"), ("v(v-sweep)", "voltage"),
        ("kp", "notype dims=1"),
    )  # fmt: skip
    rows = [[0.0, 1.0, 0.45, 9.0, 1e-15, 0.0, 7.0], [0.1, 2.0, 0.46, 8.0, 2e-15, 0.1, 0.0]]
    (table,) = read(tmp_path, plot(rows, names=names))
    assert [(column.name, column.unit) for column in table.columns] == [
        ("v(v-sweep)", "V"), ("v(g) -i(vd)", "V"), ("v(@m1[vth])", None), ("q", None),
        ("cgg", "F"), ("kp", None),
    ]  # fmt: skip
    assert table.column("kp").values.tolist() == [7.0, 7.0]
    assert table.meta["dropped"] == "v(v-sweep) (column 6 repeats column 1)"
    rows[1][5] = 0.2
    (table,) = read(tmp_path, plot(rows, names=names))
    assert table.names.count("v(v-sweep)") == 2


def test_unpadded(tmp_path: Path) -> None:
    names = (("x", "voltage"), ("k", "notype dims=1"), ("y", "current"))
    head = plot([], flags="real unpadded", names=names, points="3")
    text = head.rstrip("\n") + "\n 0\t0.0\n\t7.0\n\t1.0\n 1\t0.1\n\t2.0\n 2\t0.2\n\t3.0\n"
    (table,) = read(tmp_path, text)
    assert values(table) == [[0.0, 0.1, 0.2], [7.0, 7.0, 7.0], [1.0, 2.0, 3.0]]
    with pytest.raises(DataFault, match="'k' has 2 points where the plot has 3"):
        read(tmp_path, text.replace("dims=1", "dims=2").replace("0.1\n", "0.1\n\t8.0\n"))


def test_announced_points(tmp_path: Path) -> None:
    (table,) = read(tmp_path, plot(ROWS, points="0"))
    assert table.rows == 3
    assert "announces no points; 3 were found" in table.meta["note"]
    for many in (1, 400):
        rows = ROWS * many
        with pytest.raises(DataFault, match=rf"announces {len(rows) + 2} points \(line 6\), found"):
            read(tmp_path, plot(rows, points=str(len(rows) + 2)))
        with pytest.raises(DataFault, match=r"announces 2 points \(line 6\), found"):
            read(tmp_path, plot(rows, points="2"))
    with pytest.raises(DataFault, match="has no points"):
        read(tmp_path, plot([], points="0"))


@pytest.mark.parametrize("dialect", ["spaced", "streamed", "dense"])
@pytest.mark.parametrize("many", [1, 400])
def test_damage_names_the_line(tmp_path: Path, dialect: str, many: int) -> None:
    text = plot(ROWS * many, dialect=dialect)
    lines = text.splitlines()
    second = 12 + (4 if dialect == "spaced" else 3)
    cases = [
        ([*lines[:second], *lines[second + 1 :]], rf"a\.raw:{second + 2 + (dialect == 'spaced')}: "
         r"a new point begins while point 1 still lacks"),
        ([*lines[:second], "\tfailed", *lines[second + 1 :]],
         rf"a\.raw:{second + 1}: the value is missing for 'i\(vd\)': found 'failed'"),
        ([*lines[:second], "\t-1.5e-06x6", *lines[second + 1 :]],
         rf"a\.raw:{second + 1}: expected a number for 'i\(vd\)'"),
        ([*lines[:second], "\tnan", *lines[second + 1 :]], "the value is missing"),
        ([*lines[:second], lines[second], *lines[second:]], "has too many values"),
        ([*lines[: second - 1], lines[second - 1].replace("1", "5", 1), *lines[second:]],
         rf"a\.raw:{second}: expected point 1, found '5'"),
    ]  # fmt: skip
    if dialect == "streamed":
        cases.pop(0)
    for spoilt, message in cases:
        with pytest.raises(GmidError, match=message):
            read(tmp_path, "\n".join(spoilt) + "\n")


@pytest.mark.parametrize("many", [1, 400])
def test_truncation(tmp_path: Path, many: int) -> None:
    text = plot(ROWS * many, dialect="dense")
    with pytest.raises(GmidError, match="last point is incomplete"):
        read(tmp_path, text[: text.rstrip().rindex("\n") + 1])
    for cut in (1, 3):
        with pytest.raises(GmidError, match=r"inside a number|expected a number"):
            read(tmp_path, text.rstrip()[:-cut])
    assert read(tmp_path, text.rstrip())[0].rows == 3 * many
    with pytest.raises(DataFault, match="ends inside the header"):
        read(tmp_path, text[: text.index("Values:")])


def test_header_faults(tmp_path: Path) -> None:
    with pytest.raises(DataFault, match="expected 4 variables as announced, found 3"):
        read(tmp_path, plot(ROWS).replace("No. Variables: 3", "No. Variables: 4"))
    with pytest.raises(DataFault, match="expected a header line"):
        read(tmp_path, plot(ROWS).replace("Flags: real", "Flags: real\nrubbish"))


def test_binary_sibling(tmp_path: Path) -> None:
    file = tmp_path / "a.raw"
    head = plot([], points="3").replace("Values:", "Binary:").rstrip("\n") + "\n"
    real = head.encode() + np.array(ROWS, dtype="<f8").tobytes()
    pairs = np.array(ROWS) * (1 + 2j)
    both = real + head.replace("real", "complex").encode() + pairs.astype("<c16").tobytes()
    file.write_bytes(both)
    first, second = read_text(open_source(file, name="a.raw"))
    assert values(first) == values(read(tmp_path, plot(ROWS), name="b.raw")[0])
    assert values(second) == [list(column) for column in pairs.T]
    assert first.where(2) == "a.raw: point 2"
    for data, words in (
        (real[:-5], "found 67 bytes"),
        (real[:-8] + b"\0\0\0\0\0\0\xf8\x7f", "not finite at point 2"),
        (real + b"more", "expected a header line|no 'Values:' line"),
        (real.replace(b"real", b"real unpadded"), "unpadded"),
    ):  # fmt: skip
        file.write_bytes(data)
        with pytest.raises(DataFault, match=words):
            read_text(open_source(file, name="a.raw"))
    file.write_bytes(real.replace(b"No. Points: 3", b"No. Points: 0"))
    assert values(read_text(open_source(file, name="a.raw"))[0]) == values(first)


def test_long_plots_cross_segments(tmp_path: Path) -> None:
    rows = np.random.default_rng(3).normal(size=(90_000, 3)).tolist()
    text = plot(rows) + plot(rows[:50_000], dialect="streamed", title="next")
    first, second = read(tmp_path, text)
    assert values(first) == [list(column) for column in zip(*rows, strict=True)]
    assert values(second) == [list(column) for column in zip(*rows[:50_000], strict=True)]
    assert first.line_of(89_999) == 12 + 4 * 89_999
    assert second.line_of(0) == 12 + 4 * 90_000 + 11


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=30)
@given(
    st.lists(st.tuples(*[st.floats(allow_nan=False, allow_infinity=False)] * 3), min_size=1),
    st.sampled_from(["spaced", "streamed", "dense"]), st.sampled_from([1, 400]),
)  # fmt: skip
def test_numbers_survive_to_the_bit(
    tmp_path: Path, rows: list[tuple[float, ...]], dialect: str, many: int
) -> None:
    written = [list(row) for row in rows] * many
    (table,) = read(tmp_path, plot(written[:1200], dialect=dialect))
    for column, expected in zip(table.columns, zip(*written[:1200], strict=True), strict=True):
        assert column.values.tobytes() == np.array(expected).tobytes()
