"""The same invented sweep through every layout gives the same table."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from builders import RECIPE
from gmid.sweep.importing import import_recipe
from gmid.sweep.readers import LAYOUTS, recognise
from gmid.sweep.recipe_file import read_recipe
from gmid.sweep.source import open_source
from layouts.writers import CASES, COLUMNS, FOLDER, GRID, NAMES

LAYOUT_OF = {name: "-".join(name.split("-")[:2]) for name in CASES} | {
    "csv-units": "csv", "csv-utf16": "csv", "csv-column-blocks": "csv", "columns-header": "columns",
    "columns-bare": "columns", "stepped": "stepped", "measurement": "measurement",
    "blocks-comments": "blocks", "blocks-zones": "blocks", "print-listing-hash": "print-listing",
    "spice-raw-binary": "spice-raw", "spice-raw-parallel": "spice-raw",
}  # fmt: skip


def samples(name: str) -> list[Path]:
    return sorted(path for path in (FOLDER / "samples" / name).rglob("*") if path.is_file())


@pytest.mark.parametrize("name", CASES)
def test_samples_are_those_the_writers_write(name: str) -> None:
    _, files = CASES[name]()
    folder = FOLDER / "samples" / name
    assert {
        path.relative_to(folder).as_posix(): path.read_bytes() for path in samples(name)
    } == files


@pytest.mark.parametrize("name", CASES)
def test_recognised(name: str) -> None:
    for path in samples(name):
        judged = recognise(open_source(path))
        assert judged[0][0] == LAYOUT_OF[name]
        assert judged[0][1] >= 0.5
        if len(judged) > 1:
            assert judged[1][1] < judged[0][1]


@pytest.mark.parametrize("name", CASES)
def test_same_table(tmp_path: Path, name: str) -> None:
    more, files = CASES[name]()
    folder = FOLDER / "samples" / name
    text = RECIPE.format(files="FILES", more=more, device="nmos", polarity="n", process="ash90")
    names = ", ".join(f"'{(folder / file).as_posix()}'" for file in files)
    (tmp_path / "r.toml").write_text(text.replace('"FILES"', f"[{names}]"), encoding="utf-8")
    (sweep,) = import_recipe(read_recipe(tmp_path / "r.toml"))
    for axis in ("length", "vsb", "vds", "vgs"):
        assert getattr(sweep, axis) == pytest.approx(getattr(GRID, axis), rel=1e-12, abs=1e-15)
    for quantity in NAMES:
        expected = COLUMNS[quantity].reshape(sweep.shape)
        np.testing.assert_allclose(sweep[quantity], expected, rtol=3e-15, atol=0)
    assert {source["layout"] for source in sweep.provenance["sources"]} == {LAYOUT_OF[name]}
    assert len(sweep.provenance["sources"]) == len(files)


def test_every_layout_has_a_case() -> None:
    assert set(LAYOUT_OF.values()) == set(LAYOUTS)
