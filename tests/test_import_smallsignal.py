"""Capacitances and conductances from AC runs, noise from spectra, joined to the DC sweep."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from builders import Grid, rows, write, write_csv, write_recipe
from gmid.errors import GmidError
from gmid.sweep.importing import import_recipe
from gmid.sweep.model import Sweep
from gmid.sweep.recipe_file import read_recipe
from gmid.sweep.spectra import fit_noise

GRID = Grid(length=(0.36e-6,), vsb=(0.0,), vds=(0.3, 0.9), vgs=(0.0, 0.4, 0.8, 1.2))
COLUMNS = rows(GRID)
SIZE = COLUMNS["id"].size
CAPS = {
    name: 1e-15 * (k + 1) * (1 + COLUMNS["vgs"])
    for k, name in enumerate(("cgg", "cdg", "cgd", "cdd"))
}
THERMAL = 2e-23 * (0.01 + COLUMNS["vgs"])
FLICKER = 4e-18 * (0.01 + COLUMNS["vgs"])
FREQUENCIES = (1e5, 1e6, 1e7)


def ac_plot(k: int, driven: str) -> str:
    """An operating point, then currents into the sources of gate and drain, one of them driven."""
    bias = "Title: n\nPlotname: Operating Point\nFlags: real\nNo. Variables: 2\nNo. Points: 1\n"
    bias += "Variables:\n\t0\tv(g)\tvoltage\n\t1\tv(d)\tvoltage\nValues:\n"
    bias += f" 0\t{COLUMNS['vgs'][k]:.16e}\n\t{COLUMNS['vds'][k]:.16e}\n\n"
    head = f"Title: {driven} driven\nPlotname: AC Analysis\nFlags: complex\nNo. Variables: 3\n"
    head += f"No. Points: {len(FREQUENCIES)}\nVariables:\n\t0\tfrequency\tfrequency\n"
    head += "\t1\ti(vg)\tcurrent\n\t2\ti(vd)\tcurrent\nValues:\n"
    lines = []
    for index, frequency in enumerate(FREQUENCIES):
        omega = 2 * np.pi * frequency
        if driven == "gate":
            gate = 1j * omega * CAPS["cgg"][k]
            drain = COLUMNS["gm"][k] - 1j * omega * CAPS["cdg"][k]
        else:
            gate = -1j * omega * CAPS["cgd"][k]
            drain = COLUMNS["gds"][k] + 1j * omega * CAPS["cdd"][k]
        words = [
            f"{frequency:.16e},0.0",
            *(f"{-v.real:.16e},{-v.imag:.16e}" for v in (gate, drain)),
        ]
        lines.append(f" {index}\t" + "\n\t".join(words) + "\n")
    return bias + head + "\n".join(lines) + "\n"


AC = """
[[sweep]]
files = "ac.raw"
device = "nmos"
polarity = "n"
width = "2 um"
plots = "{driven} driven"
frequency = "1 MHz"
[sweep.axes]
vgs = {{ preceding = "v(g)" }}
vds = {{ preceding = "v(d)" }}
vsb = {{ value = "0 V" }}
length = {{ value = "0.36 um" }}
[sweep.quantities]
"""
GATE = AC.format(driven="gate") + (
    'cgg = { admittance = "-i(vg)" }\ncdg = { admittance = "-i(vd)" }\n'
    'gm = { admittance = "-i(vd)" }\n'
)
DRAIN = AC.format(driven="drain") + (
    'cgd = { admittance = "-i(vg)" }\ncdd = { admittance = "-i(vd)" }\n'
    'gds = { admittance = "-i(vd)" }\n'
)
NOISE = """
[[sweep]]
files = "noise.csv"
device = "nmos"
polarity = "n"
width = "2 um"
[sweep.quantities]
noise_thermal = {{ spectrum = "onoise", {unit} }}
noise_flicker = {{ spectrum = "onoise", {unit} }}
"""


def folder_with(folder: Path, *, unit: str = 'unit = "A/rtHz"', scale: float = 1.0,
                square: bool = False, extra: float = 0.0) -> Path:  # fmt: skip
    write_csv(folder / "dc.csv", {n: COLUMNS[n] for n in ("length", "vsb", "vds", "vgs", "id")})
    order = [3, 1, 0, 2, 7, 4, 5, 6]
    write(folder / "ac.raw", "".join(ac_plot(k, d) for k in order for d in ("gate", "drain")))
    lines = ["length,vsb,vds,vgs,frequency [kHz],onoise"]
    for k in order:
        for frequency in (1.0, 1e3, 1e6, 1e9):
            density = THERMAL[k] + FLICKER[k] / frequency + extra * THERMAL[k] * (frequency == 1e6)
            value = (density if square else np.sqrt(density)) * scale
            words = [COLUMNS[n][k] for n in ("length", "vsb", "vds", "vgs")]
            lines.append(",".join(map(repr, map(float, [*words, frequency / 1e3, value]))))
    write(folder / "noise.csv", "\n".join(lines) + "\n")
    return write_recipe(folder, "dc.csv", GATE + DRAIN + NOISE.format(unit=unit))


def run(recipe: Path) -> Sweep:
    (sweep,) = import_recipe(read_recipe(recipe))
    return sweep


def test_admittances_and_spectra_join_the_current(tmp_path: Path) -> None:
    sweep = run(folder_with(tmp_path))
    for name in ("id", "gm", "gds"):
        np.testing.assert_allclose(sweep[name].ravel(), COLUMNS[name], rtol=1e-12)
    for name, values in CAPS.items():
        np.testing.assert_allclose(sweep[name].ravel(), values, rtol=1e-9)
    np.testing.assert_allclose(sweep["noise_thermal"].ravel(), THERMAL, rtol=1e-9)
    np.testing.assert_allclose(sweep["noise_flicker"].ravel(), FLICKER, rtol=1e-9)
    assert [source["name"] for source in sweep.provenance["sources"]] == [
        "dc.csv", "ac.raw", "noise.csv"
    ]  # fmt: skip
    assert any("fitted to spectra, worst deviation 0.0%" in text
               for _, text in sweep.provenance["audit"])  # fmt: skip


@pytest.mark.parametrize(
    ("unit", "scale", "square"),
    [('unit = "A^2/Hz"', 1.0, True), ('unit = "V/rtHz", resistance = "1 kohm"', 1e3, False),
     ('unit = "V^2/Hz", resistance = "1 kohm"', 1e6, True)],
)  # fmt: skip
def test_units_of_spectra(tmp_path: Path, unit: str, scale: float, square: bool) -> None:
    sweep = run(folder_with(tmp_path, unit=unit, scale=scale, square=square))
    np.testing.assert_allclose(sweep["noise_thermal"].ravel(), THERMAL, rtol=1e-9)
    np.testing.assert_allclose(sweep["noise_flicker"].ravel(), FLICKER, rtol=1e-9)


def test_a_spectrum_of_other_shape_is_doubtful(tmp_path: Path) -> None:
    sweep = run(folder_with(tmp_path, extra=1.0))
    assert any(level == "doubtful" and "fitted" in text
               for level, text in sweep.provenance["audit"])  # fmt: skip


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('frequency = "1 MHz"', "", r"3 frequencies from 100 kHz to 10 MHz.*Say which one"),
        ('frequency = "1 MHz"', 'frequency = "2 MHz"',
             r"no rows at 2 MHz; the nearest are at 1 MHz"),
        ('cgg = { admittance = "-i(vg)" }', 'cgg = "-i(vg)"',
             r"'-i\(vg\)' is complex in .*admittance"),
        ('plots = "gate driven"', 'plots = "body driven"',
             r"no plot or title matches.*gate driven"),
        ('plots = "drain driven"', 'plots = "driven"', r"occurs twice and gds disagrees"),
        ('cgg = { admittance = "-i(vg)" }', 'vth = { admittance = "-i(vg)" }',
             "cannot be read from"),
        ('unit = "A/rtHz"', 'unit = "A"', "a spectrum needs its unit. One of A/rtHz"),
        ('unit = "A/rtHz"', 'unit = "V/rtHz"', "needs the resistance"),
        ('{ preceding = "v(g)" }', '{ preceding = "v(x)" }', r"there is no column 'v\(x\)'"),
    ],
)  # fmt: skip
def test_faults(tmp_path: Path, old: str, new: str, words: str) -> None:
    recipe = folder_with(tmp_path)
    text = recipe.read_text()
    assert old in text
    recipe.write_text(text.replace(old, new))
    with pytest.raises(GmidError, match=f"(?s){words}"):
        run(recipe)


def test_missing_points_of_a_joined_quantity(tmp_path: Path) -> None:
    recipe = folder_with(tmp_path)
    text = (tmp_path / "noise.csv").read_text().splitlines()
    (tmp_path / "noise.csv").write_text("\n".join(text[:1] + text[5:]) + "\n")
    with pytest.raises(GmidError, match=r"noise_thermal, noise_flicker of nmos tt/27: 1 of 8 bias"):
        run(recipe)


def test_conditions_and_devices_from_columns(tmp_path: Path) -> None:
    columns = {n: COLUMNS[n] for n in ("length", "vsb", "vds", "vgs", "id", "gm")}
    lines = [",".join(["device", "corner", "T [C]", *columns])]
    for device, corner, degrees in (("n1", "tt", 27), ("n1", "ss", -40), ("n2", "tt", 27)):
        for k in range(SIZE):
            lines.append(",".join([device, corner, str(degrees),
                                   *(repr(float(v[k])) for v in columns.values())]))  # fmt: skip
    write(tmp_path / "a.csv", "\n".join(lines) + "\n")
    recipe = write_recipe(tmp_path, "a.csv", 'rows = { device = "n1" }')
    text = recipe.read_text().replace('corner = "tt"', 'corner = { column = "corner" }')
    recipe.write_text(text.replace('temperature = "27 C"', 'temperature = { column = "T" }'))
    sweeps = import_recipe(read_recipe(recipe))
    assert [str(sweep.condition) for sweep in sweeps] == ["tt/27", "ss/-40"]
    np.testing.assert_array_equal(sweeps[1]["id"].ravel(), COLUMNS["id"])


def test_fit_of_pure_spectra() -> None:
    f = np.array([1.0, 10.0, 100.0])
    assert fit_noise(f, np.full(3, 2e-24))[:2] == pytest.approx((2e-24, 0.0), abs=1e-36)
    thermal, flicker, error = fit_noise(f, 1e-20 / f)
    assert (thermal, flicker) == pytest.approx((0.0, 1e-20), rel=1e-9, abs=1e-30)
    assert error < 1e-9
    assert np.isinf(fit_noise(f[:1], f[:1])[2])
    assert np.isinf(fit_noise(f, -f)[2])
