"""``gmid inspect``: screen, JSON, recipe, exit codes."""

from __future__ import annotations

from pathlib import Path

from layouts.writers import FOLDER

SAMPLES = FOLDER / "samples"

SCREEN = """\
a.csv: layout csv (confidence 0.80), utf-8
  1 table, 2 rows from line 2 on
  column  unit  kind  from   to  values  role
  vgs     V     real     0  0.5       2  vgs
  i(vd)   uA    real    -2   -1       2  -id
  w             real     2    2       1  width ?
"""


def test_screen(gmid, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    Path("a.csv").write_text("vgs [V],i(vd) [uA],w\n0,-1,2\n0.5,-2,2\n")
    run = gmid("inspect", "a.csv")
    assert (run.code, run.out, run.err) == (0, SCREEN, "")


def test_json(gmid):
    run = gmid("inspect", SAMPLES / "stepped" / "a.txt", SAMPLES / "spice-raw" / "a.raw", "--json")
    assert run.code == 0
    first, second = run.json["files"]
    assert (first["layout"], second["layout"]) == ("stepped", "spice-raw")
    (table,) = first["tables"]
    assert (table["count"], table["rows"]) == (16, 112)
    assert table["columns"][0] == {
        "name": "L", "unit": None, "kind": "real", "from": 1.8e-07, "to": 3.6e-07, "values": 2,
        "role": "length", "certain": True, "device": None,
    }  # fmt: skip


def test_recipe(gmid, tmp_path):
    target = tmp_path / "r.toml"
    sample = SAMPLES / "measurement"
    run = gmid("inspect", sample / "a.ms0", sample / "a.ms1", "--recipe", target)
    assert run.code == 0
    assert "question(s) are left open" in run.err
    assert target.read_text().count("[[sweep]]") == 1
    assert "a.ms1" in target.read_text()
    again = gmid("inspect", sample / "a.ms0", "--recipe", target)
    assert again.code == 1
    assert "--force" in again.err
    assert gmid("inspect", sample / "a.ms0", "--recipe", target, "--force").code == 0
    opened = gmid("import", target, "-o", tmp_path / "t.h5")
    assert opened.code == 1
    assert "device" in opened.err
    assert not (tmp_path / "t.h5").exists()


def test_broken_file_among_good_ones(gmid, tmp_path):
    (tmp_path / "bad.csv").write_text("a,b\n1,2\n3,x\n4,5\n")
    run = gmid("inspect", SAMPLES / "stepped" / "a.txt", tmp_path / "bad.csv", "--recipe",
               tmp_path / "r.toml")  # fmt: skip
    assert run.code == 1
    assert "layout stepped" in run.out
    assert "bad.csv:3: expected a number for 'b', found 'x'" in run.err
    assert not (tmp_path / "r.toml").exists()
    assert gmid("inspect", tmp_path / "none.csv").code == 1
