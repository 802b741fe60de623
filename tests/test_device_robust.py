"""Data as they come: leakage floors, signs that change at vds = 0, noise, zeros, few points."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from builders import Grid, rows, square_law
from gmid.condition import Condition
from gmid.device import Device
from gmid.device.example import example_sweep
from gmid.sweep.model import Sweep, UnitTransistor

LENGTH, VDS, VSB = 1e-6, 0.6, 0.0


def with_values(sweep, **values):
    return replace(sweep, values={**sweep.values, **values})


def test_leakage_floor_does_not_ring():
    sweep = example_sweep()
    floor = 2e-10 * (1 + sweep.vds[:, None])
    device = Device(with_values(sweep, id=sweep["id"] + floor, gds=sweep["gds"] + 2e-10))
    vgs = np.linspace(-0.2, 2.0, 1500)
    current = device.at(length=LENGTH, vds=VDS, vgs=vgs).id
    clean = Device(sweep).at(length=LENGTH, vds=VDS, vgs=vgs).id + 2e-10 * (1 + VDS)
    np.testing.assert_allclose(current, clean, rtol=5e-3)
    assert np.all(np.diff(current) > -1e-3 * current[1:])


def test_gm_over_id_turns_over_in_leakage_and_the_upper_branch_is_taken():
    sweep = example_sweep()
    device = Device(with_values(sweep, id=sweep["id"] + 1e-9))
    vgs = np.linspace(-0.2, 2.0, 500)
    ratio = device.at(length=LENGTH, vds=VDS, vgs=vgs).gm_over_id
    turn = vgs[np.argmax(ratio)]
    assert -0.1 < turn < 0.5
    for target in (5.0, 10.0, 0.95 * ratio.max()):
        point = device.at(length=LENGTH, vds=VDS, gm_over_id=target)
        assert point.vgs > turn
        assert point.gm_over_id == pytest.approx(target, rel=1e-9)


def test_current_that_changes_its_sign_near_zero_vds():
    sweep = example_sweep()
    leak = -3e-11 * (1 + sweep.vgs) * np.exp(-sweep.vds[:, None] / 0.3)
    device = Device(with_values(sweep, id=sweep["id"] + leak))
    vds = np.linspace(0.0, 1.8, 200)
    off = device.at(length=LENGTH, vds=vds, vgs=0.0).id
    on = device.at(length=LENGTH, vds=vds, vgs=0.8).id
    assert np.all(np.isfinite(off))
    assert off[0] == pytest.approx(-3e-11, rel=1e-6)
    assert np.abs(off).max() < 1e-8
    clean = Device(sweep).at(length=LENGTH, vds=vds, vgs=0.8).id
    np.testing.assert_allclose(on, clean, atol=1e-4 * clean.max())


@pytest.mark.parametrize("seed", range(4))
def test_one_per_cent_of_noise_stays_one_per_cent(seed):
    sweep = example_sweep()
    random = np.random.default_rng(seed)
    noisy = {name: values * (1 + 0.01 * random.standard_normal(values.shape))
             for name, values in sweep.values.items()}  # fmt: skip
    device, clean = Device(with_values(sweep, **noisy)), Device(sweep)
    draws = np.random.default_rng(100 + seed)  # on the lines of vds: between them is a knee
    bias = {"length": np.exp(draws.uniform(np.log(0.5e-6), np.log(2e-6), 800)),
            "vgs": draws.uniform(0.2, 2.0, 800), "vds": draws.choice(sweep.vds[1:], 800),
            "vsb": draws.uniform(0.0, 1.0, 800)}  # fmt: skip
    found, true = device.at(**bias), clean.at(**bias)
    for name in ("id", "gm", "gds"):
        error = np.abs(getattr(found, name) / getattr(true, name) - 1)
        assert np.median(error) < 0.015, name
        assert np.quantile(error, 0.99) < 0.08, name
    back = device.at(gm_over_id=15, length=bias["length"], vds=bias["vds"], vsb=bias["vsb"])
    np.testing.assert_allclose(back.gm_over_id, 15, rtol=1e-9)


def test_noise_is_noted():
    sweep = example_sweep()
    bumps = 1 + 0.01 * np.random.default_rng(0).standard_normal(sweep.shape)
    assert "noisy" in Device(with_values(sweep, id=sweep["id"] * bumps)).notes[0]
    assert Device(sweep).notes == ()


def test_exact_zeros_below_threshold_and_square_law():
    grid = Grid()
    columns = rows(grid, square_law)
    axes = [np.array(axis) for axis in (grid.length, grid.vsb, grid.vds, grid.vgs)]
    shape = tuple(axis.size for axis in axes)
    values = {name: columns[name].reshape(shape) for name in ("id", "gm", "gds", "gmb")}
    sweep = Sweep("n", Condition("tt", 27.0), UnitTransistor("n", 2e-6), *axes, values)
    device = Device(sweep)
    point = device.at(length=0.3e-6, vds=1.8, vgs=np.linspace(0.6, 1.4, 30))
    over = point.vgs - 0.4
    np.testing.assert_allclose(point.id, 0.5 * 200e-6 * 2 / 0.3 * over**2, rtol=5e-3)
    off = device.at(length=0.3e-6, vds=1.8, vgs=np.linspace(-0.2, 0.3, 30))
    assert np.all(np.diff(off.id) >= 0)
    assert off.id[0] < 1e-12
    assert off.id[-1] < 1e-3 * point.id[0]
    assert np.all(np.isfinite(off.gm_over_id))
    found = device.at(length=0.3e-6, vds=1.8, gm_over_id=[2.5, 4.0, 6.0])
    np.testing.assert_allclose(found.vgs - 0.4, 2 / np.array([2.5, 4.0, 6.0]), rtol=4e-3)


@pytest.mark.parametrize("axis", ["length", "vsb", "vds", "vgs"])
def test_axis_of_one_point(axis):
    sweep = example_sweep()
    position = ("length", "vsb", "vds", "vgs").index(axis)
    keep = slice(8, 9) if axis in ("vds", "vgs") else slice(1, 2)
    cut = tuple(keep if place == position else slice(None) for place in range(4))
    values = {name: array[cut] for name, array in sweep.values.items()}
    part = replace(sweep, values=values, **{axis: getattr(sweep, axis)[keep]})
    bias = {"length": 1e-6, "vsb": 0.5, "vds": float(sweep.vds[8]), "vgs": 0.6}
    bias[axis] = float(getattr(sweep, axis)[keep][0])
    point = Device(part).at(**bias)
    assert point.id == pytest.approx(float(Device(sweep).at(**bias).id), rel=2e-3)
    assert np.isfinite(point.gm)


def test_two_points_of_vds_or_length():
    sweep = example_sweep(length=[0.5e-6, 2e-6])
    values = {name: array[:, :, [0, 8]] for name, array in sweep.values.items()}
    device = Device(replace(sweep, vds=sweep.vds[[0, 8]], values=values))
    point = device.at(length=1e-6, vds=0.6, gm_over_id=10)
    assert point.gm_over_id == pytest.approx(10, rel=1e-9)


def test_current_alone_is_enough():
    sweep = example_sweep()
    device = Device(replace(sweep, values={"id": sweep["id"]}))
    point = device.at(length=1e-6, vds=0.6, current_density=0.5)
    assert point.fields[6:] == ("id", "current_density", "normalized_current")
    assert point.id == pytest.approx(1e-6, rel=1e-9)


def test_gm_of_another_device_is_noted_and_kept():
    sweep = example_sweep()
    device = Device(with_values(sweep, gm=1.3 * sweep["gm"]))
    assert "gm is not the slope of id" in device.notes[0]
    point, clean = (d.at(length=1e-6, vds=0.6, vgs=0.7) for d in (device, Device(sweep)))
    assert point.gm == pytest.approx(1.3 * float(clean.gm), rel=1e-3)
