"""What interpolants keep is bounded, and goes with them."""

from __future__ import annotations

import gc

import numpy as np
import pytest

from gmid.device import Device
from gmid.device import interpolant as interpolants
from gmid.device.example import example_sweep
from gmid.device.keeping import KEEPER, Keeper

BIAS = {"vds": 0.6, "vgs": 0.5}


class Block:
    """Something that can be kept."""


@pytest.fixture
def keeper(monkeypatch):
    small = Keeper(400_000)
    monkeypatch.setattr(interpolants, "KEEPER", small)
    return small


def test_the_least_recently_used_goes_first():
    keeper = Keeper(100)
    for name in "ab":
        keeper.keep(0, name, Block(), 40)
    assert keeper.find(0, "a") is not None
    keeper.keep(0, "c", Block(), 40)
    assert keeper.find(0, "b") is None
    assert keeper.find(0, "a") is not None
    assert keeper.size == 80


def test_what_is_held_is_found_even_if_pushed_out():
    keeper = Keeper(100)
    block = keeper.keep(0, "a", Block(), 60)
    keeper.keep(0, "b", Block(), 60)
    assert keeper.find(0, "a") is block
    assert keeper.size == 60
    del block
    assert keeper.find(0, "a") is None


def test_too_large_for_the_bound_is_not_kept():
    keeper = Keeper(100)
    keeper.keep(0, "a", Block(), 50)
    keeper.keep(0, "b", Block(), 200)
    assert keeper.size == 50
    assert keeper.find(0, "b") is None


def test_many_lengths_and_devices_stay_within_the_bound(keeper):
    devices = [Device(example_sweep()) for _ in range(3)]
    first = float(devices[0].at(length=1e-6, **BIAS).gm)
    for length in np.linspace(0.5e-6, 2e-6, 40):
        for device in devices:
            _ = device.at(length=length, **BIAS).to_dict()
            _ = device.at(length=np.full(3, length), vds=0.6, gm_over_id=12.0).gds
    assert 0 < keeper.size <= keeper.limit
    assert devices[0].at(length=1e-6, **BIAS).gm == first


def test_a_model_keeps_its_own(keeper):
    device = Device(example_sweep())
    model = device.model([0.5e-6, 1e-6])
    before = model.current_and_derivatives(0.6, 0.9, 0.0, [0, 1])[0]
    splines = model.splines(("id",))
    for length in np.linspace(0.6e-6, 2e-6, 40):
        _ = device.at(length=length, **BIAS).to_dict()
    assert model.splines(("id",)) is splines
    assert np.array_equal(model.current_and_derivatives(0.6, 0.9, 0.0, [0, 1])[0], before)


def test_what_a_device_kept_goes_with_it():
    gc.collect()
    before = KEEPER.size
    device = Device(example_sweep())
    _ = device.at(length=1e-6, **BIAS).to_dict()
    _ = device.at(length=np.linspace(0.5e-6, 2e-6, 100), **BIAS).id
    assert KEEPER.size > before
    del device
    assert KEEPER.size == before
