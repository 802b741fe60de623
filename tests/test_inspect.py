"""What is seen in a file without a recipe, and the recipe drafted from it."""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest

from builders import Grid, rows
from gmid.errors import GmidError
from gmid.sweep.drafting import count_questions, draft_recipe
from gmid.sweep.importing import import_recipe
from gmid.sweep.inspecting import Inspection, inspect_file, inspect_source
from gmid.sweep.recipe_file import read_recipe
from gmid.sweep.roles import Role, guess_role
from gmid.sweep.source import open_bytes
from gmid.sweep.texttable import Column
from layouts.writers import FOLDER

SAMPLES = FOLDER / "samples"
GRID = Grid(length=(0.18e-6, 0.36e-6), vsb=(0.0, 0.6), vds=(0.0, 0.3, 0.9, 1.8))
COLUMNS = rows(GRID)


def tidy(*, devices: tuple[str, ...] = ("nmos",), length_unit: str = "m") -> str:
    """A table in which every axis and every fact is a column."""
    heads = ["process", "device", "width [um]", "fingers", "corner", "temperature [C]"]
    lines = [",".join([*heads, *COLUMNS]).replace("length", f"length [{length_unit}]")]
    scale = 1e6 if length_unit == "um" else 1.0
    for device in devices:
        for k in range(COLUMNS["id"].size):
            values = [float(v[k]) * (scale if n == "length" else 1) for n, v in COLUMNS.items()]
            lines.append(",".join(["ash90", device, "2", "1", "tt", "27", *map(repr, values)]))
    return "\n".join(lines) + "\n"


def draft(folder: Path, *files: Path) -> str:
    return draft_recipe([inspect_file(file) for file in files], folder=folder)


@pytest.mark.parametrize("unit", ["m", "um"])
def test_a_tidy_file_imports_with_the_draft_unchanged(tmp_path: Path, unit: str) -> None:
    (tmp_path / "a.csv").write_text(tidy(length_unit=unit))
    text = draft(tmp_path, tmp_path / "a.csv")
    assert count_questions(text) == 0
    (tmp_path / "r.toml").write_text(text)
    (sweep,) = import_recipe(read_recipe(tmp_path / "r.toml"))
    assert (sweep.device, str(sweep.condition), sweep.unit.width) == ("nmos", "tt/27", 2e-6)
    np.testing.assert_array_equal(sweep["gm"].ravel(), COLUMNS["gm"])
    assert sweep.length == pytest.approx([0.18e-6, 0.36e-6], rel=1e-12)


def test_facts_in_comments_and_several_devices(tmp_path: Path) -> None:
    body = tidy().replace("process,device,", "x,y,")
    head = "# process=ash90 device=nmos width=2 um corner=ss temperature=-40 C\n"
    (tmp_path / "a.csv").write_text(head + body.replace("corner", "z").replace(
        "width [um],fingers", "p,q").replace("temperature [C]", "t"))  # fmt: skip
    found = tomllib.loads(draft(tmp_path, tmp_path / "a.csv"))
    (sweep,) = found["sweep"]
    assert found["table"]["process"] == "ash90"
    assert (sweep["device"], sweep["corner"], sweep["width"]) == ("nmos", "ss", "2.0 um")
    assert sweep["temperature"] == "-40.0 C"
    (tmp_path / "b.csv").write_text(tidy(devices=("n1", "n2")))
    found = tomllib.loads(draft(tmp_path, tmp_path / "b.csv"))
    assert [(s["device"], s["rows"]) for s in found["sweep"]] == [
        ("n1", {"device": "n1"}), ("n2", {"device": "n2"})
    ]  # fmt: skip


QUESTIONS = {
    "spice-raw/a.raw": {"device", "polarity", "width", "corner", "temperature", "vgs", "vds",
         "vsb"},
    "columns-bare/a.prn": {"columns", "device", "polarity", "width", "corner", "temperature"},
    "blocks-comments/a.txt": {"device", "polarity", "width"},
    "measured-blocks/dut_0.18.mdm": {"device", "polarity", "width", "corner", "temperature"},
    "stepped/a.txt": {"device", "polarity", "width", "corner", "temperature", "vds"},
    "spice-raw-parallel/a.raw": {"device", "polarity", "width", "corner", "temperature", "vgs",
                                 "vds", "vsb", "length", "id", "gm", "gds", "gmb"},
}  # fmt: skip


@pytest.mark.parametrize("name", QUESTIONS)
def test_what_is_not_certain_is_asked(name: str) -> None:
    text = draft(FOLDER, SAMPLES / name)
    asked = {line[2:].split("?")[0] for line in text.splitlines() if line.startswith("# ")
             and "?" in line and line[2:].split("?")[0].isidentifier()}  # fmt: skip
    assert asked == {"process"} | QUESTIONS[name]
    assert count_questions(text) == len(asked)
    assert tomllib.loads(text)["format"] == 1


def test_lengths_are_never_guessed(tmp_path: Path) -> None:
    seen = inspect_source(open_bytes(b"L,vgs,id\n0.18,0,1e-12\n0.18,1,1e-6\n", name="a.csv"))
    assert "# length?  in which unit is 'L' (from 0.18)?" in draft_recipe([seen], folder=tmp_path)
    seen = inspect_source(open_bytes(b"vgs,id\n0,1e-12\n1,1e-6\n", name="n_l0p18.csv"))
    assert "# length?  is it in um in the file's name?" in draft_recipe([seen], folder=tmp_path)
    seen = inspect_source(open_bytes(b"vgs,id\n0,1e-12\n1,1e-6\n", name="n_l0p18u.csv"))
    assert '\nlength = { from = "name"' in draft_recipe([seen], folder=tmp_path)


def test_restarts_ask_for_the_outer_axis(tmp_path: Path) -> None:
    seen = inspect_source(open_bytes(b"vgs,id\n0,1\n1,2\n0,1\n1,2\n0,1\n1,2\n", name="a.csv"))
    assert seen.groups[0].restarts == 3
    assert "# vds?  no column holds it, but the scale begins 3 times" in draft_recipe(
        [seen], folder=tmp_path
    )


def test_ratios_and_resistances(tmp_path: Path) -> None:
    seen = inspect_source(open_bytes(b"vgs,id,ro,gm/id,x\n0,1,2,3,4\n1,2,3,4,5\n", name="a.csv"))
    text = draft_recipe([seen], folder=tmp_path)
    assert "# gds?  is 'ro' an output resistance? then gds = \"1/ro\"" in text
    assert "# not imported, being derived: gm/id" in text


@pytest.mark.parametrize(
    ("name", "unit", "role"),
    [
        ("@m.x1.m1[gm]", None, Role("gm", device="m.x1.m1")),
        ("i(@m1[id])", "A", Role("id", device="m1")), ("m1.gm", None, Role("gm", device="m1")),
        ("M0:gds", "S", Role("gds", device="m0")), ("vbs", "V", Role("vsb", sign="-")),
        ("vd#branch", None, Role("id", sign="-")), ("v(g)", "V", Role("node g", certain=False)),
        ("gm/id", None, Role("ratio")), ("W", "um", Role("width", certain=False)),
        ("cgg", "F", Role("cgg")), ("whatever", None, Role()),
    ],
)  # fmt: skip
def test_roles(name: str, unit: str | None, role: Role) -> None:
    assert guess_role(Column(name, unit, np.ones(2))) == role


def test_confidence_and_forced_layout() -> None:
    found = inspect_file(SAMPLES / "print-listing" / "a.lis")
    assert found.layout == "print-listing"
    assert found.runner_up is not None
    assert found.runner_up[1] < found.confidence
    assert isinstance(inspect_file(SAMPLES / "stepped" / "a.txt", layout="stepped"), Inspection)
    with pytest.raises(GmidError, match=r"there is no plot|expected a header line"):
        inspect_file(SAMPLES / "stepped" / "a.txt", layout="spice-raw")
