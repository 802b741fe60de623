"""``--figures`` of ``gmid import`` and ``gmid show``."""

from __future__ import annotations

import xml.etree.ElementTree as ET

import pytest

from builders import Grid, rows, write_csv, write_recipe

GRID = Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0,))


@pytest.fixture(autouse=True)
def folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    write_csv(tmp_path / "a.csv", rows(GRID))
    write_recipe(tmp_path, "a.csv")
    return tmp_path


def cut(folder):
    """Take three points out of the sweep."""
    lines = (folder / "a.csv").read_text().splitlines()
    (folder / "a.csv").write_text("\n".join(lines[:50] + lines[53:]) + "\n")


def test_an_import_draws_what_it_read(gmid, folder):
    done = gmid("import", "recipe.toml", "-o", "t.h5", "--figures", "audit")
    assert done.code == 0
    assert "audit: 1 figure(s) written. No grid lacks a point" in done.err
    (file,) = (folder / "audit").iterdir()
    assert file.name == "gm_nmos_tt_27.svg"
    assert ET.parse(file).getroot().tag.endswith("svg")
    shown = gmid("show", "t.h5", "--figures", "again")
    assert shown.code == 0
    assert "again: 1 figure(s) written." in shown.err
    assert (folder / "again" / file.name).read_bytes() == file.read_bytes()


def test_a_failed_import_maps_what_is_missing(gmid, folder):
    cut(folder)
    done = gmid("import", "recipe.toml", "-o", "t.h5", "--figures", "audit")
    assert (done.code, done.out) == (1, "")
    assert "nmos tt/27 lacks 3 of the 656 bias points" in done.err
    assert "audit: 1 figure(s) written. 1 of missing points." in done.err
    assert [file.name for file in (folder / "audit").iterdir()] == ["missing_nmos_tt_27.svg"]
    assert not (folder / "t.h5").exists()
    again = gmid("import", "recipe.toml", "-o", "t.h5", "--figures", "audit")
    assert again.code == 1
    assert "lacks 3 of the 656" in again.err
    assert "missing_nmos_tt_27.svg: already exists. Give --force" in again.err


def test_figures_there_are_kept_and_no_table_is_written(gmid, folder):
    (folder / "audit").mkdir()
    (folder / "audit" / "gm_nmos_tt_27.svg").write_text("mine")
    words = ["import", "recipe.toml", "-o", "t.h5", "--figures", "audit"]
    done = gmid(*words)
    assert (done.code, done.out) == (1, "")
    assert "already exists" in done.err
    assert not (folder / "t.h5").exists()
    assert (folder / "audit" / "gm_nmos_tt_27.svg").read_text() == "mine"
    assert gmid(*words, "--force").code == 0
    assert (folder / "audit" / "gm_nmos_tt_27.svg").read_text() != "mine"


def test_an_import_that_finds_no_grid_draws_nothing(gmid, folder):
    (folder / "a.csv").write_text("length,vsb,vds,vgs,idx\n1e-6,0,1,1,1\n1e-6,0,1,0.5,1\n")
    done = gmid("import", "recipe.toml", "-o", "t.h5", "--figures", "audit")
    assert done.code == 1
    assert "audit: no figure" in done.err
    assert not (folder / "audit").exists()


def test_the_audit_of_a_table_tells_each_note_once(gmid, folder):
    gmid("import", "recipe.toml", "-o", "t.h5")
    recipe = folder / "recipe.toml"
    recipe.write_text(recipe.read_text().replace('"27 C"', '"28 C"'))
    assert gmid("import", "recipe.toml", "-o", "t.h5").code == 0
    told = gmid("show", "t.h5", "--audit").out.split("\nAudit\n")[1]
    assert told.count("656 rows from 1 file(s)") == 1
    assert "nmos    tt/27 tt/28  read " in told
