"""``gmid import``, ``show``, ``new recipe`` as a user meets them."""

from __future__ import annotations

import csv
import io
import json
import tomllib

import pytest

from builders import Grid, rows, write_csv, write_recipe

GRID = Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0, 0.6))


@pytest.fixture(autouse=True)
def folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    write_csv(tmp_path / "a.csv", rows(GRID))
    write_recipe(tmp_path, "a.csv")
    return tmp_path


def test_import_and_show(gmid):
    done = gmid("import", "recipe.toml", "-o", "t.h5")
    assert (done.code, done.err) == (0, "t.h5: 1 sweep(s) stored, 1 in the table.\n")
    assert done.out.splitlines()[:3] == [
        "device  conditions  audit    note",
        "nmos    tt/27       read     1312 rows from 1 file(s), csv.",
        "nmos    tt/27       derived  "
        "vdsat: vds at which gds falls to 15% of its value at vds = 0.",
    ]
    shown = gmid("show", "t.h5")
    assert shown.code == 0
    assert shown.err == ""
    for words in ("Table of process ash90, t.h5", "n-channel  2 um", "0.2 0.4 um", "a.csv"):
        assert words in shown.out
    assert "derived  vdsat: vds" in gmid("show", "t.h5", "--audit").out


def test_machine_readable(gmid):
    done = gmid("import", "recipe.toml", "-o", "t.h5", "--json")
    assert done.json["format"] == 1
    assert done.json["audit"][0] == {"device": "nmos", "corner": "tt", "temperature": 27.0,
                                     "level": "read",
                                     "note": "1312 rows from 1 file(s), csv."}  # fmt: skip
    shown = gmid("show", "t.h5", "--json").json
    assert shown["digest"] == done.json["digest"]
    assert shown["sweeps"][0]["axes"]["vgs"] == list(GRID.vgs)
    assert shown["sweeps"][0]["sources"][0]["name"] == "a.csv"
    (row,) = csv.DictReader(io.StringIO(gmid("show", "t.h5", "--csv").out))
    assert row["device"] == "nmos"
    assert float(row["length_last"]) == 0.4e-6


def test_csv_without_a_recipe(gmid):
    words = ["--device", "nmos", "--polarity", "n", "--width", "2um", "--corner", "tt",
             "--temp", "27", "--process", "ash90"]  # fmt: skip
    assert gmid("import", "a.csv", "-o", "t.h5", *words).code == 0
    assert gmid("import", "a.csv", "-o", "u.h5", "--device", "x").code == 2
    bare = gmid("import", "a.csv", "-o", "u.h5", *words[2:])
    assert "--device must be given" in bare.err
    assert gmid("import", "recipe.toml", "-o", "u.h5", *words[:2]).code == 2


def test_second_import_needs_force(gmid, folder):
    gmid("import", "recipe.toml", "-o", "t.h5")
    before = (folder / "t.h5").read_bytes()
    again = gmid("import", "recipe.toml", "-o", "t.h5")
    assert again.code == 1
    assert again.out == ""
    assert "t.h5: already holds nmos tt/27. Give --force" in again.err
    assert (folder / "t.h5").read_bytes() == before
    assert gmid("import", "recipe.toml", "-o", "t.h5", "--force").code == 0


def test_faults_leave_nothing_behind(gmid, folder):
    (folder / "recipe.toml").write_text("format = 1\n[table]\nproces = 'x'\n")
    done = gmid("import", "recipe.toml", "-o", "t.h5")
    assert done.code == 1
    assert done.out == ""
    assert "recipe.toml:3: table.proces is not a known key. Did you mean process?" in done.err
    assert sorted(p.name for p in folder.iterdir()) == ["a.csv", "recipe.toml"]


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (["show", "none.h5"], 1, "none.h5: there is no such file."),
        (["show", "a.csv"], 1, "damaged or not an HDF5 file"),
        (["import", "none.toml", "-o", "t.h5"], 1, "none.toml: there is no such file."),
        (["import", "recipe.toml"], 2, "--output"),
        (["impot"], 2, "impot"),
        (["show", "--no-such-option"], 2, "--no-such-option"),
        (["import", "recipe.toml", "-o", "no/such/t.h5"], 1, "there is no directory"),
    ],
)
def test_usage_and_missing_files(gmid, words, code, message):
    done = gmid(*words)
    assert done.code == code
    assert done.out == ""
    assert message in done.err


def test_starter_recipe_is_valid_toml_and_never_overwrites(gmid, folder):
    printed = gmid("new", "recipe")
    data = tomllib.loads(printed.out)
    assert data["sweep"][0]["device"] == "nmos"
    assert gmid("new", "recipe", "-o", "mine.toml").code == 0
    assert (folder / "mine.toml").read_text() == printed.out
    assert gmid("new", "recipe", "-o", "mine.toml").code == 1
    assert gmid("new", "recipe", "-o", "mine.toml", "--force").code == 0


def test_starter_recipe_imports_the_file_it_describes(gmid, folder):
    columns = rows(GRID)
    names = {"length": "L", "vgs": "v(g)", "vds": "v(d)", "gm": "gm"}
    keep = columns["vsb"] == 0.0
    data = {new: columns[old][keep] * (1e6 if new in ("L", "gm") else 1)
            for old, new in names.items()}  # fmt: skip
    data["i(vd)"] = -columns["id"][keep]
    data["ro"] = 1 / columns["gds"][keep]
    write_csv(folder / "nmos_one.csv", data)
    gmid("new", "recipe", "-o", "mine.toml")
    done = gmid("import", "mine.toml", "-o", "t.h5")
    assert done.code == 0, done.err
    assert "converted  from uS: gm." in done.out


def test_help_of_every_command(gmid):
    top = gmid("--help")
    assert top.code == 0
    for name in ("import", "show", "new"):
        assert name in top.out
        assert "--help" in gmid(name, "--help").out
        if name != "new":
            assert f"Example: gmid {name}" in gmid(name, "--help").out
    assert json.loads(gmid("import", "recipe.toml", "-o", "t.h5", "--json").out)
