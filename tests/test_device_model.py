"""The model a circuit's solver uses: exact derivatives, continuation, exchange of terminals."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from builders import Grid, ekv, rows
from gmid.condition import Condition
from gmid.device import Device
from gmid.device.example import example_sweep
from gmid.sweep.model import Sweep, UnitTransistor

NINE = ("cgg", "cgd", "cgs", "cdg", "cdd", "cds", "csg", "csd", "css")


@pytest.fixture(scope="module")
def device():
    sweep = example_sweep()
    cgg = sweep["cgg"]
    shares = (1.0, 0.2, 0.7, 0.3, 0.4, -0.02, 0.6, 0.1, 0.8)
    parts = {name: share * cgg for name, share in zip(NINE, shares, strict=True)}
    return Device(replace(sweep, values={**sweep.values, **parts}))


@pytest.fixture(scope="module")
def points():
    random = np.random.default_rng(4)
    return (random.uniform(-0.5, 2.3, 400), random.uniform(-1.0, 2.2, 400),
            random.uniform(0.0, 1.2, 400), random.integers(0, 2, 400))  # fmt: skip


def test_derivatives_are_those_of_the_current(device, points):
    model = device.model([0.7e-6, 1e-6])
    vgs, vds, vsb, which = points
    current, *slopes, _ = model.current_and_derivatives(*points)
    step = 1e-6
    for slope, (g, d, s) in zip(slopes, np.eye(3) * step, strict=True):
        after = model.current_and_derivatives(vgs + g, vds + d, vsb + s, which)[0]
        before = model.current_and_derivatives(vgs - g, vds - d, vsb - s, which)[0]
        measured = (after - before) / (2 * step)
        scale = np.abs(current) * 40 + np.abs(slope) + 1e-12
        assert np.quantile(np.abs(measured - slope) / scale, 0.97) < 1e-4


def test_model_agrees_with_queries(device):
    random = np.random.default_rng(5)
    vgs, vds, vsb = (random.uniform(low, high, 50) for low, high in ((0, 2), (0, 1.8), (0, 1)))
    current, *_, inside = device.model(0.8e-6).current_and_derivatives(vgs, vds, vsb)
    point = device.at(length=0.8e-6, vgs=vgs, vds=vds, vsb=vsb)
    np.testing.assert_allclose(current, point.id, rtol=1e-11)
    assert inside.all()
    small = device.model(0.8e-6).small_signal(vgs, vds, vsb)
    for name in ("gm", "gds", "gmb", "noise_thermal", "noise_flicker"):
        np.testing.assert_allclose(getattr(small, name), getattr(point, name), rtol=1e-11)
    np.testing.assert_allclose(small.capacitance[:, 1, 0], -point.cdg, rtol=1e-11)


def test_capacitance_rows_and_columns_sum_to_zero(device):
    matrix = device.model(1e-6).small_signal(0.8, [0.5, -0.5], 0.6).capacitance
    assert matrix.shape == (2, 4, 4)
    size = np.abs(matrix).max()
    assert np.abs(matrix.sum(axis=-1)).max() < 1e-12 * size
    assert np.abs(matrix.sum(axis=-2)).max() < 1e-12 * size


def test_drain_and_source_change_places(device):
    model = device.model(1e-6)
    forward = model.current_and_derivatives(0.9, 0.3, 0.2)[0]
    backward = model.current_and_derivatives(0.6, -0.3, 0.5)[0]
    assert backward == pytest.approx(-forward, rel=1e-12)
    one, other = model.small_signal(0.9, 0.3, 0.2), model.small_signal(0.6, -0.3, 0.5)
    np.testing.assert_allclose(other.capacitance[1, 1], one.capacitance[2, 2], rtol=1e-12)
    assert other.noise_thermal == pytest.approx(one.noise_thermal, rel=1e-12)


def test_outside_the_table_is_said_and_smooth(device):
    model = device.model(1e-6)
    inside = model.current_and_derivatives([1.0, 1.0, 1.0, 3.0], [0.5, 2.5, 0.5, 0.5],
                                           [0.0, 0.0, 1.5, 0.0])[4]  # fmt: skip
    assert inside.tolist() == [True, False, False, False]
    near = model.current_and_derivatives([1.9999, 2.0001], 1.0, 0.0)[0]
    assert near[0] < near[1] < near[0] * 1.01


def test_batches_keep_their_shape(device):
    model = device.model([0.6e-6, 1e-6])
    which = np.array([[0], [1]])
    current, *_ = model.current_and_derivatives(0.7, np.linspace(0.1, 1, 5), 0.0, which)
    assert current.shape == (2, 5)
    assert np.all(current[0] > current[1])


def test_body_derivative_follows_a_known_model():
    grid = Grid()
    columns = rows(grid, ekv)
    shape = tuple(len(axis) for axis in (grid.length, grid.vsb, grid.vds, grid.vgs))
    values = {name: columns[name].reshape(shape) for name in ("id", "gm", "gds", "gmb")}
    axes = [np.array(axis) for axis in (grid.length, grid.vsb, grid.vds, grid.vgs)]
    sweep = Sweep("n", Condition("tt", 27.0), UnitTransistor("n", 2e-6), *axes, values)
    device = Device(sweep)
    vgs, vds, vsb = np.array([0.4, 0.7, 1.2]), np.array([0.3, 0.9, 1.1]), np.array([0.1, 0.4, 0.8])
    id_, gm, _, gmb = ekv(0.36e-6, vsb, vds, vgs)
    found = device.model(0.36e-6).current_and_derivatives(vgs, vds, vsb)
    np.testing.assert_allclose(found[0], id_, rtol=3e-3)
    np.testing.assert_allclose(found[1], gm, rtol=6e-3)
    np.testing.assert_allclose(found[3], -gmb, rtol=2e-2)
