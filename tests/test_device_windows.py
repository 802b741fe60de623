"""Narrowed inverse queries: the answers of whole curves, whatever the data are like."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gmid.device import Device
from gmid.device import inverse as whole_curves
from gmid.device.drive import Drive
from gmid.device.example import example_sweep
from gmid.device.windows import bound_drive
from gmid.errors import OutOfReach

COUNT = 2500


def smooth(sweep):
    return {}


def leaking(sweep):
    return {"id": sweep["id"] + 2e-10 * (1 + sweep.vds[:, None]) - 1e-10 * (sweep.vgs < 0)}


def rough(sweep):
    random = np.random.default_rng(3)
    return {name: values * (1 + 0.01 * random.standard_normal(values.shape))
            for name, values in sweep.values.items()}  # fmt: skip


def waving(sweep):
    """A gm/Id that turns round several times, so that targets are met more than once."""
    return {"gm": sweep["gm"] * (1 + 0.3 * np.sin(25 * sweep.vgs))}


@pytest.fixture(scope="module", params=[smooth, leaking, rough, waving])
def device(request):
    sweep = example_sweep()
    return Device(replace(sweep, values={**sweep.values, **request.param(sweep)}))


@pytest.fixture(scope="module")
def plain():
    return Device(example_sweep())


def draw(device, few_lengths):
    random = np.random.default_rng(8)
    sweep = device.sweep
    length = random.uniform(sweep.length[0], sweep.length[-1], COUNT)
    if few_lengths:
        length = random.choice(length[:4], COUNT)
    return {"length": length, "vds": random.uniform(0.0, sweep.vds[-1], COUNT),
            "vsb": random.uniform(0.0, sweep.vsb[-1], COUNT)}  # fmt: skip


@pytest.mark.parametrize("few_lengths", [False, True])
@pytest.mark.parametrize("name", ["gm_over_id", "id"])
def test_windows_agree_with_whole_curves(device, name, few_lengths, monkeypatch):
    bias = draw(device, few_lengths)
    vgs = np.random.default_rng(9).uniform(0.3, 1.9, COUNT)
    extra = {"count": 1} if name == "id" else {}
    target = np.array(getattr(device.at(vgs=vgs, **bias), name))
    keep = bias["vds"] > 0.02
    bias = {axis: values[keep] for axis, values in bias.items()}
    target = np.clip(target[keep], 3.0, 20.0) if name == "gm_over_id" else target[keep]
    narrowed = device.at(**{name: target}, **bias, **extra)
    monkeypatch.setattr(whole_curves, "_MANY", COUNT + 1)
    whole = device.at(**{name: target}, **bias, **extra)
    np.testing.assert_allclose(narrowed.vgs, whole.vgs, rtol=0, atol=1e-9)
    np.testing.assert_allclose(getattr(narrowed, name), target, rtol=1e-12)


@pytest.mark.parametrize("name", ["gm_over_id", "id"])
def test_bounds_hold_everywhere(device, name):
    interpolant = device._interpolant
    drive = Drive(name, interpolant)
    stack = interpolant.stack(drive.columns)
    least, most = bound_drive(drive, stack)
    random = np.random.default_rng(1)
    bias = draw(device, False) | {"vgs": random.uniform(-0.2, 2.0, COUNT)}
    values = drive.sense * drive.scale(np.array(getattr(device.at(**bias), name)))
    place = (np.log(bias["length"]), np.sqrt(0.8 + bias["vsb"]), np.log(0.1 + bias["vds"]))
    cell = np.ravel_multi_index(tuple(stack.cells(*place)[0]), stack.shape)
    shifted = bias["vgs"] - interpolant.threshold(bias["length"], bias["vsb"])
    span, _ = stack.gate.locate(shifted)
    known = np.isfinite(values)
    assert known.mean() > 0.9
    slack = 1e-9 * (1 + np.abs(values[known]))
    assert np.all(values[known] >= least[cell, span][known] - slack)
    last = np.append(most[:, 1:], np.full((len(most), 1), np.inf), axis=1)
    upper = np.where(most < last, most, np.inf)[cell, span][known]
    assert np.isfinite(upper).mean() > 0.1
    assert np.all(values[known] <= upper + slack)


def test_unreachable_targets_among_many_are_named(plain):
    target = np.full(COUNT, 15.0)
    target[[7, 1200]] = 60.0
    with pytest.raises(OutOfReach) as caught:
        plain.at(gm_over_id=target, length=1e-6, vds=0.6)
    assert str(caught.value).count("is out of reach") == 2


def test_targets_at_the_ends_of_the_table(plain):
    for vgs in (-0.2, 0.0, 2.0):
        point = plain.at(vgs=vgs, length=1e-6, vds=0.6)
        back = plain.at(id=np.full(COUNT, float(point.id)), count=1, length=1e-6, vds=0.6)
        np.testing.assert_allclose(back.vgs, vgs, atol=1e-9)
