"""Region, headroom and area of every device, against the exported netlist simulated.

The simulator is not asked for an edge of saturation: each device is taken out of the netlist,
held at the voltages that it has there, and its drain is swept.
"""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from gmid.amplifier import AmplifierPlan, Supply, Variant, predict
from gmid.condition import Condition
from gmid.sheet.amplifiers import fill_amplifier, review_plan
from gmid.sheet.data import AmplifierSheet
from reference.amplifier_cases import CASES, Case, find_devices, make_plan
from reference.flattened import (
    Flat,
    by_instance,
    flatten,
    measure_headroom,
    stand_alone,
)

pytestmark = pytest.mark.reference

EDGE = 5e-3
"""What an edge of saturation may be off [V]: a tenth of the margin that is usually kept."""

GAIN_AT_THE_EDGE = 5.0
"""gm/gds where gds has fallen to 15 %: 5.7 by the square law; over the slope factor, some 4 to
5, in weak inversion.  Far into saturation it is above 20, in triode below 3."""


Made = tuple[AmplifierPlan, Supply]


def _as_drafted(plan: AmplifierPlan, supply: Supply) -> Made:
    return plan, supply


def _stacked_cascodes(plan: AmplifierPlan, supply: Supply) -> Made:
    return plan.with_place("opposite_cascode", device="nmos_low", stack=2, length=0.2e-6), supply


def _stacked(plan: AmplifierPlan, supply: Supply) -> Made:
    for place in ("load", "direct", "copy"):
        plan = plan.with_place(place, stack=2, length=0.55e-6)
    return dataclasses.replace(plan.with_place("pair", bulk="source"), multiple=3), supply


def _crushed(plan: AmplifierPlan, supply: Supply) -> Made:
    """Leave the tail no room by the inputs' level, and `direct` none by its cascode."""
    plan = plan.with_place("pair", length=0.18e-6, count=1).with_place("tail", length=0.3e-6)
    level = dataclasses.replace(supply.common_mode, ratio=0.38)
    return plan.with_place("error_tail", count=1), dataclasses.replace(
        supply, input_common_mode=level)  # fmt: skip


SHEETS = {
    "stacks in their own wells, times three": (
        Case("larch180", Variant("p", "plain", "resistors"), "tt/27", 1.8), _stacked),
    "followers": (
        Case("larch180", Variant("n", "cascoded", "followers"), "sf/27", 1.8, resistance=1e15,
             follower="nmos_low"), _stacked_cascodes),
    "sensing pairs": (
        Case("larch180", Variant("n", "plain", "pairs"), "fs/27", 1.8), _as_drafted),
    "crushed": (
        Case("larch180", Variant("n", "cascoded", "resistors"), "ss/-40", 1.8, ratio=4.0),
        _crushed),
}  # fmt: skip


@dataclasses.dataclass(frozen=True, eq=False)
class Reviewed:
    """A sheet, and the exported amplifier at low, nominal and high supply."""

    sheet: AmplifierSheet
    supply: Supply
    flats: dict[float, Flat]
    nodes: dict[float, dict[str, float]]

    @property
    def nominal(self) -> float:
        return self.supply.voltage


@pytest.fixture(scope="module", params=SHEETS)
def reviewed(request) -> Reviewed:
    case, change = SHEETS[request.param]
    plan, supply = change(*make_plan(case))
    devices = find_devices(case.process, case.condition)
    bench = [(Condition.parse(case.condition), devices)]
    sheet = fill_amplifier(review_plan(plan, bench, supply))
    levels = [float(level) for level in supply.voltages]
    flats = {x: flatten(dataclasses.replace(case, level=x), plan, supply) for x in levels}
    return Reviewed(sheet, supply, flats, {x: flat.nodes() for x, flat in flats.items()})


def test_bias_of_every_row_of_the_sheet(reviewed):
    """vgs, vds and vsb within 1 mV of the simulator's nodes, and not one device left out."""
    nodes = reviewed.nodes[reviewed.nominal]
    stacks = by_instance(reviewed.flats[reviewed.nominal].units)
    rows = {row.name: row for row in reviewed.sheet.transistors}
    assert set(rows) == set(stacks)
    for name, row in rows.items():
        vgs, _, vsb = stacks[name][-1].voltages(nodes)
        vds = sum(unit.voltages(nodes)[1] for unit in stacks[name])
        found = (row.vgs, row.vds, row.vsb)
        np.testing.assert_allclose(found, (vgs, vds, vsb), atol=1e-3, err_msg=name)


def test_headroom_of_every_row_of_the_sheet(reviewed):
    """By swept drains, at the nominal supply and at the worst."""
    found = {x: measure_headroom(flat, reviewed.nodes[x]) for x, flat in reviewed.flats.items()}
    for row in reviewed.sheet.transistors:
        by_level = {level: rooms[row.name] for level, rooms in found.items()}
        assert row.headroom == pytest.approx(by_level[reviewed.nominal], abs=EDGE), row.name
        assert row.vds - row.vdsat == pytest.approx(row.headroom, abs=1e-9)
        assert row.worst_headroom == pytest.approx(min(by_level.values()), abs=EDGE), row.name
        said = float(row.worst_condition.rsplit("/", 1)[1])
        worst = min(by_level, key=lambda level: abs(level - said))
        assert by_level[worst] == pytest.approx(min(by_level.values()), abs=1e-3), row.name


def test_headroom_of_every_device_of_every_case():
    """Over three processes."""
    for case in CASES:
        plan, supply = make_plan(case)
        predicted = predict(plan, find_devices(case.process, case.condition), supply,
                            voltage=case.level)  # fmt: skip
        flat = flatten(case, plan, supply)
        for name, room in measure_headroom(flat, flat.nodes()).items():
            found = float(predicted.headroom[name])
            assert found == pytest.approx(room, abs=EDGE), (case.label, name)


def test_a_device_said_to_be_in_saturation_is(reviewed):
    """By another mark than the sheet's: gm/gds, from small changes of gate and drain.

    Devices within 10 mV of the edge are on neither side of it.
    """
    level = reviewed.nominal
    flat = reviewed.flats[level]
    alone = stand_alone(flat, reviewed.nodes[level], upper=True)
    gains = dict(zip(by_instance(flat.units), alone.measure_gain(), strict=True))
    for row in reviewed.sheet.transistors:
        if abs(row.headroom) > 10e-3:
            said = row.headroom > 0
            assert (gains[row.name] > GAIN_AT_THE_EDGE) == said, (row.name, gains[row.name])


def test_devices_in_triode_are_among_those_judged():
    case, change = SHEETS["crushed"]
    plan, supply = change(*make_plan(case))
    predicted = predict(plan, find_devices(case.process, case.condition), supply,
                        voltage=case.level)  # fmt: skip
    crushed = {name for name, room in predicted.headroom.items() if float(room) < -10e-3}
    assert len(crushed) >= 3
    assert {predicted.bias.point(name)["region"] for name in crushed} == {"triode"}


def test_the_gate_area_is_that_of_the_netlist(reviewed):
    """Width times length times count of every device line, a line for each unit of a stack."""
    for flat in reviewed.flats.values():
        areas = [math.prod(unit.sizes[key] for key in "wlm") for unit in flat.units]
        assert reviewed.sheet.gate_area == pytest.approx(math.fsum(areas), rel=1e-9)
