"""Single points take a way of their own: they answer as batches do, and refuse as batches do."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gmid.device import Device
from gmid.device.example import example_sweep
from gmid.errors import OutOfReach, UnknownName

NINE = ("cgg", "cgd", "cgs", "cdg", "cdd", "cds", "csg", "csd", "css")


def make(*, rest, few_axes=False, gate_leaks=False):
    sweep = example_sweep(vsb=[0.0], length=[0.5e-6, 1e-6]) if few_axes else example_sweep()
    shares = (1.0, 0.2, 0.7, 0.3, 0.4, -0.02, 0.6, 0.1, 0.8)
    parts = {name: share * sweep["cgg"] for name, share in zip(NINE, shares, strict=True)}
    leak = 1e-12 * (1 + 0 * sweep["id"]) if rest else 0.0
    if gate_leaks:
        leak = leak - 1e-9 * np.exp(sweep.vgs - 2.0)
        parts["gm"] = sweep["gm"] - 1e-9 * np.exp(sweep.vgs - 2.0)
    return Device(replace(sweep, values={**sweep.values, **parts, "id": sweep["id"] + leak}))


@pytest.mark.parametrize("device", [make(rest=False), make(rest=True),
                                    make(rest=True, few_axes=True),
                                    make(rest=True, gate_leaks=True)])  # fmt: skip
def test_points_one_by_one_are_those_of_a_batch(device):
    random = np.random.default_rng(2)
    sweep = device.sweep
    count = 40
    bias = {name: random.uniform(getattr(sweep, name)[0], getattr(sweep, name)[-1], count)
            for name in ("length", "vgs", "vds", "vsb")}  # fmt: skip
    for name in bias:
        bias[name][:2] = getattr(sweep, name)[[0, -1]]
    together = device.at(**bias).to_dict()
    for place in range(count):
        point = device.at(**{name: float(values[place]) for name, values in bias.items()})
        for name, values in together.items():
            scale = np.abs(values).max() if name.startswith("c") else 0.0
            expected = pytest.approx(values[place], rel=1e-11, abs=1e-13 * scale)
            if np.isfinite(values[place]):
                assert getattr(point, name) == expected, name
        assert point.to_dict().keys() == together.keys()


def test_gm_holds_what_leaks_through_the_gate():
    device = make(rest=True, gate_leaks=True)
    sweep, place = device.sweep, (1, 1, slice(2, None), slice(20, None, 3))
    bias = {"length": sweep.length[1], "vsb": sweep.vsb[1], "vds": sweep.vds[2:, None],
            "vgs": sweep.vgs[20::3]}  # fmt: skip
    point = device.at(**bias)
    np.testing.assert_allclose(point.gm, sweep["gm"][place], rtol=1e-4)
    ratio = sweep["gm"][place] / sweep["id"][place]
    np.testing.assert_allclose(point.gm_over_id, ratio, rtol=1e-4)
    del bias["vgs"]
    back = device.at(gm_over_id=point.gm_over_id[:, 4:], **bias)
    np.testing.assert_allclose(back.vgs, point.vgs[:, 4:], atol=1e-9)
    many = np.tile(point.gm_over_id[3, 4:], 400)
    again = device.at(gm_over_id=many, **{**bias, "vds": sweep.vds[5]})
    np.testing.assert_allclose(again.vgs, np.tile(point.vgs[3, 4:], 400), atol=1e-9)
    small = device.model(sweep.length[1]).small_signal(0.7, 0.9, 0.0)
    assert small.gm == pytest.approx(device.at(length=sweep.length[1], vgs=0.7, vds=0.9).gm)


def test_attributes_and_readings_tell_the_same():
    device = make(rest=True)
    bias = {"length": 1.3e-6, "vds": 0.5, "vgs": 0.6}
    point = device.at(**bias)
    scaled = point.scaled(count=3)
    assert scaled.id == 3 * point.id
    assert point.read(["noise_thermal", "id"])["id"] == point.id
    assert device.at(**bias).read(("id", "gm")).keys() == {"id", "gm"}
    stored = tuple(device.sweep.values)
    assert tuple(device.at(**bias).read(stored)) == stored


def test_kinds_of_numbers_and_of_results():
    device = make(rest=False)
    point = device.at(length=1e-6, vds=1, vgs=np.float64(0.5))
    assert type(point.id) is np.float64
    assert type(point.vds) is np.float64
    assert point.shape == ()
    assert point.scaled(count=[1, 2]).read(["gm", "cgb"])["gm"].shape == (2,)
    assert point.scaled(count=3).gds == 3 * point.gds
    array = device.at(length=1e-6, vds=1, vgs=np.array(0.5))
    assert array.id == pytest.approx(point.id, rel=1e-14)


def test_fields_read_singly_or_together():
    device = make(rest=True)
    bias = {"length": 1e-6, "vds": 0.6, "vgs": 0.5}
    together = device.at(**bias).to_dict()
    for _ in range(3):
        point = device.at(**bias)
        for name in ("gm", "id", "ft", "cdb", "gm", "noise_flicker"):
            assert getattr(point, name) == pytest.approx(together[name], rel=1e-12), name


def test_what_a_point_refuses():
    device = make(rest=False)
    with pytest.raises(OutOfReach, match=r"vds = 2\.5 V is out of reach"):
        device.at(length=1e-6, vds=2.5, vgs=0.5)
    with pytest.raises(OutOfReach):
        device.at(length=1e-6, vds=0.5, vgs=float("nan"))
    edge = device.at(length=1e-6, vds=1.8 * (1 + 1e-12), vgs=0.5)
    assert edge.vds == 1.8
    with pytest.raises(UnknownName, match="no quantity 'cg'"):
        device.at(length=1e-6, vds=0.5, vgs=0.5).read(["id", "cg"])
    with pytest.raises(UnknownName, match="no quantity 'rest'"):
        device.at(length=1e-6, vds=0.5, vgs=0.5).read(["rest"])
