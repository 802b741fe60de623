"""What must hold for every query of a smooth device."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gmid.device import Device
from gmid.device.example import example_sweep

DEVICE = Device(example_sweep())

lengths = st.floats(0.5e-6, 2e-6)
gates = st.floats(0.15, 2.0)
drains = st.floats(0.03, 1.8)
bulks = st.floats(0.0, 1.0)
quick = settings(max_examples=60, deadline=None)


@quick
@given(lengths, gates, drains, bulks, st.sampled_from(["gm_over_id", "current_density", "id"]))
def test_forward_then_inverse_returns(length, vgs, vds, vsb, drive):
    there = DEVICE.at(length=length, vds=vds, vsb=vsb, vgs=vgs)
    value = getattr(there, drive)
    count = {"count": 1} if drive == "id" else {}
    back = DEVICE.at(length=length, vds=vds, vsb=vsb, **{drive: value}, **count)
    assert getattr(back, drive) == pytest.approx(value, rel=1e-10)
    if drive != "gm_over_id" or there.gm_over_id < 25:
        assert back.vgs == pytest.approx(vgs, abs=1e-6)


@quick
@given(lengths, gates, bulks)
def test_diode_returns(length, vgs, vsb):
    gate = min(vgs, 1.8)
    there = DEVICE.at(length=length, vds="diode", vsb=vsb, vgs=gate)
    back = DEVICE.at(length=length, vds="diode", vsb=vsb, id=there.id, count=1)
    assert back.vgs == pytest.approx(gate, abs=1e-6)


@quick
@given(lengths, drains, bulks)
def test_current_rises_with_vgs(length, vds, vsb):
    current = DEVICE.at(length=length, vds=vds, vsb=vsb, vgs=np.linspace(-0.2, 2.0, 300)).id
    assert np.all(np.diff(current) > 0)


@quick
@given(lengths, gates, bulks)
def test_current_rises_with_vds(length, vgs, vsb):
    current = DEVICE.at(length=length, vds=np.linspace(0, 1.8, 300), vsb=vsb, vgs=vgs).id
    assert np.all(np.diff(current) > 0)


@quick
@given(lengths, gates, drains)
def test_current_falls_with_vsb(length, vgs, vds):
    current = DEVICE.at(length=length, vds=vds, vsb=np.linspace(0, 1, 100), vgs=vgs).id
    assert np.all(np.diff(current) < 0)


@quick
@given(lengths, gates, drains, st.integers(1, 5000))
def test_scaling_is_exact(length, vgs, vds, count):
    point = DEVICE.at(length=length, vds=vds, vgs=vgs)
    scaled = point.scaled(count=count)
    for name in ("id", "gm", "gds", "gmb", "cgg", "noise_thermal", "noise_flicker", "width"):
        assert getattr(scaled, name) == getattr(point, name) * count, name
    for name in ("gm_over_id", "intrinsic_gain", "ft", "current_density", "vgs"):
        assert getattr(scaled, name) == getattr(point, name), name
