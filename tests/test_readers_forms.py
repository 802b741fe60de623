"""Forms that writers use now and then: bars, single quotes, logs before a header, parts."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import GmidError
from gmid.sweep.readers import print_listing, read_text, recognise
from gmid.sweep.source import open_bytes

NUMBERS = np.random.default_rng(5).normal(size=(4000, 4)) * 1e-6
RULER = "-" * 60 + "\n"


def tables_of(text, name="a.txt", **options):
    return read_text(open_bytes(text.encode(), name=name), **options)


@pytest.mark.parametrize(
    "text",
    [
        "vgs [V]|id (uA)\n0.5|1.25\n0.6|1.5\n",
        "| vgs [V] | id (uA) |\n|---------|---------|\n| 0.5 | 1.25 |\n| 0.6 | 1.5 |\n",
        "| vgs [V] | id (uA) |\n| --- | ---: |\n| 0.5 | 1.25 |\n| 0.6 | 1.5 |\n",
        "# made by hand\nvgs [V] | id (uA)\n0,5 | 1,25\n0,6 | 1,5\n",
    ],
)
def test_bars_between_columns(text):
    assert recognise(open_bytes(text.encode(), name="a.txt"))[0][0] == "csv"
    (table,) = tables_of(text)
    assert [(c.name, c.unit, c.values.tolist()) for c in table.columns] == [
        ("vgs", "V", [0.5, 0.6]),
        ("id", "uA", [1.25, 1.5]),
    ]
    row = next(n for n, line in enumerate(text.split("\n"), 1) if "5" in line)
    assert [table.line_of(k) for k in (0, 1)] == [row, row + 1]


def test_a_void_column_of_a_border_is_told():
    (table,) = tables_of("| vgs | id |\n| 0.5 | 1.25 |\n| 0.6 | 1.5 |\n")
    assert table.meta["dropped"] == "(column 1 holds no value)"
    with pytest.raises(GmidError, match="column 1 has no name"):
        tables_of("|vgs|id\n1|2|3\n4|5|6\n")


@pytest.mark.parametrize(
    ("head", "expected"),
    [
        ("'vgs [V]','Id, A'", [("vgs", "V"), ("Id", "A")]),
        ("'vgs' , id'", [("vgs", None), ("id'", None)]),
        ("# 'v(d)', '@m1[gm]'", [("v(d)", None), ("@m1[gm]", None)]),
    ],
)
def test_single_quotes_around_names(head, expected):
    (table,) = tables_of(f"{head}\n0.5,1.25\n0.6,1.5\n")
    assert [(column.name, column.unit) for column in table.columns] == expected
    assert table.columns[1].values.tolist() == [1.25, 1.5]


RAW = (
    "Title: t\nPlotname: dc\nFlags: real\nNo. Variables: 1\nNo. Points: 2\n"
    "Variables:\n\t0\tv(d)\tvoltage\nValues:\n 0\t0.5\n 1\t0.6\n"
)


def test_a_log_before_a_raw_header_is_left_out_and_told():
    log = "Note: 2 warnings\nDoing analysis at 27\n\n"
    (table,) = tables_of(log + RAW)
    assert table.columns[0].values.tolist() == [0.5, 0.6]
    assert table.line_of(1) == 13
    assert "2 lines of a log before the header were left out" in table.meta["note"]
    assert "note" not in tables_of("Date: today\n" + RAW)[0].meta
    for before in ("\t0.5\n 1\t0.6\n", "rubbish\nVariables:\n", " 7\t0.5\nlog of a run\n"):
        with pytest.raises(GmidError, match=r"a\.txt:\d+: "):
            tables_of(before + RAW, layout="spice-raw")


def part(names, numbers, title, *, page=None, first=0):
    rows = [
        f"{k}\t" + "\t".join(f"{v:.6e}" for v in row) + "\t\n"
        for k, row in enumerate(numbers, first)
    ]
    page = page or len(rows)
    head = f"   {title}\n   DC transfer characteristic\n{RULER}Index   {'  '.join(names)}\n{RULER}"
    return "".join(
        head + "".join(rows[at : at + page]) + "\n\f" for at in range(0, len(rows), page)
    )


def test_parts_without_the_scale_are_joined_by_title_and_index_and_told():
    first = part(["v-sweep", "id"], NUMBERS[:, :2], "nch")
    second = part(["gm", "gds"], NUMBERS[:, 2:], "nch")
    (table,) = tables_of(first + second)
    assert table.names == ["v-sweep", "id", "gm", "gds"]
    assert np.allclose([c.values for c in table.columns], NUMBERS.T, rtol=1e-6)
    assert "prints no scale; it is joined by its title and Index" in table.meta["note"]
    for other in (
        part(["gm", "gds"], NUMBERS[:, 2:], "another"),
        part(["gm", "gds"], NUMBERS[:-1, 2:], "nch"),
        part(["v-sweep", "id"], NUMBERS[:, 2:], "nch"),
    ):
        apart = tables_of(first + other)
        assert len(apart) == 2
        assert all("note" not in table.meta for table in apart)


def outcome(text):
    try:
        tables = tables_of(text, layout="print-listing")
    except GmidError as fault:
        return str(fault)
    return [
        (t.names, [c.values.tobytes() for c in t.columns], t.lines.tolist(), t.meta) for t in tables
    ]


PLAIN = part(["v-sweep", "id", "gm"], NUMBERS[:, :3], "nch", page=55)
LISTINGS = {
    "pages": PLAIN,
    "no ends": "log\n" + PLAIN.rstrip(),
    "carriage returns": PLAIN.replace("\n", "\r\n"),
    "indented": PLAIN.replace("\n", "\n "),
    "parts": PLAIN + part(["v-sweep", "gds"], NUMBERS[:, [0, 3]], "nch", page=55),
    "steps": "".join(part(["v-sweep", "id"], NUMBERS[k : k + 9, :2], "nch") for k in range(300)),
    "restarts": PLAIN.replace("\n1000\t", "\n0\t").split("\n1001\t")[0],
    "gap": PLAIN.replace("\n1000\t", "\n1001\t"),
    "doubled": PLAIN.replace("\n1000\t", "\n999\t"),
    "suffixes": PLAIN.replace("e-06", "u"),
    "some suffixes": PLAIN.replace("1e-06", "1u"),
    "complex": PLAIN.replace("1e-06\t", "1e-06,\t2e-7\t"),
    "missing": PLAIN.replace("3e-06\t\n500", "failed\t\n500"),
    "short rows": PLAIN.replace("1e-06\t\n", "\n"),
    "fractions": PLAIN.replace("\n1000\t", "\n1000.5\t"),
    "a word": PLAIN.replace("\n2000\t", "\nwarning: slow\n2000\t"),
    "a header amid": PLAIN.replace("\n2000\t", "\nIndex v-sweep x y\n2000\t"),
    "infinite": PLAIN.replace("1e-06\t", "1e999\t"),
}


@pytest.mark.parametrize("name", LISTINGS)
def test_rows_read_at_once_are_those_read_one_by_one(monkeypatch, name):
    found = outcome(LISTINGS[name])
    monkeypatch.setattr(print_listing, "_read_rows", lambda *_: None)
    assert found == outcome(LISTINGS[name])


def test_values_of_a_listing_are_those_written():
    (table,) = tables_of(PLAIN)
    written = [float(f"{v:.6e}") for v in NUMBERS[:, 1]]
    assert table.column("id").values.tolist() == written
    numbers = [n for n, line in enumerate(PLAIN.split("\n"), 1) if line[:1].isdigit()]
    assert table.lines.tolist() == numbers
