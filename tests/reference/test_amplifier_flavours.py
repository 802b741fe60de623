"""Other flavours of device by place, and bulks at their sources, by the numbers promised.

The low-threshold device stands in the input pair, in cascodes, in followers and in sensing
pairs; devices with a well of their own in every place that is not at a rail.
"""

from __future__ import annotations

import pytest

from gmid.amplifier import PLACES, AmplifierPlan, Variant
from reference.amplifier_cases import LIMITS, Case, Outcome, make_plan, run_plan
from reference.flattened import by_instance, flatten, place_of

pytestmark = pytest.mark.reference

LOW = {"device": "nmos_low"}
OWN = {"bulk": "source"}
_UP = 1e15

PLANS: dict[str, tuple[Case, dict[str, dict[str, object]]]] = {
    "low pair and cascodes, n": (
        Case("larch180", Variant("n", "cascoded", "resistors"), "tt/27", 1.8, resistance=_UP),
        {"pair": LOW, "opposite_cascode": LOW | {"stack": 2, "length": 0.2e-6}},
    ),
    "low pair, followers and cascodes, n, slow and cold": (
        Case(
            "larch180",
            Variant("n", "cascoded", "followers"),
            "ss/-40",
            1.8,
            resistance=_UP,
            follower="nmos_low",
            load=2e-12,
        ),
        {"pair": LOW, "opposite_cascode": LOW, "bias_opposite": LOW},
    ),
    "low cascodes and sensing pairs, p": (
        Case("larch180", Variant("p", "cascoded", "pairs"), "fs/27", 1.8, resistance=_UP),
        {"direct_cascode": LOW, "sense_pair": LOW},
    ),
    "low error pair and mirrors, p, fast and hot": (
        Case("larch180", Variant("p", "plain", "resistors"), "ff/125", 1.98, load=3e-12),
        {"error_pair": LOW, "load": LOW, "direct": LOW, "copy": LOW},
    ),
    "own wells, p": (
        Case("larch180", Variant("p", "cascoded", "followers"), "ff/-40", 1.98, resistance=_UP),
        {"pair": OWN, "follower": OWN, "opposite_cascode": OWN},
    ),
    "own wells, n, error and sensing pairs of the other channel": (
        Case("larch180", Variant("n", "cascoded", "pairs"), "tt/27", 1.98, resistance=_UP),
        {"sense_pair": OWN, "direct_cascode": OWN},
    ),
    "own wells, low pair, n": (
        Case("larch180", Variant("n", "plain", "followers"), "sf/27", 1.8, follower="nmos_low"),
        {"pair": LOW | OWN, "follower": OWN, "error_pair": OWN},
    ),
}


def change(plan: AmplifierPlan, places: dict[str, dict[str, object]]) -> AmplifierPlan:
    for place, changes in places.items():
        plan = plan.with_place(place, **changes)
    return plan


@pytest.fixture(scope="module", params=PLANS)
def outcome(request) -> Outcome:
    case, places = PLANS[request.param]
    plan, supply = make_plan(case)
    return run_plan(case, change(plan, places), supply)


def test_the_numbers_hold_for_other_flavours_and_wells(outcome):
    for name, error in outcome.differences():
        assert abs(error) <= LIMITS[name], (name, error)


def test_the_common_mode_loop_of_other_flavours_and_wells(outcome):
    loop, (_, gbw, margin) = outcome.predicted.common_mode, outcome.simulated.common_mode
    assert float(loop.gbw) == pytest.approx(gbw, rel=0.01)
    assert float(loop.phase_margin) == pytest.approx(margin, abs=0.5)


@pytest.mark.parametrize("name", PLANS)
def test_the_netlist_has_the_flavours_and_the_wells(name):
    """The device line of each place changed, and of no other."""
    case, places = PLANS[name]
    plan, supply = make_plan(case)
    models = {"nmos": "larch_n", "pmos": "larch_p", "nmos_low": "larch_n_low"}
    changed = change(plan, places)
    for instance, stack in by_instance(flatten(case, changed, supply).units).items():
        place = place_of(instance, list(PLACES))
        assert {unit.model for unit in stack} == {models[changed.transistors[place].device]}
        rail = "vss" if stack[0].sign > 0 else "vdd"
        wanted = stack[-1].source if places.get(place, {}).get("bulk") == "source" else rail
        assert {unit.bulk for unit in stack} == {wanted}, instance


def test_every_place_off_the_rails_is_among_those_with_other_flavours_or_wells():
    found = {place for _, places in PLANS.values() for place in places}
    assert found >= {"pair", "direct_cascode", "opposite_cascode", "follower", "sense_pair",
                     "error_pair"}  # fmt: skip
