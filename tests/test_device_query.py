"""Queries of a device: drives, shapes, reach, scaling, and what is refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import gmid
from gmid.condition import Condition
from gmid.device import Device, OperatingPoint
from gmid.device.example import example_sweep
from gmid.errors import DataFault, OutOfReach, UnknownName, UsageFault
from gmid.table.saving import save_sweeps

BIAS = {"length": 1e-6, "vds": 0.6, "vsb": 0.2}


@pytest.fixture(scope="module")
def device():
    return Device(example_sweep())


@pytest.fixture(scope="module")
def path(tmp_path_factory):
    """A table of two corners: tt at 27 C, ss at -40, 27 and 125 C."""
    tt = example_sweep()
    others = [replace(tt, condition=Condition("ss", t)) for t in (-40.0, 27.0, 125.0)]
    target = tmp_path_factory.mktemp("table") / "ash.h5"
    save_sweeps(target, [tt, *others], process="ash90")
    return target


@pytest.mark.parametrize("drive", ["gm_over_id", "current_density", "id"])
def test_each_drive_returns_to_its_vgs(device, drive):
    point = device.at(vgs=[0.3, 0.45, 0.8], **BIAS)
    extra = {"count": 1} if drive == "id" else {}
    back = device.at(**{drive: getattr(point, drive)}, **extra, **BIAS)
    np.testing.assert_allclose(back.vgs, point.vgs, atol=1e-9)


def test_vdsat_drives_where_the_table_has_it():
    sweep = example_sweep()
    vdsat = 0.1 + 0.5 * np.maximum(sweep.vgs - 0.3, 0) + 0 * sweep["id"]
    device = Device(replace(sweep, values={**sweep.values, "vdsat": vdsat}))
    assert device.at(vdsat=0.2, **BIAS).vgs == pytest.approx(0.5, abs=1e-6)
    with pytest.raises(UnknownName, match="has no vdsat"):
        Device(sweep).at(vdsat=0.2, **BIAS)


def test_current_of_units_and_of_a_width(device):
    unit = device.at(id=1e-6, count=1, **BIAS)
    four = device.at(id=4e-6, count=4, **BIAS)
    wide = device.at(id=4e-6, width=8e-6, **BIAS)
    assert four.vgs == pytest.approx(unit.vgs, abs=1e-12)
    assert wide.vgs == pytest.approx(unit.vgs, abs=1e-12)
    assert four.id == pytest.approx(4e-6, rel=1e-9)
    assert four.width == 8e-6


@pytest.mark.parametrize(("drive", "value"), [("vgs", 0.7), ("gm_over_id", 12.0)])
def test_diode(device, drive, value):
    point = device.at(length=1e-6, vds="diode", **{drive: value})
    assert point.vds == point.vgs
    same = device.at(length=1e-6, vds=point.vds, vgs=point.vgs)
    assert same.id == point.id
    assert getattr(point, drive) == pytest.approx(value, rel=1e-9)


def test_broadcasting(device):
    point = device.at(length=[[0.6e-6], [1e-6]], vds=0.6, gm_over_id=[8.0, 12.0, 16.0])
    assert point.shape == (2, 3)
    for name in point.fields:
        assert np.shape(getattr(point, name)) == (2, 3), name
    alone = device.at(length=1e-6, vds=0.6, gm_over_id=12.0)
    assert point.id[1, 1] == pytest.approx(alone.id, rel=1e-12)
    assert np.ndim(alone.id) == 0


@pytest.mark.parametrize(
    "options",
    [
        {"vgs": np.zeros(0)},
        {"gm_over_id": np.zeros(0)},
        {"current_density": np.zeros(0)},
        {"id": np.zeros(0), "count": 1},
        {"gm_over_id": 12.0, "length": np.zeros(0)},
        {"vgs": np.zeros((0, 3))},
    ],
)
@pytest.mark.parametrize("vds", [0.6, "diode"])
def test_no_points_at_all(device, options, vds):
    asked = {"length": 1e-6, "vds": vds, **options}
    shape = np.broadcast_shapes(*(np.shape(v) for v in asked.values() if not isinstance(v, str)))
    point = device.at(**asked)
    for name, values in point.to_dict().items():
        assert values.shape == shape, name
        assert values.dtype == np.float64, name
    assert point.scaled(id=1e-5).width.shape == shape
    assert point.scaled(count=2).gm.shape == shape
    frame = point.to_frame()
    assert len(frame) == 0
    assert list(frame.columns) == list(point.fields)
    assert "shape" in repr(point)


def test_no_points_at_all_still_refuse_what_is_wrong(device):
    nothing = device.at(vgs=np.zeros(0), **BIAS)
    with pytest.raises(UnknownName, match="Did you mean gm_over_id"):
        nothing.read(["gm_over_idd"])
    with pytest.raises(UsageFault, match="exactly one drive"):
        device.at(vgs=np.zeros(0), gm_over_id=np.zeros(0), **BIAS)


def test_many_lengths_and_few_agree(device):
    lengths = np.geomspace(0.5e-6, 2e-6, 60)
    together = device.at(length=lengths, vds=0.6, vgs=0.55).id
    one = [device.at(length=value, vds=0.6, vgs=0.55).id for value in lengths]
    np.testing.assert_allclose(together, one, rtol=1e-12)


def test_grid_points_come_back(device):
    sweep = device.sweep
    mesh = np.meshgrid(sweep.length, sweep.vsb, sweep.vds[1:], sweep.vgs, indexing="ij")
    point = device.at(length=mesh[0], vsb=mesh[1], vds=mesh[2], vgs=mesh[3])
    np.testing.assert_allclose(point.id, sweep["id"][:, :, 1:], rtol=2e-4)


def test_vds_of_zero_carries_nothing(device):
    point = device.at(length=1e-6, vds=0.0, vgs=[0.3, 0.8])
    np.testing.assert_array_equal(point.id, 0.0)
    assert np.all(point.gds > 0)


def test_scaling(device):
    point = device.at(gm_over_id=15, **BIAS)
    assert point.scaled(count=7).gm == 7 * point.gm
    assert point.scaled(id=10e-6).id == pytest.approx(10e-6, rel=1e-14)
    assert point.scaled(gm=1e-3).gm == pytest.approx(1e-3, rel=1e-14)
    assert point.scaled(width=9e-6).count == pytest.approx(4.5, rel=1e-14)
    assert point.scaled(count=3).gm_over_id == point.gm_over_id
    assert point.scaled(count=[1, 2]).id.shape == (2,)
    assert point.scaled(count=3).scaled(count=2).id == pytest.approx(2 * point.id, rel=1e-14)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({}, "exactly one drive, not none"),
        ({"vgs": 0.5, "gm_over_id": 10}, "exactly one drive, not vgs and gm_over_id"),
        ({"id": 1e-6}, "either a count of units or a width"),
        ({"id": 1e-6, "count": 1, "width": 1e-6}, "either a count of units or a width"),
        ({"vgs": 0.5, "count": 2}, "belong to the drive id"),
        ({"id": 1e-6, "count": -1}, "must be positive"),
    ],
)
def test_wrong_drives(device, options, words):
    with pytest.raises(UsageFault, match=words):
        device.at(**BIAS, **options)


def test_wrong_scaling(device):
    point = device.at(vgs=0.5, **BIAS)
    with pytest.raises(UsageFault, match="one of id, gm, width and count"):
        point.scaled()
    with pytest.raises(UsageFault, match="must be positive"):
        point.scaled(count=0)
    with pytest.raises(UsageFault, match="no id at some"):
        device.at(length=1e-6, vds=0.0, vgs=0.5).scaled(id=1e-6)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"length": 3e-6}, "length = 3 um is out of reach .* covers 500 nm to 2 um"),
        ({"vds": 2.5}, "vds = 2.5 V is out of reach"),
        ({"vsb": -0.3}, "vsb = -0.3 V is out of reach"),
        ({"vds": -0.1}, "vds = -0.1 V is out of reach"),
    ],
)
def test_axes_out_of_reach(device, options, words):
    with pytest.raises(OutOfReach, match=words):
        device.at(**{**BIAS, **options}, gm_over_id=10)


def test_every_unreachable_combination_is_named(device):
    with pytest.raises(OutOfReach) as caught:
        device.at(length=[0.5e-6, 1e-6], vds=0.6, gm_over_id=[40.0, 41.0])
    text = str(caught.value)
    assert text.count("is out of reach") == 2
    assert "L = 500 nm" in text
    assert "L = 1 um" in text
    assert "the table covers" in text


def test_nan_is_refused(device):
    with pytest.raises(OutOfReach):
        device.at(length=1e-6, vds=0.6, gm_over_id=np.nan)
    with pytest.raises(OutOfReach):
        device.at(length=1e-6, vds=np.nan, gm_over_id=10)


def test_unknown_quantity_names_the_nearest(device):
    with pytest.raises(UnknownName, match="Did you mean gm_over_id"):
        device.at(vgs=0.5, **BIAS).read(["gm_over_idd"])
    assert not hasattr(device.at(vgs=0.5, **BIAS), "cdd")


def test_sweep_that_cannot_serve():
    sweep = example_sweep()
    with pytest.raises(DataFault, match="has no id"):
        Device(replace(sweep, values={"gm": sweep["gm"]}))
    with pytest.raises(DataFault, match="vds of nmos"):
        Device(replace(sweep, vds=sweep.vds - 0.5))


def test_one_point_axes():
    device = Device(example_sweep(vsb=[0.0], length=[1e-6]))
    full = Device(example_sweep())
    asked = {"length": 1e-6, "vds": 0.55, "gm_over_id": 14.0}
    assert device.at(**asked).vgs == pytest.approx(full.at(**asked).vgs, abs=1e-6)
    with pytest.raises(OutOfReach, match="holds 0 V alone"):
        device.at(vsb=0.1, **asked)


def test_table_gives_devices(path):
    table = gmid.open_table(path)
    device = table.device("nmos")
    assert device.condition == Condition("tt", 27.0)
    assert table.device("nmos", corner="tt") is device
    assert table.device("nmos", corner="ss", temperature=125).condition.temperature == 125
    assert isinstance(device.at(vgs=0.5, **BIAS), OperatingPoint)
    assert repr(table).startswith("DeviceTable(ash90: nmos in 4 condition(s)")


def test_temperature_between_tables_only_when_asked(path):
    table = gmid.open_table(path)
    with pytest.raises(UnknownName, match="ask for interpolation"):
        table.device("nmos", corner="ss", temperature=50)
    device = table.device("nmos", corner="ss", temperature=50, interpolate=True)
    assert device.notes == ("interpolated between -40, 27 and 125 C",)
    assert str(device.condition) == "ss/50"
    assert table.device("nmos", corner="ss", temperature=125, interpolate=True).notes == ()
    with pytest.raises(OutOfReach, match="covers -40 to 125 C"):
        table.device("nmos", corner="ss", temperature=150, interpolate=True)
    with pytest.raises(OutOfReach, match="holds 27 C alone"):
        table.device("nmos", corner="tt", temperature=50, interpolate=True)


def test_unknown_device_and_condition(path):
    table = gmid.open_table(path)
    with pytest.raises(UnknownName, match="Did you mean nmos"):
        table.device("nmo")
    with pytest.raises(UnknownName, match=r"no corner 'sss'\. Did you mean ss"):
        table.device("nmos", corner="sss")
    with pytest.raises(UnknownName, match="tables at 27 C"):
        table.device("nmos", corner="tt", temperature=28)


def test_public_surface_is_lazy():
    assert "open_table" in dir(gmid)
    with pytest.raises(AttributeError, match="no attribute 'open_tables'"):
        _ = gmid.open_tables
