"""``gmid chart`` as a user meets it, on the closed-form example device."""

from __future__ import annotations

import csv
import io
import xml.etree.ElementTree as ElementTree
from dataclasses import replace

import numpy as np
import pytest

from gmid.condition import Condition
from gmid.device.device import Device
from gmid.device.example import example_sweep
from gmid.errors import UsageFault
from gmid.nomenclature import QUANTITIES
from gmid.sheet.charts import Curve, draw_chart, split_families, trace_curve
from gmid.sheet.figures import COLOURS, DASHES, MARKERS, choose_style, drawing, save_figure
from gmid.table.saving import save_sweeps

UT = 1.380649e-23 * 300.15 / 1.602176634e-19


@pytest.fixture(scope="module")
def table(tmp_path_factory):
    path = tmp_path_factory.mktemp("chart") / "t.h5"
    sweep = example_sweep()
    sweeps = [
        sweep,
        replace(sweep, condition=Condition("ss", 107.0)),
        replace(sweep, device="pmos", unit=replace(sweep.unit, polarity="p")),
    ]
    save_sweeps(path, sweeps, process="ash90")
    return path


@pytest.fixture
def draw(gmid, table, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    return lambda *words: gmid("chart", table, "nmos", *words)


@pytest.mark.parametrize(
    ("kind", "head"), [("svg", b"<?xml"), ("png", b"\x89PNG"), ("pdf", b"%PDF")]
)
def test_kinds_of_files_and_the_same_bytes(draw, tmp_path, kind, head):
    words = ["--length", "0.5u,1u", "--vds", "0.6", "--show", "ft,cgg"]
    for name in ("a", "b"):
        done = draw(*words, "-o", f"{name}.{kind}")
        assert (done.code, done.out) == (0, "")
        assert done.err.splitlines()[-1] == f"{name}.{kind}: 2 curve(s) written."
    first, second = ((tmp_path / f"{name}.{kind}").read_bytes() for name in ("a", "b"))
    assert first.startswith(head)
    assert first == second
    for stamp in (b"dc:date", b"CreationDate", b"Matplotlib v"):
        assert stamp not in first
    if kind == "svg":
        ElementTree.fromstring(first.decode())


def test_defaults_are_said(draw):
    done = draw("-o", "a.svg", "--show", "ft")
    assert done.code == 0
    assert done.err.splitlines() == [
        "nmos: corner tt (nominal) and temperature 27 C (nominal) by default.",
        "length = 0.5, 1, 2 um by default, from the table of nmos.",
        "vds = 0.9 V by default, half the table's largest.",
        "vsb = 0 V by default.",
        "a.svg: 3 curve(s) written.",
    ]


def test_curves_as_numbers(draw):
    words = ["--length", "1u", "--vds", "0.6,diode", "--vsb", "0", "--show", "vgs,intrinsic_gain"]
    assert draw(*words, "-o", "a.svg").code == 2
    words[3] = "diode"
    done = draw(*words, "--condition", "tt/27,ss/107", "--against", "gm-over-id", "--json",
                "-o", "a.svg").json  # fmt: skip
    assert (done["format"], done["file"], done["against"]) == (1, "a.svg", "gm_over_id")
    assert [(c["corner"], c["temperature"]) for c in done["curves"]] == [
        ("tt", 27.0),
        ("ss", 107.0),
    ]
    curve = done["curves"][0]
    assert curve["vds"] == "diode"
    assert curve["vgs"] == sorted(curve["vgs"])
    assert max(curve["gm_over_id"]) < 1 / (1.3 * UT)
    text = draw("--length", "1u", "--vds", "0.6", "--show", "vgs", "--csv", "-o", "b.svg").out
    rows = list(csv.DictReader(io.StringIO(text)))
    assert len(rows) == 241
    assert float(rows[-1]["vgs"]) == 2.0
    assert draw("--json", "--csv", "-o", "c.svg").code == 2


def test_several_devices_and_conditions_in_one_figure(gmid, table, tmp_path):
    out = tmp_path / "a.svg"
    done = gmid("chart", table, "nmos", "pmos", "-o", out, "--length", "0.5u,2u", "--vds", "0.6",
                "--against", "vgs", "--show", "gm_over_id")  # fmt: skip
    assert done.code == 0
    assert done.err.endswith("4 curve(s) written.\n")
    assert gmid("chart", table, "nmos", "pmos", "-o", out, "--corner", "ss").code == 1


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (["-o", "a.jpg"], 2, "End the name in .svg, .pdf, .png."),
        (["-o", "a"], 2, "cannot be written to 'a'"),
        ([], 2, "--output"),
        (["-o", "a.svg", "--against", "id"], 2, "Give gm-over-id or vgs"),
        (["-o", "a.svg", "--length", "1m"], 2, "--length: '1m' could be metres or millimetres"),
        (["-o", "a.svg", "--show", "ftt"], 1, "'ftt' is not a quantity. Did you mean ft?"),
        (["-o", "a.svg", "--show", "gm_over_id"], 2, "nothing to draw against gm_over_id"),
        (["-o", "a.svg", "--corner", "ff"], 1, "nmos has no corner 'ff'"),
        (["-o", "a.svg", "--length", "0.5u:2u:0.1u"], 2, "cannot be told apart in one chart"),
        (["-o", "no/a.svg", "--length", "1u"], 1, "there is no directory no"),
    ],
)
def test_bad_input_is_told_in_words(draw, tmp_path, words, code, message):
    done = draw(*words)
    assert (done.code, done.out) == (code, "")
    assert message in done.err
    assert list(tmp_path.iterdir()) == []


def test_all_that_is_out_of_reach_is_named(draw, tmp_path):
    done = draw("-o", "a.svg", "--length", "0.1u,1u,5u", "--vds", "0.6,3")
    assert (done.code, done.out) == (1, "")
    for words in ("length = 100 nm is out", "length = 5 um is out", "vds = 3 V is out"):
        assert words in done.err
    assert list(tmp_path.iterdir()) == []


def test_nothing_is_overwritten_without_force(draw, tmp_path):
    (tmp_path / "a.svg").write_text("mine")
    words = ["-o", "a.svg", "--length", "1u", "--vds", "0.6", "--show", "ft"]
    refused = draw(*words)
    assert refused.code == 1
    assert "already exists. Give --force" in refused.err
    assert (tmp_path / "a.svg").read_text() == "mine"
    assert draw(*words, "--force").code == 0
    assert (tmp_path / "a.svg").read_text().startswith("<?xml")


def test_axes_bear_symbols_and_units():
    curve = trace_curve(Device(example_sweep()), length=1e-6, vds=0.6)
    with drawing():
        figure = draw_chart([curve])
    labels = [axes.get_ylabel() for axes in figure.axes if axes.axison]
    assert labels == [
        "$V_{GS}$ [V]", "$I_{D}$/$W$ [\N{MICRO SIGN}A/\N{MICRO SIGN}m]", "$f_{T}$ [GHz]",
        "$g_{m}$/$g_{ds}$ [-]", "$C_{gg}$/$W$ [fF/\N{MICRO SIGN}m]",
    ]  # fmt: skip
    assert {axes.get_xlabel() for axes in figure.axes if axes.axison} == {"$g_{m}$/$I_{D}$ [1/V]"}
    x, y = (np.asarray(data) for data in figure.axes[0].lines[0].get_data())
    assert np.all(np.diff(x) < 0)
    assert y[0] < 0.2
    assert y[-1] == 2.0


def test_every_quantity_has_an_axis():
    for name, quantity in QUANTITIES.items():
        values = {"vgs": np.array([0.1, 0.2]), "gm_over_id": np.array([20.0, 10.0])}
        values |= {name: np.array([1e-6, 2e-6])} if name not in values else {}
        curve = Curve("nmos", "tt/27", 1e-6, 0.6, 0.0, 2e-6, values)
        against = "gm_over_id" if name == "vgs" else "vgs"
        with drawing():
            figure = draw_chart([curve], quantities=[name], against=against)
        assert (quantity.unit or "-")[-1] in figure.axes[0].get_ylabel()
        with pytest.raises(UsageFault, match="nothing to draw"):
            draw_chart([curve], quantities=[against], against=against)


def test_curves_differ_in_grey():
    styles = [choose_style(index) for index in range(len(COLOURS))]
    assert len({style.marker for style in styles}) == len(MARKERS) == len(COLOURS)
    lightness = [sum(w * int(c[i : i + 2], 16) for i, w in ((1, 0.3), (3, 0.59), (5, 0.11)))
                 for c in COLOURS]  # fmt: skip
    assert min(np.abs(np.diff(lightness))) > 20
    pairs = {(choose_style(a, b).colour, str(choose_style(a, b).dash))
             for a in range(len(COLOURS)) for b in range(len(DASHES))}  # fmt: skip
    assert len(pairs) == len(COLOURS) * len(DASHES)


def test_families():
    def curve(length, condition):
        return Curve("nmos", condition, length, 0.6, 0.0, 2e-6, {})

    some = [curve(length, where) for where in ("tt/27", "ss/107") for length in (1e-6, 2e-6)]
    assert split_families(some, ["condition", "length"]) == [(0, 0), (1, 0), (0, 1), (1, 1)]
    many = [curve(1e-6, f"c{i}/27") for i in range(9)]
    with pytest.raises(UsageFault, match="9 curves of different condition"):
        split_families(many, ["condition"])


def test_unknown_kind_of_file():
    curve = trace_curve(Device(example_sweep()), length=1e-6, vds="diode", quantities=["ft"])
    with drawing(), pytest.raises(UsageFault, match="cannot be written as 'jpg'"):
        save_figure(draw_chart([curve], quantities=["ft"]), "jpg")
