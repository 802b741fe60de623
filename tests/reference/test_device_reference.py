"""Device queries off the grid against the reference simulator, on three invented processes."""

from __future__ import annotations

import numpy as np
import pytest

import cards
from characterise import DEVICES, GRID, HOME, characterise
from gmid.condition import Condition
from gmid.device import Device

pytestmark = pytest.mark.reference

CONDITIONS = [Condition.parse(text) for text in ("tt/27", "ss/-40", "ff/125", "fs/27")]


def draw(grid, count, *, seed):
    """Random bias points that conduct in most conditions, between those of a grid."""
    random = np.random.default_rng(seed)
    length = np.log([grid["length"][0], grid["length"][-1]])
    return {
        "length": np.exp(random.uniform(*length, count)),
        "vgs": random.uniform(0.0, grid["vgs"][-1] - 0.02, count),
        "vds": random.uniform(0.05, grid["vds"][-1], count),
        "vsb": random.uniform(0.0, grid["vsb"][-1], count),
    }


def keep(bias, truth):
    on = truth["id"] > 1e-9
    return ({name: values[on] for name, values in bias.items()},
            {name: values[on] for name, values in truth.items()})  # fmt: skip


def errors(found, truth):
    """Relative errors in per cent."""
    return {name: 100 * np.abs(getattr(found, name) / truth[name] - 1)
            for name in ("id", "gm", "gds", "gmb", "cgg", "cdd", "noise_thermal")}  # fmt: skip


def ceiling(device, bias):
    """Largest gm/Id over vgs at the length, vds and vsb of each point, and where it stands."""
    vgs = np.linspace(device.sweep.vgs[0], device.sweep.vgs[-1], 100)
    point = device.at(vgs=vgs, **{name: bias[name][:, None] for name in ("length", "vds", "vsb")})
    found = point.read(["id", "gm_over_id"])
    ratio = np.where(found["id"] > 1e-12, found["gm_over_id"], 0.0)
    return ratio.max(axis=1), vgs[ratio.argmax(axis=1)]


def judge_inverse(device, bias, truth):
    """Ask for the simulator's own gm/Id; give errors of vgs [mV] and of id [%] and gm/Id."""
    target = truth["gm"] / truth["id"]
    most, place = ceiling(device, bias)
    branch = (bias["vgs"] > place) & (target < 0.995 * most)
    part = {name: values[branch] for name, values in bias.items()}
    vgs = part.pop("vgs")
    found = device.at(gm_over_id=target[branch], **part)
    share = (target / most)[branch]
    current = 100 * np.abs(found.id / truth["id"][branch] - 1)
    return 1e3 * np.abs(found.vgs - vgs), current, share


@pytest.fixture(scope="module")
def demo_truth():
    """The same random points of every device and condition of the demo, simulated."""
    found = {}
    for index, (name, (model, polarity, _)) in enumerate(DEVICES.items()):
        for condition in CONDITIONS:
            bias = draw(GRID, 400, seed=index)
            models = (HOME / "models" / f"{condition.corner}.inc").read_text(encoding="utf-8")
            truth = characterise(models, model, polarity=polarity,
                                 temperature=condition.temperature, **bias)  # fmt: skip
            found[name, condition] = keep(bias, truth)
    return found


@pytest.mark.parametrize("condition", CONDITIONS, ids=str)
@pytest.mark.parametrize("name", list(DEVICES))
def test_demo_device(demo_table, demo_truth, name, condition):
    bias, truth = demo_truth[name, condition]
    device = demo_table.device(name, corner=condition.corner, temperature=condition.temperature)
    error = errors(device.at(**bias), truth)
    for quantity in ("id", "gm"):
        assert np.median(error[quantity]) < 0.02, quantity
        assert np.max(error[quantity]) < 0.6, quantity
    assert np.median(error["gds"]) < 0.1
    inside = (bias["vgs"] <= 1.8) & (bias["vds"] <= 1.8)
    assert np.max(error["gds"][inside]) < 2.0
    assert np.median(error["gmb"]) < 0.05
    assert np.median(error["cgg"]) < 0.15
    assert np.median(error["cdd"]) < 0.05
    assert np.median(error["noise_thermal"]) < 0.02


@pytest.mark.parametrize("condition", CONDITIONS, ids=str)
@pytest.mark.parametrize("name", list(DEVICES))
def test_demo_inverse(demo_table, demo_truth, name, condition):
    bias, truth = demo_truth[name, condition]
    device = demo_table.device(name, corner=condition.corner, temperature=condition.temperature)
    vgs, current, share = judge_inverse(device, bias, truth)
    usable = (share > 0.1) & (share < 0.7)
    assert np.mean(vgs[usable] < 0.2) > 0.98  # on some 11 000 points: the goal is for 27 000
    assert np.max(vgs[usable]) < 0.5
    assert np.max(current[(share >= 0.7) & (share < 0.95)]) < 0.6


DENSE = [("birch250", "nmos", cards.CONDITIONS[1]), ("reed90", "pmos", cards.CONDITIONS[2])]


@pytest.fixture(scope="module", params=DENSE, ids=lambda case: f"{case[0]}-{case[1]}-{case[2]}")
def dense(request):
    """A device on some 27 000 points, and random points off them."""
    name, device, condition = request.param
    process = cards.PROCESSES[name]
    sweep = process.sweep(device, condition, dense=True)
    bias = draw(process.dense_grid(), 1000, seed=7)
    return Device(sweep), *keep(bias, process.simulate(device, condition, **bias))


def test_dense_device(dense):
    device, bias, truth = dense
    error = errors(device.at(**bias), truth)
    for quantity in ("id", "gm"):
        assert np.median(error[quantity]) < 0.02, quantity
        assert np.max(error[quantity]) < 0.6, quantity
    assert np.max(error["gds"]) < 2.0


def test_dense_inverse(dense):
    device, bias, truth = dense
    vgs, current, share = judge_inverse(device, bias, truth)
    assert np.max(vgs[(share > 0.1) & (share < 0.7)]) < 0.2
    assert np.max(current[(share >= 0.7) & (share < 0.95)]) < 0.6
