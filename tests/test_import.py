"""From text and recipe to checked sweeps: values, signs, layouts of axes."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.constants

from builders import Grid, ekv, rows, square_law, write, write_csv, write_recipe
from gmid.condition import BOLTZMANN, ELEMENTARY_CHARGE, Condition
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe

COARSE = Grid(vgs=tuple(round(0.1 * i, 1) for i in range(-2, 19)))
SMALL = Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0, 0.6))


def load(recipe):
    return import_recipe(read_recipe(recipe))


def notes(sweep, level):
    return [text for kind, text in sweep.provenance["audit"] if kind == level]


def expected(grid, name, model=ekv):
    shape = tuple(len(axis) for axis in (grid.length, grid.vsb, grid.vds, grid.vgs))
    return rows(grid, model)[name].reshape(shape)


@pytest.mark.parametrize("model", [ekv, square_law])
def test_formula_sweeps_come_back_to_the_last_digit(tmp_path, model):
    # steps of 0.1 V: the square law's gm/id = 2/vov passes q/kT nearer to threshold
    write_csv(tmp_path / "a.csv", rows(COARSE, model))
    recipe = write_recipe(tmp_path, "a.csv", "[sweep.quantities]\nvdsat = { derived = true }")
    (sweep,) = load(recipe)
    for name in ("id", "gm", "gds", "gmb"):
        np.testing.assert_array_equal(sweep[name], expected(COARSE, name, model))
    assert sweep.axes["vgs"].tolist() == list(COARSE.vgs)


def test_constants_are_those_of_codata():
    assert scipy.constants.k == BOLTZMANN
    assert scipy.constants.e == ELEMENTARY_CHARGE
    # kT/q at 300 K: Enz, Krummenacher, Vittoz 1995 (from memory) give 25.852 mV
    assert Condition("tt", 26.85).thermal_voltage == pytest.approx(25.8520e-3, rel=1e-5)


def test_rows_in_any_order_and_twice(tmp_path):
    columns = rows(SMALL)
    order = np.random.default_rng(1).permutation(columns["id"].size)
    shuffled = {name: np.append(values[order], values[:3]) for name, values in columns.items()}
    write_csv(tmp_path / "a.csv", shuffled)
    (sweep,) = load(write_recipe(tmp_path, "a.csv"))
    np.testing.assert_array_equal(sweep["id"], expected(SMALL, "id"))
    assert any("twice" in text for text in notes(sweep, "read"))


def test_accumulated_axis_values_are_snapped(tmp_path):
    columns = rows(SMALL)
    columns["vgs"] = columns["vgs"] + np.where(np.arange(columns["vgs"].size) % 2, 1e-16, -1e-16)
    columns["vgs"] += 3e-17
    write_csv(tmp_path / "a.csv", columns)
    (sweep,) = load(write_recipe(tmp_path, "a.csv"))
    assert sweep.vgs.tolist() == list(SMALL.vgs)


def test_units_in_headers_and_expressions(tmp_path):
    columns = rows(SMALL)
    text = "L [um],bulk(V),vds[mV],vgs(V),id (uA),gm/uS,ro_kohm,gmb_S\n"
    with np.errstate(divide="ignore"):
        data = [columns["length"] * 1e6, -columns["vsb"], columns["vds"] * 1e3, columns["vgs"],
                columns["id"] * 1e6, columns["gm"] * 1e6,
                1e-3 / columns["gds"], columns["gmb"]]  # fmt: skip
    text += "\n".join(",".join(repr(float(v)) for v in row) for row in zip(*data, strict=True))
    write(tmp_path / "a.csv", text)
    recipe = write_recipe(
        tmp_path,
        "a.csv",
        """
[sweep.axes]
vsb = "-bulk"
[sweep.quantities]
gds = "1/ro"
""",
    )
    (sweep,) = load(recipe)
    for name in ("id", "gm", "gds", "gmb"):
        np.testing.assert_allclose(sweep[name], expected(SMALL, name), rtol=1e-14)
    assert any("uA" in text for text in notes(sweep, "converted"))


def test_p_channel_with_native_signs(tmp_path):
    columns = rows(SMALL)
    native = {name: -columns[name] if name in ("vgs", "vds", "vsb", "id") else columns[name]
              for name in columns}  # fmt: skip
    write_csv(tmp_path / "a.csv", native)
    (sweep,) = load(write_recipe(tmp_path, "a.csv", device="pmos", polarity="p"))
    np.testing.assert_array_equal(sweep["id"], expected(SMALL, "id"))
    assert sweep.vsb.tolist() == [0.0, 0.6]
    flipped = " ".join(notes(sweep, "flipped"))
    assert all(f"{name}:" in flipped for name in ("vgs", "vds", "vsb", "id"))


def test_current_into_the_source_is_flipped(tmp_path):
    columns = rows(SMALL)
    columns["i(vd)"] = -columns.pop("id")
    write_csv(tmp_path / "a.csv", columns)
    recipe = write_recipe(tmp_path, "a.csv", '[sweep.quantities]\nid = "i(vd)"')
    (sweep,) = load(recipe)
    assert notes(sweep, "flipped") == ["id: sign turned, so that it is positive when on."]


def test_capacitances_in_the_other_convention(tmp_path):
    columns = rows(SMALL)
    cox = 8e-3 * 2e-6 * columns["length"]
    for name, part in {"cgg": 1.0, "cgs": -0.6, "cgd": -0.3, "cgb": -0.1, "cdg": -0.3}.items():
        columns[name] = part * cox
    write_csv(tmp_path / "a.csv", columns)
    (sweep,) = load(write_recipe(tmp_path, "a.csv"))
    assert np.all(sweep["cgs"] > 0)
    assert np.all(sweep["cgg"] > 0)
    assert any("dQi/dVj" in text for text in notes(sweep, "flipped"))


def test_gate_capacitance_without_overlap_is_reported(tmp_path):
    columns = rows(SMALL)
    cox = 8e-3 * 2e-6 * columns["length"]
    for name, part in {"cgg": 0.7, "cgs": 0.6, "cgd": 0.3, "cgb": 0.1}.items():
        columns[name] = part * cox
    write_csv(tmp_path / "a.csv", columns)
    (sweep,) = load(write_recipe(tmp_path, "a.csv"))
    assert any("overlap" in text for text in notes(sweep, "doubtful"))


def test_length_from_file_names_and_restarting_axes(tmp_path):
    columns = rows(SMALL)
    for length, word in ((0.2e-6, "0p2"), (0.4e-6, "0p4")):
        keep = columns["length"] == length
        some = {name: columns[name][keep] for name in ("vgs", "id", "gm", "gds", "gmb")}
        write_csv(tmp_path / f"n_l{word}u.csv", some)
    recipe = write_recipe(
        tmp_path,
        "n_*.csv",
        """
[sweep.axes]
length = { from = "name", pattern = 'l([0-9p]+)u', unit = "um" }
vds = { restart = [0.0, 0.05, 0.1, 0.2, 0.4, 0.8, 1.2, 1.8] }
vsb = { restart = "0:600:600", unit = "mV", outside = "vds" }
""",
    )
    (sweep,) = load(recipe)
    np.testing.assert_array_equal(sweep["gm"], expected(SMALL, "gm"))


def test_conditions_from_file_names(tmp_path):
    for corner, degrees in (("tt", "27"), ("ss", "m40")):
        write_csv(tmp_path / f"n_{corner}_{degrees}.csv", rows(SMALL))
    recipe = tmp_path / "recipe.toml"
    write_recipe(tmp_path, "n_*.csv")
    text = recipe.read_text().replace(
        'corner = "tt"', """corner = { from = "name", pattern = 'n_([a-z]+)_' }"""
    )
    text = text.replace(
        'temperature = "27 C"', """temperature = { from = "name", pattern = '_(m?\\d+)\\.' }"""
    )
    recipe.write_text(text)
    # gm/id of a 27 C formula stays below q/kT at -40 C, so both import
    found = {str(sweep.condition) for sweep in load(recipe)}
    assert found == {"tt/27", "ss/-40"}


def test_rows_of_one_device_by_a_column_of_words(tmp_path):
    columns = rows(SMALL)
    names = [*columns, "device"]
    lines = [",".join(names)]
    for word, scale in (("big", 2.0), ("small", 1.0)):
        scaled = {n: v * scale if n in ("id", "gm", "gds", "gmb") else v
                  for n, v in columns.items()}  # fmt: skip
        lines += [",".join([*(repr(float(v)) for v in row), word])
                  for row in zip(*scaled.values(), strict=True)]  # fmt: skip
    write(tmp_path / "a.csv", "\n".join(lines))
    (sweep,) = load(write_recipe(tmp_path, "a.csv", 'rows = { device = "SMALL" }'))
    np.testing.assert_array_equal(sweep["id"], expected(SMALL, "id"))


def test_derived_conductances(tmp_path):
    grid = Grid(vsb=tuple(np.round(np.arange(0, 1.21, 0.2), 2)),
                vgs=tuple(np.round(np.arange(-0.2, 1.801, 0.025), 3)),
                vds=(0, .025, .05, .075, .1, .15, .2, .25, .3, .4, .5, .6, .75, .9, 1.1, 1.3, 1.5,
                     1.8))  # fmt: skip
    columns = rows(grid)
    write_csv(tmp_path / "a.csv", {n: columns[n] for n in ("length", "vsb", "vds", "vgs", "id")})
    (sweep,) = load(write_recipe(tmp_path, "a.csv"))
    assert set(sweep.derived) == {"gm", "gds", "gmb", "vdsat"}
    # away from the ends of the axes and above 1 nA, against the formula's own derivatives; the
    # knee of gds in weak inversion is narrower than the grid
    on = (expected(grid, "id") > 1e-9)[:, 1:-1, 2:-1, 2:-2]
    for name, worst in (("gm", 0.01), ("gds", 0.2), ("gmb", 0.01)):
        inner = (slice(None), slice(1, -1), slice(2, -1), slice(2, -2))
        error = np.abs(sweep[name][inner] / expected(grid, name)[inner] - 1)[on]
        assert np.median(error) < 2e-3, name
        assert np.quantile(error, 0.99) < worst, name
    edge = sweep["vdsat"][1, 0, 0]
    weak = np.searchsorted(grid.vgs, 0.25)
    # in weak inversion gds/gds0 = exp(-vds/UT): 15 % at 1.897 UT = 49 mV (closed form)
    assert edge[weak] == pytest.approx(0.0491, rel=0.05)
    assert np.all(np.diff(edge[weak:-4]) > -1e-6)


def test_missing_vsb_spread_leaves_gmb_out(tmp_path):
    columns = rows(Grid(vsb=(0.0,)))
    columns.pop("gmb")
    write_csv(tmp_path / "a.csv", columns)
    (sweep,) = load(write_recipe(tmp_path, "a.csv"))
    assert "gmb" not in sweep
    assert any("gmb is missing" in text for text in notes(sweep, "doubtful"))


def test_noise_in_amperes_per_root_hertz(tmp_path):
    columns = rows(SMALL)
    columns["sid"] = np.sqrt(4 * 1.38e-23 * 300 * 0.7 * columns["gm"] + 1e-30) * 1e12
    write_csv(tmp_path / "a.csv", columns)
    more = '[sweep.quantities]\nnoise_thermal = { column = "sid", unit = "pA/rtHz" }'
    (sweep,) = load(write_recipe(tmp_path, "a.csv", more))
    wanted = 4 * 1.38e-23 * 300 * 0.7 * expected(SMALL, "gm") + 1e-30
    np.testing.assert_allclose(sweep["noise_thermal"], wanted, rtol=1e-12)


@pytest.mark.parametrize("suffix", ["", ".gz"])
def test_plain_and_compressed_text_give_the_same(tmp_path, suffix):
    write_csv(tmp_path / f"a.csv{suffix}", rows(SMALL))
    (sweep,) = load(write_recipe(tmp_path, f"a.csv{suffix}"))
    np.testing.assert_array_equal(sweep["id"], expected(SMALL, "id"))
    assert sweep.provenance["sources"][0]["layout"] == "csv"


def test_headerless_columns_and_raw_give_the_same_as_csv(tmp_path):
    columns = rows(SMALL)
    data = list(zip(*columns.values(), strict=True))
    write(tmp_path / "a.txt", "\n".join(" ".join(repr(float(v)) for v in row) for row in data))
    names = ", ".join(f'"{name}"' for name in columns)
    (by_columns,) = load(write_recipe(tmp_path, "a.txt", f"columns = [{names}]"))
    head = "Title: n\nDate: x\nPlotname: DC\nFlags: real\n"
    head += f"No. Variables: {len(columns)}\nNo. Points: {len(data)}\nVariables:\n"
    head += "".join(f"\t{i}\t{name}\tnotype\n" for i, name in enumerate(columns))
    body = "".join(f" {i}\t" + "\n\t".join(repr(float(v)) for v in row) + "\n\n"
                   for i, row in enumerate(data))  # fmt: skip
    write(tmp_path / "a.raw", head + "Values:\n" + body)
    (by_raw,) = load(write_recipe(tmp_path, "a.raw"))
    for name in ("id", "gm", "gds", "gmb"):
        np.testing.assert_array_equal(by_columns[name], expected(SMALL, name))
        np.testing.assert_array_equal(by_raw[name], expected(SMALL, name))
