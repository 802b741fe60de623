"""Legitimate texts of many origins, each with a habit of its own, written by hand."""

from __future__ import annotations

import numpy as np
import pytest

from builders import Grid, rows, write_recipe
from gmid.errors import GmidError
from gmid.sweep.importing import import_recipe
from gmid.sweep.readers import read_text
from gmid.sweep.recipe_file import read_recipe
from gmid.sweep.source import open_bytes

RAW = (
    "Title:\nFlags: real forward\nCommand: none\nOption: x=1\nNo. Variables: 2\nNo. Points: 0\n"
    "Variables: 0 vgs voltage grid=3\n 1 @m.x1.m1[gm] admittance\nValues:\n"
    "0  0.0\n   1D-6\n1  1.0\n   2D-6\n"
)
TRACE = (
    'HEADER\n"PSFversion" "1.1"\n"simulator" "x y"\nTYPE\n  "V" FLOAT DOUBLE PROP( "units" "V" )\n'
    'SWEEP\n  "vgs" "V"\nTRACE\n  "g0" GROUP 2\n  "d" "V"\n  "M0:gm" "V"\nVALUE\n'
    '  "vgs"\t0\n  "g0" 0.9\n1e-6\n  "vgs"\t1\n  "g0" 0.8\n2e-6\nEND\n'
)
ZONES = 'TITLE = "x"\nVARIABLES = "vgs"\n"gm"\nZONE T="L=180n", I=2\n0 1e-6\n1 2e-6\n'
VGS, GM = [0.0, 1.0], [1e-6, 2e-6]

TEXTS = {
    "csv that names its separator": ("csv", "sep=;\nvgs;gm\n0;1e-6\n1;2e-6\n"),
    "csv below pairs of words": ("csv", "Device,nch\nversion,1.0\n\nvgs,gm\n0,1e-6\n1,2e-6\n"),
    "csv with a date column": (
        "csv", "at,vgs,gm\n2026-03-03 10:00:00,0,1e-6\n2026-03-03 10:00:01,1,2e-6\n"
    ),
    "csv with rows of empty fields": ("csv", "vgs,gm\n0,1e-6\n,\n1,2e-6\n,\n"),
    "csv with a void column": ("csv", "vgs,gmb,gm\n0,nan,1e-6\n1,N/A,2e-6\n"),
    "csv with an empty last column": ("csv", "vgs,gm,note\n0,1e-6,\n1,2e-6,\n"),
    "csv that ends in control-Z": ("csv", "vgs,gm\r\n0,1e-6\r\n1,2e-6\r\n\x1a"),
    "csv with words in quotes": ("csv", '"vgs (V)";"gm (S)"\n"0,0";"1,0E-6"\n"1,0";"2,0E-6"\n'),
    "columns below a ruler": ("columns", "vgs      gm\n-------- ----\n0 1e-6\n1 2e-6\n"),
    "columns with names in quotes": ("columns", '"vgs" "gm"\n0 1e-6\n1 2e-6\n'),
    "columns below starred comments": ("columns", "* sweep\n* vgs gm\n0 1e-6\n1 2e-6\n"),
    "columns in Fortran without letters": ("columns", "vgs gm\n0.0 0.01-004\n1.0 2.0D-06\n"),
    "raw with blanks for TABs and unsaid points": ("spice-raw", RAW),
    "trace text indented, grouped, on one line": ("typed-trace", TRACE),
    "zones with names on two lines": ("blocks", ZONES),
    "blocks of comma rows": ("blocks", "# VDS=0.3\nvgs,gm\n0,1e-6\n1,2e-6\n# VDS=1\n0,1\n1,2\n"),
    "blocks with names between semicolons": (
        "blocks", "# VDS=0.3\n# vgs;gm\n0;1e-6\n1;2e-6\n# VDS=1\n# vgs;gm\n0;1\n1;2\n"
    ),
    "blocks below starred comments": (
        "blocks", "* L=0.18u VDS=0.3\n* vgs gm\n0 1e-6\n1 2e-6\n* L=0.18u VDS=1\n* vgs gm\n0 1\n"
    ),
    "measurement in lower case": (
        "measurement", "$data1 source='sim'\n.title 't'\n index vgs gm alter#\n"
        "1 0 1e-6 1\n2 1 2e-6 1\n"
    ),
    "step information in lower case": (
        "stepped", "vgs\tgm\nstep information: L = 180n  (Run: 1/1)\n0\t1e-6\n1\t2e-6\n"
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", TEXTS)
@pytest.mark.parametrize("end", ["\n", "\r\n"])
def test_a_text_reads_as_it_is_meant(name, end):
    layout, text = TEXTS[name]
    data = text.replace("\r\n", "\n").replace("\n", end).encode()
    table = read_text(open_bytes(data, name="a.txt"))[0]
    names = {column.name.rsplit(".")[-1].removeprefix("m1[").removeprefix("M0:").rstrip("]"):
             column.values.tolist() for column in table.columns}  # fmt: skip
    assert (table.layout, names["vgs"], names["gm"]) == (layout, VGS, GM)
    assert not any("gmb" in name or "note" in name for name in table.names)


def test_a_hash_before_which_blanks_stand():
    text = b" #     v(d)   id(m1)\n 0.1 10.3u 206.u\n 0.2 -1.2m-3.4u\n"
    table = read_text(open_bytes(text, name="a.lis"))[0]
    assert table.layout == "print-listing"
    assert table.column("id(m1)").values.tolist() == [206e-6, -3.4e-6]


@pytest.mark.parametrize("word", ["device", "element"])
def test_devices_side_by_side_with_their_models(word):
    text = (
        f"A model\n {word}  m1   m2\n model  nch  nch\n   id  10.3u  206.u\n   gm  52.u  66u\n"
        f"\n {word}  m1   m2\n model  nch  nch\n   id  11.3u  207.u\n   gm  53.u  67u\n"
    )
    table = read_text(open_bytes(text.encode(), name="a.txt"))[0]
    assert table.names == ["@m1[id]", "@m2[id]", "@m1[gm]", "@m2[gm]"]
    assert table.column("@m2[gm]").values.tolist() == [66e-6, 67e-6]


def test_a_column_void_at_first_and_not_later_is_a_fault():
    lines = ["vgs,gm,x", *(f"{i},1e-6,nan" for i in range(80)), "80,1e-6,5", "81,1e-6,nan"]
    text = "\n".join(lines).encode()
    with pytest.raises(GmidError, match=r"a\.csv:82: 'x' is '5' here and missing on the rows"):
        read_text(open_bytes(text, name="a.csv"))


def test_the_audit_tells_what_a_reader_left_out_or_took_in_one_way(tmp_path):
    columns = rows(Grid(length=(0.2e-6,), vsb=(0.0,)))
    columns["gmb"] = np.full(columns["vgs"].size, np.nan)
    lines = [",".join([*columns, "area"])]
    lines += [",".join([*(f"{v:.17g}" for v in row), "3M"])
              for row in zip(*columns.values(), strict=True)]  # fmt: skip
    (tmp_path / "a.csv").write_text("\n".join(lines) + "\n")
    (sweep,) = import_recipe(read_recipe(write_recipe(tmp_path, "a.csv")))
    audit = sweep.provenance["audit"]
    assert ["read", "left out: gmb (column 8 holds no value)."] in audit
    assert any(level == "doubtful" and "'3M' is read as 3e+06" in text for level, text in audit)
    assert "gmb" not in sweep
    assert any("gmb is missing and cannot be derived" in text for _, text in audit)
