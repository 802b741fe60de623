"""``gmid query`` as a user meets it, on an invented device of the EKV formulas."""

from __future__ import annotations

import csv
import io
import json
import math
import sys

import numpy as np
import pytest

import gmid as package
from builders import Grid, ekv
from gmid.cli.app import main
from gmid.condition import Condition
from gmid.sweep.model import Sweep, UnitTransistor
from gmid.table.saving import save_sweeps

GRID = Grid(length=(0.2e-6, 0.4e-6, 0.8e-6), vsb=(0.0, 0.6))
AXES = [np.array(getattr(GRID, name)) for name in ("length", "vsb", "vds", "vgs")]
WORDS = ["--length", "0.4u", "--vds", "0.8"]


def synthetic(name: str, corner: str, temperature: float, *, vt0: float = 0.42) -> Sweep:
    length, vsb, vds, vgs = np.meshgrid(*AXES, indexing="ij")
    values = dict(zip(("id", "gm", "gds", "gmb"), ekv(length, vsb, vds, vgs, vt0=vt0), strict=True))
    values["cgg"] = 5e-3 * 2e-6 * length
    condition = Condition(corner, temperature)
    return Sweep(name, condition, UnitTransistor("n", 2e-6), *AXES, values)


@pytest.fixture(scope="module")
def table(tmp_path_factory):
    path = tmp_path_factory.mktemp("query") / "t.h5"
    sweeps = [
        synthetic("nmos", "tt", 27.0),
        synthetic("nmos", "tt", 107.0, vt0=0.38),
        synthetic("nmos", "ss", 107.0, vt0=0.45),
    ]
    save_sweeps(path, sweeps, process="ash90")
    return path


def test_piped_columns(gmid, table):
    done = gmid("query", table, "nmos", *WORDS, "--vgs", "0.5,0.6", "--show", "id,gm,cgg")
    assert done.code == 0
    assert done.out.splitlines() == [
        "corner  T [C]  L [um]  W [um]  N  VGS [V]  VDS [V]  VSB [V]  ID [uA]  gm [uS]  Cgg [fF]",
        "tt         27     0.4       2  1      0.5      0.8        0    6.862    107.5         4",
        "tt         27     0.4       2  1      0.6      0.8        0    24.38    247.3         4",
    ]
    for vgs, id_, gm in ((0.5, 6.862e-6, 107.5e-6), (0.6, 24.38e-6, 247.3e-6)):
        expected = ekv(0.4e-6, 0.0, 0.8, vgs)
        assert id_ == pytest.approx(expected[0], rel=2e-4)
        assert gm == pytest.approx(expected[1], rel=5e-4)
    assert done.err.splitlines() == [
        "nmos: corner tt (nominal) and temperature 27 C (nominal) by default.",
        "vsb = 0 V by default.",
        "Values of one unit transistor, W = 2 um, by default.",
    ]


def test_json_is_the_documented_form(gmid, table):
    done = gmid("query", table, "nmos", *WORDS, "--gm-over-id", "15", "--id", "10u", "--json")
    assert list(done.json) == ["format", "device", "rows"]
    assert (done.json["format"], done.json["device"]) == (1, "nmos")
    (row,) = done.json["rows"]
    assert list(row) == [
        "corner", "temperature", "length", "width", "count", "vgs", "vds", "vsb", "id", "gm", "gds",
        "gmb", "gm_over_id", "current_density", "normalized_current", "intrinsic_gain", "ft", "cgg",
    ]  # fmt: skip
    assert row["id"] == pytest.approx(10e-6, rel=1e-12)
    assert row["gm_over_id"] == pytest.approx(15, rel=1e-9)
    assert row["current_density"] == pytest.approx(row["id"] / row["width"], rel=1e-12)
    assert row["normalized_current"] == pytest.approx(row["id"] * 0.4e-6 / row["width"], rel=1e-12)
    assert row["ft"] == pytest.approx(row["gm"] / (2 * math.pi * row["cgg"]), rel=1e-12)
    assert row["count"] == pytest.approx(row["width"] / 2e-6, rel=1e-12)
    truth = ekv(0.4e-6, 0.0, 0.8, row["vgs"], width=row["width"])
    assert [row[name] for name in ("id", "gm", "gds", "gmb")] == pytest.approx(truth, rel=2e-3)


def test_rows_come_in_the_stated_order_with_ranges_and_lists(gmid, table):
    done = gmid("query", table, "nmos", "--corner", "tt,ss", "--temp", "107", "--length",
                "0.2u,0.4u:0.8u:0.4u", "--vsb", "0,0.3", "--vds", "0.4,0.8", "--gm-over-id",
                "10:20:5", "--count", "1,4", "--csv")  # fmt: skip
    assert done.code == 0
    assert done.err == ""
    rows = list(csv.DictReader(io.StringIO(done.out)))
    keys = [
        (r["corner"], float(r["length"]), float(r["vsb"]), float(r["vds"]),
         round(float(r["gm_over_id"]), 6), float(r["count"]))
        for r in rows
    ]  # fmt: skip
    assert keys == [
        (corner, length, vsb, vds, drive, count)
        for corner in ("tt", "ss")
        for length in (0.2e-6, 0.4e-6, 0.8e-6)
        for vsb in (0.0, 0.3)
        for vds in (0.4, 0.8)
        for drive in (10.0, 15.0, 20.0)
        for count in (1.0, 4.0)
    ]


@pytest.mark.parametrize(
    ("words", "arguments", "scale"),
    [
        (["--gm-over-id", "5:25:5"], {"gm_over_id": [5.0, 10.0, 15.0, 20.0, 25.0]}, {}),
        (["--vgs", "0.3,0.7"], {"vgs": [0.3, 0.7]}, {"id": 10e-6}),
        (["--current-density", "1uA/um,20"], {"current_density": [1.0, 20.0]}, {"gm": 1e-3}),
        (["--id", "1u,20u", "--count", "3"], {"id": [1e-6, 20e-6], "count": 3}, {}),
        (["--id", "1u", "--width", "5u"], {"id": [1e-6], "width": 5e-6}, {}),
        (["--vgs", "0.5", "--vds", "diode"], {"vgs": [0.5], "vds": "diode"}, {"width": 3e-6}),
        (["--gm-over-id", "12", "--vds", "diode"], {"gm_over_id": [12.0], "vds": "diode"}, {}),
    ],
)
def test_terminal_and_python_agree(gmid, table, words, arguments, scale):
    words = [*words, *(["--vds", "0.55"] if "--vds" not in words else [])]
    words += [word for name, value in scale.items() for word in (f"--{name}", repr(value))]
    rows = gmid("query", table, "nmos", "--length", "0.31u", "--vsb", "0.2", *words, "--json")
    device = package.open_table(table).device("nmos", corner="tt", temperature=27)
    point = device.at(**({"length": 0.31e-6, "vsb": 0.2, "vds": 0.55} | arguments))
    answer = (point.scaled(**scale) if scale else point).to_dict()
    assert rows.code == 0, rows.err
    (drive,) = [name for name, value in arguments.items() if isinstance(value, list)]
    for index, row in enumerate(rows.json["rows"]):
        alone = device.at(**(
            {"length": 0.31e-6, "vsb": 0.2, "vds": 0.55}
            | arguments
            | {drive: arguments[drive][index]}
        ))  # fmt: skip
        alone = alone.scaled(**scale) if scale else alone
        numbers = {name: value for name, value in row.items() if name in alone.fields}
        assert numbers == pytest.approx(alone.to_dict(), rel=1e-12, abs=1e-30)
        for name, column in answer.items():
            expected = float(np.broadcast_to(column, point.shape)[index])
            assert row[name] == pytest.approx(expected, rel=1e-12, abs=1e-30), name


def test_a_temperature_between_tables_needs_the_flag(gmid, table):
    words = ["query", table, "nmos", *WORDS, "--vgs", "0.5", "--temp", "67", "--corner", "tt"]
    refused = gmid(*words)
    assert (refused.code, refused.out) == (1, "")
    assert "nmos has no table at tt/67. Take one of 27, 107 C" in refused.err
    done = gmid(*words, "--interpolate", "--json")
    assert "nmos tt/67: interpolated between 27 and 107 C." in done.err
    assert "interpolated between 27 and 107 C" in done.json["rows"][0]["notes"]
    assert "interpolated between 27 and 107 C" in gmid(*words, "--interpolate").out
    assert "interpolated between 27 and 107 C" in gmid(*words, "--interpolate", "--csv").out
    outside = gmid(*words[:-4], "--temp", "150", "--interpolate")
    assert (outside.code, outside.out) == (1, "")
    assert "covers 27 to 107 C" in outside.err


def test_conditions(gmid, table):
    words = ["query", table, "nmos", *WORDS, "--vgs", "0.5", "--show", "id", "--csv"]
    rows = list(csv.DictReader(io.StringIO(gmid(*words, "--condition", "all").out)))
    assert [(r["corner"], r["temperature"]) for r in rows] == [
        ("tt", "27.0"), ("tt", "107.0"), ("ss", "107.0"),
    ]  # fmt: skip
    assert list(rows[0]) == [
        "corner", "temperature", "length", "width", "count", "vgs", "vds", "vsb", "id",
    ]  # fmt: skip
    some = gmid(*words, "--condition", "ss/107,tt/27").out.splitlines()
    assert [line[:2] for line in some[1:]] == ["ss", "tt"]
    only = gmid(*words, "--corner", "ss")
    assert "temperature 107 C (the only one there) by default" in only.err
    missing = gmid(*words, "--corner", "tt,ss", "--temp", "27,107,150")
    assert (missing.code, missing.out) == (1, "")
    for place in ("ss/27", "tt/150", "ss/150"):
        assert f"has no table at {place}" in missing.err


def test_every_unreachable_combination_is_named(gmid, table):
    done = gmid("query", table, "nmos", "--length", "0.05u,0.2u,0.4u", "--vds", "0.8,2.5",
                "--gm-over-id", "10,40:50:1", "--vsb", "0,0.6")  # fmt: skip
    assert (done.code, done.out) == (1, "")
    assert "length = 50 nm is out of reach for nmos tt/27: the table covers" in done.err
    assert "vds = 2.5 V is out of reach" in done.err
    named = [line for line in done.err.splitlines() if "gm/Id = " in line]
    assert len(named) == len(set(named)) == 11 * 2 * 2
    assert "L = 400 nm, vds = 0.8 V, vsb = 0.6 V" in named[-1]
    assert "more of" not in done.err


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (["--vgs", "0.5", "--gm-over-id", "15"], 2, "one drive, not --gm-over-id and --vgs"),
        ([], 2, "exactly one drive, not none"),
        (["--id", "1u"], 2, "--id needs --count or --width"),
        (["--id", "1u", "--count", "2", "--width", "4u"], 2, "--id needs --count or --width"),
        (["--vgs", "0.5", "--id", "1u", "--gm", "1m"], 2, "not --id and --gm"),
        (["--vgs", "0.5", "--count", "0"], 2, "--count must be positive, not 0"),
        (["--vgs", "0.5", "--length", "1m"], 2, "--length: '1m' could be metres or millimetres"),
        (["--vgs", "0.5 A", "--vds", "x"], 2, "--vgs: expected a number in V, found '0.5 A'"),
        (["--vgs", "0:1:0.3"], 2, "'0:1:0.3' does not reach 1 in whole steps of 0.3"),
        (["--vgs", "0:1"], 2, "'0:1' is not a range"),
        (["--vgs", "0:1:0.000001"], 2, "means 1000001 values"),
        (["--vgs", "0:1:0.001", "--count", "1:200:1"], 2, "200200 combinations"),
        (["--vgs", "0.5", "--vds", "0.4,diode"], 2, "not a mixture"),
        (["--vgs", "0.5", "--vds", ""], 2, "--vds is empty"),
        (["--vgs", "0.5", "--json", "--csv"], 2, "exclude each other"),
        (["--vgs", "0.5", "--condition", "tt/27", "--temp", "27"], 2, "--condition already says"),
        (["--vgs", "0.5", "--condition", "tt"], 2, "'tt' is not a condition"),
        (["--vgs", "0.5", "--temp", "warm"], 2, "--temp: expected a number"),
        (["--vgs", "0.5", "--show", "gmm"], 1, "'gmm' is not a quantity. Did you mean gm?"),
        (["--vgs", "0.5", "--show", "vth"], 1, "the table has no vth for nmos tt/27"),
        (["--vgs", "0.5", "--corner", "st"], 1, "nmos has no corner 'st'"),
        (["--vgs", "0.5", "--vds", "0", "--id", "1u"], 1, "has no id to scale at L = 400 nm"),
        (["--vdsat", "0.2"], 1, "has no vdsat"),
        (["--vgs", "3"], 1, "vgs = 3 V is out of reach"),
        (["--vgs", "1.9", "--vds", "diode"], 1, "vds = 1.9 V is out of reach"),
        (["--id", "1", "--count", "1"], 1, "is out of reach for nmos tt/27 at L = 400 nm"),
    ],
)
def test_bad_input_is_told_in_words(gmid, table, words, code, message):
    given = [] if "--vds" in words else ["--vds", "0.8"]
    given += [] if "--length" in words else ["--length", "0.4u"]
    done = gmid("query", table, "nmos", *given, *words)
    assert (done.code, done.out) == (code, "")
    assert message in done.err


def test_wrong_tables_and_devices(gmid, table, tmp_path):
    words = [*WORDS, "--vgs", "0.5"]
    broken = tmp_path / "broken.h5"
    broken.write_bytes(table.read_bytes()[:5000])
    for path, name, message in (
        (table, "nmso", "there is no device 'nmso'. Did you mean nmos?"),
        (tmp_path / "none.h5", "nmos", "there is no such file"),
        (broken, "nmos", "broken.h5"),
    ):
        done = gmid("query", path, name, *words)
        assert (done.code, done.out) == (1, "")
        assert message in done.err
    assert gmid("query", table, "nmos", "--vgs", "0.5").code == 2


class Screen(io.StringIO):
    """A stdout that is a terminal."""

    def isatty(self):
        return True


@pytest.fixture
def screen(monkeypatch):
    def run(columns: int, *words: object) -> list[str]:
        out = Screen()
        with monkeypatch.context() as patch:
            patch.setenv("COLUMNS", str(columns))
            patch.setenv("TERM", "dumb")
            patch.setattr(sys, "argv", ["gmid", *map(str, words)])
            patch.setattr(sys, "stdout", out)
            patch.setattr(sys, "stderr", io.StringIO())
            with pytest.raises(SystemExit) as stop:
                main()
        assert stop.value.code == 0
        return out.getvalue().splitlines()

    return run


@pytest.mark.parametrize("columns", [46, 80, 240])
def test_a_narrow_window_shows_every_value(screen, table, columns):
    words = ["query", table, "nmos", *WORDS, "--vgs", "0.3:0.6:0.1", "--id", "10u"]
    lines = screen(columns, *words)
    assert " ".join(lines).startswith("nmos, tt, T 27 C, L 0.4 um, VDS 0.8 V, VSB 0 V, ID 10 uA")
    assert max(map(len, lines)) <= columns
    heads = [line for line in lines if line.lstrip().startswith("VGS")]
    assert len(heads) == {46: 4, 80: 2, 240: 1}[columns]
    text = " ".join(heads)
    for head in ("gm [uS]", "gds [nS]", "gm/ID [1/V]", "ID/W [uA/um]", "fT [GHz]", "Cgg [fF]"):
        assert head in text
    assert sum(line.split()[:1] == ["0.4"] for line in lines) == len(heads)


def test_one_row_on_a_terminal_is_a_list(screen, table):
    lines = screen(80, "query", table, "nmos", *WORDS, "--vgs", "0.5", "--count", "4")
    rows = {line.split()[0]: line for line in lines if line.strip()}
    assert rows["L"].split()[:3] == ["L", "0.4", "um"]
    assert rows["W"].split()[:3] == ["W", "8", "um"]
    assert "gate transconductance" in rows["gm"]


def test_not_finite_values_are_null(gmid, tmp_path):
    sweep = synthetic("nmos", "tt", 27.0)
    flat = Sweep(sweep.device, sweep.condition, sweep.unit, *AXES,
                 dict(sweep.values) | {"cgg": np.zeros(sweep.shape)})  # fmt: skip
    save_sweeps(tmp_path / "flat.h5", [flat], process="ash90")
    words = ["query", tmp_path / "flat.h5", "nmos", *WORDS, "--vgs", "0.5"]
    done = gmid(*words, "--json")
    assert done.json["rows"][0]["cgg"] == 0.0
    assert done.json["rows"][0]["ft"] is None
    assert json.loads(done.out)["format"] == 1
    assert " -" in gmid(*words, "--show", "ft").out
