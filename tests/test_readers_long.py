"""Texts of many segments: lines stay exact whatever stands between the rows, nothing is lost."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import DataFault, GmidError
from gmid.sweep.readers import read_text
from gmid.sweep.readers.segments import read_frame
from gmid.sweep.source import open_bytes

ROWS = np.random.default_rng(11).normal(size=(90_000, 3)).tolist()
LINES = [f"{a:.9e},{b:.9e},{c:.9e}" for a, b, c in ROWS]
EXPECTED = [list(map(float, line.split(","))) for line in LINES]


def read(text, name="a.csv"):
    (table,) = read_text(open_bytes(text.encode() if isinstance(text, str) else text, name=name))
    return table


def spread(lines, places):
    """Put blank lines before some of the rows."""
    lines = list(lines)
    for place in sorted(places, reverse=True):
        lines.insert(place, "")
    return lines


@pytest.mark.parametrize("separator", [",", "\t", " "])
@pytest.mark.parametrize("places", [(), (60_000, 60_001, 89_000), (90_000, 90_000)])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
def test_lines_are_those_of_the_rows(separator, places, end):
    lines = spread(LINES, places)
    text = end.join(["vgs,id,gm", *lines, ""]).replace(",", separator)
    table = read(text)
    assert np.array_equal(np.array([column.values for column in table.columns]).T, EXPECTED)
    numbers = [number for number, line in enumerate(lines, 2) if line]
    assert [table.line_of(row) for row in range(0, 90_000, 777)] == numbers[::777]


def test_quoted_cells_far_inside():
    lines = [*LINES[:70_000], '"' + LINES[70_000].replace(",", '","') + '"', *LINES[70_001:]]
    table = read("\n".join(["vgs,id,gm", *lines]))
    assert table.columns[2].values.tolist() == [row[2] for row in EXPECTED]
    assert table.line_of(89_999) == 90_001


@pytest.mark.parametrize("count", [2, 4])
@pytest.mark.parametrize("separator", [",", " "])
def test_a_row_of_other_length_is_a_fault_wherever_it_stands(count, separator):
    for place in range(40_000, 40_040):
        words = [*LINES[place].split(","), "1.5"]
        lines = [*LINES[:place], ",".join(words[:count]), *LINES[place + 1 : 60_000]]
        if place % 20 == 0:
            with pytest.raises(GmidError, match=rf"a\.csv:{place + 2}: expected 3 columns"):
                read("\n".join(["vgs,id,gm", *lines]).replace(",", separator))
        segment = "\n".join(lines[place:]).replace(",", separator).encode()
        options = {"sep": r"\s+" if separator == " " else ",", "names": [0, 1, 2]}
        assert read_frame((segment,), dtype="float64", **options) is None


@pytest.mark.parametrize(
    ("encoding", "spoilt", "words"),
    [("utf-8", b"\0", "a NUL byte"), ("utf-16", b"\xff\xdf", "no valid UTF-16")],
)
def test_damage_behind_many_blocks_names_its_line(encoding, spoilt, words):
    text = "\n".join(["vgs,id,gm", *LINES, ""])
    data = bytearray(text.encode(encoding))
    wide = 2 if encoding == "utf-16" else 1
    at = text.index(LINES[85_000]) * wide + (2 if wide == 2 else 0)
    data[at : at + len(spoilt)] = spoilt
    with pytest.raises(DataFault, match=words) as caught:
        read(bytes(data))
    line = int(caught.value.where.split(":")[1])
    assert line == 85_002 if wide == 1 else 70_000 < line <= 85_002


def raw(rows, *, first=0, step=1):
    head = (
        "Title: t\nPlotname: dc\nFlags: real\nNo. Variables: 3\nNo. Points: "
        f"{len(rows)}\nVariables:\n\t0\tvgs\tvoltage\n\t1\tid\tcurrent\n\t2\tgm\tnotype\nValues:\n"
    )
    return head + "".join(
        f" {first + step * index}\t" + "\n\t".join(map(repr, row)) + "\n\n"
        for index, row in enumerate(rows)
    )


def test_a_plot_behind_a_long_one_has_its_own_lines():
    irregular = raw(ROWS[:30_000]).replace(f"\t{ROWS[20_000][1]!r}\n", "\t3u\n")
    for before in (raw(ROWS), irregular):
        text = before + raw(ROWS[:9]).replace("Flags", "rubbish\nFlags")
        line = before.count("\n") + 3
        with pytest.raises(DataFault, match=rf"a\.raw:{line}: expected a header line"):
            read_text(open_bytes(text.encode(), name="a.raw"))
    first, second = read_text(open_bytes((irregular + raw(ROWS)).encode(), name="a.raw"))
    assert first.columns[1].values[20_000] == 3e-6
    assert second.line_of(0) == irregular.count("\n") + 11
    assert second.columns[2].values.tolist() == [row[2] for row in ROWS]


def test_numbers_of_points_are_checked_in_long_plots():
    for rows, message in (
        (raw(ROWS[:60_000]).replace("\n 50000\t", "\n 50001\t"), "expected point 50000"),
        (raw(ROWS[:60_000], first=1), "expected point 0, found '1'"),
        (raw(ROWS[:60_000]).replace("\n 50000\t", "\n\t"), "too many values"),
    ):
        with pytest.raises(GmidError, match=message):
            read_text(open_bytes(rows.encode(), name="a.raw"))


def test_irregular_blank_lines_in_a_long_plot():
    text = raw(ROWS[:60_000]).replace("\n 50000\t", "\n\n\n 50000\t").replace("\n\n 7\t", "\n 7\t")
    (table,) = read_text(open_bytes(text.encode(), name="a.raw"))
    assert np.array_equal(np.array([c.values for c in table.columns]).T, ROWS[:60_000])
    lines = [number for number, line in enumerate(text.split("\n"), 1) if line.startswith(" ")]
    assert [table.line_of(row) for row in range(60_000)] == lines


@pytest.mark.parametrize("word", ["3e-6", "3u"])
@pytest.mark.parametrize("end", ["", "\n", "\n\n"])
def test_a_plot_that_ends_too_early_names_its_last_line(word, end):
    text = raw(ROWS[:2000]).replace("Points: 2000", "Points: 3000")
    text = text.replace(f"\t{ROWS[1000][1]!r}\n", f"\t{word}\n").rstrip() + end
    last = text.count("\n") + (end == "")
    with pytest.raises(DataFault, match=rf"a\.raw:{last}: the header announces 3000 points"):
        read_text(open_bytes(text.encode(), name="a.raw"))
