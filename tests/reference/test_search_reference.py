"""Plans of the search in the reference simulator: what was met in the tables is met there."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from gmid.amplifier.search import SearchResult, find_plan
from gmid.request import Bench, Request, open_bench, read_request
from gmid.simulation.plans import simulate_plan

pytestmark = pytest.mark.reference

ROOT = Path(__file__).resolve().parents[2]
MODELS = ROOT / "demo" / "larch180" / "models"
NAMES = ("slow_sensor", "cascoded_75")
PARTS = ("bias", "open_loop", "noise")


@pytest.fixture(scope="module", params=NAMES)
def sized(request: pytest.FixtureRequest) -> tuple[Request, Bench, SearchResult]:
    asked = read_request(ROOT / "tests" / "requests" / f"{request.param}.toml")
    bench = open_bench(asked.process)
    found = find_plan(
        asked.demands, load_capacitance=asked.load_capacitance,
        load_resistance=asked.load_resistance, bench=bench, roles=asked.process.devices,
        own_well=asked.process.own_well, supply=asked.supply, choices=asked.choices,
        matching=asked.matching,
    )  # fmt: skip
    return asked, bench, found


def test_the_demands_hold_in_the_simulator_in_every_condition(sized):
    asked, bench, found = sized
    assert found.met
    for condition, devices in bench:
        models = (MODELS / f"{condition.corner}.inc").read_text()
        models += f"\n.options temp={condition.temperature:g}\n"
        for voltage in asked.supply.voltages[[0, 2]]:
            seen = simulate_plan(
                found.plan, asked.supply, devices, models, voltage=float(voltage),
                gbw=asked.demands["gbw"].value, parts=PARTS, noise_frequency=(1e6,),
            )  # fmt: skip
            label = f"{condition}/{voltage:g}"
            assert seen.dc_gain_db >= asked.demands["dc_gain"].value, label
            assert seen.gbw >= asked.demands["gbw"].value, label
            assert seen.phase_margin >= asked.demands["phase_margin"].value, label
            outputs = [seen.node_voltages[node] for node in ("vop", "von")]
            assert abs(np.mean(outputs) - 0.5 * voltage) < 5e-3, label


def test_the_largest_current_is_that_of_the_search(sized):
    asked, bench, found = sized
    largest = 0.0
    for condition, devices in bench:
        models = (MODELS / f"{condition.corner}.inc").read_text()
        models += f"\n.options temp={condition.temperature:g}\n"
        seen = simulate_plan(
            found.plan, asked.supply, devices, models, voltage=float(asked.supply.voltages[2]),
            parts=("bias",),
        )  # fmt: skip
        largest = max(largest, seen.supply_current)
    assert largest == pytest.approx(found.floor * found.ratio_to_floor, rel=2e-3)
