"""The shipped table is what the shipped text gives."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe
from gmid.table.table import open_grid_data

ROOT = Path(__file__).resolve().parents[1]


@pytest.fixture(scope="module")
def table():
    return open_grid_data(ROOT / "tables" / "larch180.h5")


def test_importing_the_text_gives_the_shipped_table(table):
    imported = import_recipe(read_recipe(ROOT / "demo" / "larch180" / "larch180.toml"))
    sweeps = {(sweep.device, sweep.condition): sweep for sweep in imported}
    held = {(name, condition) for name in table.devices for condition in table.conditions(name)}
    assert set(sweeps) == held
    assert len(held) == 21
    for (device, condition), sweep in sweeps.items():
        stored = table.sweep(device, condition)
        assert set(stored.values) == set(sweep.values)
        assert stored.unit == sweep.unit
        for axis in ("length", "vsb", "vds", "vgs"):
            np.testing.assert_array_equal(getattr(stored, axis), getattr(sweep, axis))
        for name, values in sweep.values.items():
            # The table is compact: stored in single precision, rounding once.
            compact = values.astype(np.float32).astype(np.float64)
            np.testing.assert_array_equal(stored.values[name], compact, err_msg=name)


def test_the_demo_process_is_plausible(table):
    """Common practice for a 180 nm class: 28 to 33 1/V in weak inversion, gain 25 to 200."""
    for device in ("nmos", "pmos"):
        sweep = table.sweep(device)
        efficiency = sweep.values["gm"] / np.maximum(sweep.values["id"], 1e-18)
        at = int(np.argmin(abs(sweep.vds - 0.9)))
        assert 26 < efficiency[:, 0, at].max() < 34
        gain = sweep.values["gm"][:, 0, at] / sweep.values["gds"][:, 0, at]
        gain = gain[np.arange(len(gain)), np.argmin(abs(efficiency[:, 0, at] - 15), axis=1)]
        assert 15 < gain[0] < gain[-1] < 400


def test_shipped_files_stay_small():
    """At most 15 MB of compressed text, and of table."""
    text = sum(path.stat().st_size for path in (ROOT / "demo" / "larch180" / "sweeps").iterdir())
    assert text <= 15e6
    assert (ROOT / "tables" / "larch180.h5").stat().st_size <= 15e6
