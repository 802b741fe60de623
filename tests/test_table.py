"""The table file: what goes in comes out, additions leave the rest alone, damage is told."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
import warnings
from dataclasses import replace

import h5py
import numpy as np
import pytest
import xarray

from builders import Grid, rows, write_csv, write_recipe
from gmid.condition import Condition
from gmid.errors import GmidError
from gmid.nomenclature import AXES, QUANTITIES
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe
from gmid.table.saving import save_sweeps
from gmid.table.table import open_grid_data

GRID = Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0, 0.6))


@pytest.fixture(scope="module")
def sweep(tmp_path_factory):
    folder = tmp_path_factory.mktemp("sweep")
    write_csv(folder / "a.csv", rows(GRID))
    return import_recipe(read_recipe(write_recipe(folder, "a.csv")))[0]


@pytest.fixture
def path(tmp_path, sweep):
    save_sweeps(tmp_path / "t.h5", [sweep], process="ash90")
    return tmp_path / "t.h5"


def test_round_trip_is_exact(path, sweep):
    stored = open_grid_data(path).sweep("nmos")
    assert stored.shape == sweep.shape
    assert list(stored.values) == list(sweep.values)
    for name in (*AXES, *sweep.values):
        one, two = (s.axes[name] if name in AXES else s[name] for s in (stored, sweep))
        np.testing.assert_array_equal(one, two)
    assert stored.unit == sweep.unit
    assert stored.derived == sweep.derived
    assert stored.provenance == sweep.provenance


def test_compact_numbers_keep_six_digits(tmp_path, sweep):
    save_sweeps(tmp_path / "c.h5", [sweep], process="ash90", compact=True)
    stored = open_grid_data(tmp_path / "c.h5").sweep("nmos")
    for name in sweep.values:
        np.testing.assert_allclose(stored[name], sweep[name], rtol=6.0e-8)


def test_units_and_names_come_from_the_nomenclature(path):
    with h5py.File(path) as root:
        group = root["nmos/tt/27"]
        for name in group:
            assert group[name].attrs["units"].decode() == (QUANTITIES[name].unit or "1")
            assert group[name].attrs["long_name"].decode() == QUANTITIES[name].meaning
        assert [d.keys()[0] for d in group["id"].dims] == list(AXES)


def test_other_software_opens_every_group_without_a_warning(path):
    with h5py.File(path) as root:
        groups: list[str] = ["/"]
        root.visititems(lambda n, o: groups.append(n) if isinstance(o, h5py.Group) else None)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        for group in groups:
            with xarray.open_dataset(path, engine="h5netcdf", group=group) as data:
                if group.endswith("tt/27"):
                    assert data["id"].dims == AXES
                    assert float(data["id"].sel(vds=0.4, vgs=0.5, vsb=0, length=0.2e-6)) > 0


def test_adding_leaves_what_is_there_alone(path, sweep):
    before = open_grid_data(path)
    other = replace(sweep, condition=Condition("ss", 125.0))
    low = replace(sweep, device="nmos_low", unit=replace(sweep.unit, width=1e-6))
    table = save_sweeps(path, [other, low], process="ash90", compact=True)
    assert table.devices == ["nmos", "nmos_low"]
    assert [str(c) for c in table.conditions("nmos")] == ["tt/27", "ss/125"]
    assert table.entries[0] == before.entries[0]
    assert table.digest != before.digest
    np.testing.assert_array_equal(table.sweep("nmos")["id"], sweep["id"])


def test_repeating_is_an_error_and_force_replaces(path, sweep):
    with pytest.raises(GmidError, match="already holds nmos tt/27"):
        save_sweeps(path, [sweep], process="ash90")
    other = replace(sweep, condition=Condition("ss", 125.0))
    save_sweeps(path, [other], process="ash90")
    doubled = replace(sweep, values={**sweep.values, "id": 2 * sweep["id"]})
    size = path.stat().st_size
    table = save_sweeps(path, [doubled], process="ash90", replace=True)
    np.testing.assert_array_equal(table.sweep("nmos")["id"], 2 * sweep["id"])
    np.testing.assert_array_equal(table.sweep("nmos", other.condition)["id"], sweep["id"])
    assert path.stat().st_size <= size


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"process": "other"}, "process 'ash90'"),
        ({"width": 1e-6}, "another unit transistor"),
        ({"nominal": True}, "two nominal conditions"),
    ],
)
def test_what_does_not_fit_is_refused(path, sweep, change, words):
    save_sweeps(path, [replace(sweep, nominal=True)], process="ash90", replace=True)
    other = replace(sweep, condition=Condition("ff", -40.0), nominal=bool(change.get("nominal")))
    if "width" in change:
        other = replace(other, unit=replace(other.unit, width=change["width"]))
    before = path.read_bytes()
    with pytest.raises(GmidError, match=words):
        save_sweeps(path, [other], process=change.get("process", "ash90"))
    assert path.read_bytes() == before


def test_nominal_is_the_marked_one_else_the_first(path, sweep):
    table = save_sweeps(path, [replace(sweep, condition=Condition("ff", 0.0), nominal=True)],
                        process="ash90")  # fmt: skip
    assert table.nominal("nmos") == Condition("ff", 0.0)
    assert table.find("nmos", corner="tt") == Condition("tt", 27.0)


@pytest.mark.parametrize(
    ("ask", "words"),
    [
        ({"device": "nmoss"}, "Did you mean nmos?"),
        ({"device": "nmos", "corner": "ttt"}, "Did you mean tt?"),
        ({"device": "nmos", "temperature": 85.0}, "tables at 27 C"),
    ],
)
def test_unknown_device_or_condition(path, ask, words):
    with pytest.raises(GmidError) as caught:
        open_grid_data(path).find(**ask)
    assert words in str(caught.value)


def test_not_a_table(tmp_path):
    (tmp_path / "a.h5").write_text("not at all")
    with pytest.raises(GmidError, match="damaged or not an HDF5 file"):
        open_grid_data(tmp_path / "a.h5")
    with h5py.File(tmp_path / "b.h5", "w") as root:
        root["x"] = 1
    with pytest.raises(GmidError, match="not a device table"):
        open_grid_data(tmp_path / "b.h5")
    with h5py.File(tmp_path / "c.h5", "w") as root:
        root.attrs["format"] = 99
    with pytest.raises(GmidError, match="format 99"):
        open_grid_data(tmp_path / "c.h5")


def everything(path):
    table = open_grid_data(path)
    found = []
    for entry in table.entries:
        stored = table.sweep(entry.device, entry.condition)
        found.append([*stored.axes.values(), *(stored[name] for name in stored.values)])
        found.append([str(stored.unit), str(stored.derived), str(entry), table.process])
    return found


def same(one, two):
    return all(
        np.array_equal(a, b)
        for x, y in zip(one, two, strict=True)
        for a, b in zip(x, y, strict=True)
    )


@pytest.mark.parametrize("compact", [False, True])
def test_damage_anywhere_is_an_error_never_a_wrong_answer(tmp_path, sweep, compact):
    small = Grid(length=(0.2e-6,), vsb=(0.0,), vds=(0.0, 0.1, 0.5, 1.0))
    write_csv(tmp_path / "a.csv", rows(small))
    some = import_recipe(read_recipe(write_recipe(tmp_path, "a.csv")))
    path = tmp_path / "t.h5"
    save_sweeps(path, some, process="ash90", compact=compact)
    whole = path.read_bytes()
    truth = everything(path)
    random = np.random.default_rng(5)
    wrong = tmp_path / "wrong.h5"
    seen = 0
    for place in random.integers(0, len(whole), 150).tolist():
        damaged = bytearray(whole)
        damaged[place] ^= 1 << int(random.integers(0, 8))
        wrong.write_bytes(damaged)
        try:
            found = everything(wrong)
        except GmidError:
            seen += 1
            continue
        assert same(found, truth), f"byte {place} changed an answer silently"
    assert seen > 20
    for size in random.integers(1, len(whole) - 1, 20).tolist():
        wrong.write_bytes(whole[:size])
        with pytest.raises(GmidError):
            everything(wrong)


def test_killed_import_leaves_the_old_table_whole(tmp_path, sweep):
    grid = Grid(length=tuple(np.round(np.linspace(0.2e-6, 2e-6, 20), 9)))
    write_csv(tmp_path / "a.csv", rows(grid))
    recipe = write_recipe(tmp_path, "a.csv", device="nmos_long")
    path = tmp_path / "t.h5"
    save_sweeps(path, [sweep], process="ash90")
    before = path.read_bytes()
    command = [sys.executable, "-m", "gmid", "import", str(recipe), "-o", str(path)]
    killed = 0
    for delay in (0.3, 0.8, 1.2, 1.6, 2.0):
        child = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        time.sleep(delay)
        if child.poll() is None:
            os.kill(child.pid, signal.SIGKILL)
            killed += 1
        child.wait()
        if path.read_bytes() != before:
            assert open_grid_data(path).devices == ["nmos", "nmos_long"]
            break
    assert killed
    assert everything(path)[0][0].size == sweep.length.size


def test_two_imports_into_one_table_at_once(tmp_path):
    for word in ("one", "two"):
        write_csv(tmp_path / f"{word}.csv", rows(GRID))
        write_recipe(tmp_path, f"{word}.csv", device=word, name=f"{word}.toml")
    path = tmp_path / "t.h5"
    children = [
        subprocess.Popen(
            [
                sys.executable,
                "-m",
                "gmid",
                "import",
                str(tmp_path / f"{word}.toml"),
                "-o",
                str(path),
            ],
            stdout=subprocess.DEVNULL,
            stderr=subprocess.PIPE,
        )
        for word in ("one", "two")
    ]
    for child in children:
        _, err = child.communicate(timeout=60)
        assert child.returncode == 0, err
    assert sorted(open_grid_data(path).devices) == ["one", "two"]
