"""Bad sweeps and bad recipes: each is told with place, finding and advice; nothing is written."""

from __future__ import annotations

import numpy as np
import pytest

from builders import Grid, rows, write, write_csv, write_recipe
from gmid.errors import GmidError
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe

GRID = Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0, 0.6))


@pytest.fixture(autouse=True)
def _in_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)


def fault(recipe) -> str:
    with pytest.raises(GmidError) as caught:
        import_recipe(read_recipe(recipe.name))
    return str(caught.value)


def spoil(tmp_path, change, more="", **named):
    columns = {name: values.copy() for name, values in rows(GRID).items()}
    changed = change(columns)
    write_csv(tmp_path / "a.csv", changed if changed is not None else columns)
    return fault(write_recipe(tmp_path, "a.csv", more, **named))


def test_missing_points(tmp_path):
    message = spoil(tmp_path, lambda c: {n: np.delete(v, [7, 50]) for n, v in c.items()})
    assert "lacks 2 of the 1312 bias points" in message
    assert "L = 200 nm, vsb = 0 V, vds = 0 V, vgs = 150 mV" in message
    assert "a.csv" in message


def test_conflicting_duplicates(tmp_path):
    def twice(c):
        c = {n: np.append(v, v[100]) for n, v in c.items()}
        c["gm"][-1] *= 1.01
        return c

    message = spoil(tmp_path, twice)
    assert message.startswith("a.csv:1314: ")
    assert "a.csv:102" in message
    assert "gm disagrees" in message


@pytest.mark.parametrize("word", ["nan", "failed", "***"])
def test_not_a_number(tmp_path, word):
    path = write_csv(tmp_path / "a.csv", rows(GRID))
    lines = path.read_text().splitlines()
    cells = lines[41].split(",")
    lines[41] = ",".join([*cells[:4], word, *cells[5:]])
    write(path, "\n".join(lines))
    message = fault(write_recipe(tmp_path, "a.csv"))
    assert "a.csv:42" in message
    assert word in message


def test_row_with_a_field_missing(tmp_path):
    path = write_csv(tmp_path / "a.csv", rows(GRID))
    lines = path.read_text().splitlines()
    lines[117] = lines[117].rsplit(",", 1)[0]
    write(path, "\n".join(lines))
    message = fault(write_recipe(tmp_path, "a.csv"))
    assert message.startswith("a.csv:118: ")
    assert "8" in message
    assert "7" in message


def test_unit_a_thousand_off(tmp_path):
    def change(c):
        c["gm"] *= 1e-3

    message = spoil(tmp_path, change)
    assert "gm of nmos tt/27 is 0.001 times d id/d vgs" in message


def test_gm_above_the_bound(tmp_path):
    def change(c):
        c["gm"] *= 1.6

    assert "q/kT = 38.66 1/V at 27 C" in spoil(tmp_path, change)


def test_polarity_mix_up(tmp_path):
    def native(c):
        for name in ("vgs", "vds", "vsb", "id"):
            c[name] = -c[name]

    message = spoil(tmp_path, native)
    assert 'polarity = "p"' in message

    def from_the_supply(c):
        c["vgs"] = 1.6 - c["vgs"]

    assert "falls" in spoil(tmp_path, from_the_supply, polarity="p")


def test_bulk_source_instead_of_source_bulk(tmp_path):
    def change(c):
        c["vsb"] = -c["vsb"]

    assert 'write vsb = "-COLUMN"' in spoil(tmp_path, change)


def test_length_in_micrometres_without_saying_so(tmp_path):
    def change(c):
        c["length"] = c["length"] * 1e6

    assert 'unit = "um"' in spoil(tmp_path, change)


def test_current_falls_with_drain_voltage(tmp_path):
    def change(c):
        c["vds"] = 1.8 - c["vds"]

    assert "id of nmos tt/27" in spoil(tmp_path, change)


def test_negative_noise(tmp_path):
    def change(c):
        c["noise_flicker"] = np.full_like(c["id"], -1e-20)

    assert "noise_flicker of nmos tt/27 is negative" in spoil(tmp_path, change)


def test_nothing_conducts(tmp_path):
    def change(c):
        for name in ("id", "gm", "gds", "gmb"):
            c[name] *= 1e-9

    assert "conducts" in spoil(tmp_path, change)


@pytest.mark.parametrize(
    ("content", "words"),
    [(b"", "empty"), (b"\n \n", "blanks"), (b"\x00\x01\x02\x03" * 50, "binary"),
     (b"vgs,id\n", "no rows"), (b"Error: singular matrix\nrun aborted\n", "singular")],
)  # fmt: skip
def test_files_that_hold_no_table(tmp_path, content, words):
    (tmp_path / "a.csv").write_bytes(content)
    message = fault(write_recipe(tmp_path, "a.csv"))
    assert "a.csv" in message
    assert words.split()[0] in message


def test_truncated_raw(tmp_path):
    head = "Title: n\nPlotname: DC\nFlags: real\nNo. Variables: 2\nNo. Points: 3\nVariables:\n"
    head += "\t0\tvgs\tvoltage\n\t1\tid\tcurrent\nValues:\n 0\t0.0\n\t1.0\n\n 1\t0.5\n"
    write(tmp_path / "a.raw", head)
    message = fault(write_recipe(tmp_path, "a.raw"))
    assert "a.raw:" in message


RECIPES = {
    "unknown key": ('[sweep.axess]\nvgs = "x"', "axes"),
    "unknown axis": ('[sweep.axes]\nvg = "x"', "vgs"),
    "unknown quantity": ('[sweep.quantities]\ngmm = "x"', "gm"),
    "unknown column": ('[sweep.quantities]\ngm = "gmx"', "gm"),
    "two sources": ('[sweep.axes]\nvsb = { value = "0 V", column = "x" }', "exactly one"),
    "bad unit": ('[sweep.quantities]\ngm = { column = "gm", unit = "uA" }', "uA"),
    "bad pattern": ("[sweep.axes]\nlength = { from = 'name', pattern = '(' }", "pattern"),
    "no group": ("[sweep.axes]\nlength = { from = 'name', pattern = 'a' }", "group"),
    "no match": ("[sweep.axes]\nlength = { from = 'name', pattern = 'x(.)' }", "a.csv"),
    "unknown layout": ('layout = "csvv"', "csv"),
    "netlist": ('netlist = "M{name} {d} {g} {s} l={length}"', "{b}"),
    "placeholder": ('netlist = "M{nam} {d} {g} {s} {b} l={length} m={count}"', "{nam}"),
    "fingers": ("fingers = 0", "fingers"),
    "expression": ('[sweep.quantities]\ngm = "gm +"', "well-formed"),
}


@pytest.mark.parametrize("name", RECIPES)
def test_recipe_faults(tmp_path, name):
    more, words = RECIPES[name]
    write_csv(tmp_path / "a.csv", rows(GRID))
    message = fault(write_recipe(tmp_path, "a.csv", more))
    assert words in message
    assert message.startswith(("recipe.toml:", "a.csv"))


def test_all_faults_of_a_recipe_at_once(tmp_path):
    write_csv(tmp_path / "a.csv", rows(GRID))
    recipe = write_recipe(tmp_path, "b.csv", 'layot = "csv"\n[sweep.axes]\nvg = "x"')
    text = recipe.read_text().replace('width = "2 um"', 'width = "2"')
    recipe.write_text(text)
    message = fault(recipe)
    assert "layot" in message
    assert "layout" in message
    assert "vg" in message


def test_restart_list_that_does_not_divide(tmp_path):
    columns = rows(GRID)
    write_csv(tmp_path / "a.csv", {n: columns[n] for n in ("vgs", "id", "gm")})
    message = fault(
        write_recipe(
            tmp_path,
            "a.csv",
            """
[sweep.axes]
length = { value = "0.2 um" }
vsb = { value = 0 }
vds = { restart = "0:1.8:0.6" , unit = "V" }
quantities = {}
""".replace("quantities = {}\n", ""),
        )
    )
    assert "occurs twice" in message or "do not divide" in message


def test_no_axis_names_the_columns(tmp_path):
    columns = rows(GRID)
    columns.pop("vsb")
    write_csv(tmp_path / "a.csv", columns)
    message = fault(write_recipe(tmp_path, "a.csv"))
    assert "vsb" in message
    assert "Columns: length, vds, vgs" in message


def test_no_file(tmp_path):
    assert "no file matches 'zz_*.csv'" in fault(write_recipe(tmp_path, "zz_*.csv"))
