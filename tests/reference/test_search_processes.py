"""Requests on two further invented processes: sized from their tables, judged by the simulator.

Neither the supply, the unit transistor nor the lengths are those of the demo process, and the
tables are coarse: what is met in them has to be met in the simulator, as it predicts.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest

from gmid.amplifier import Prediction, predict
from gmid.amplifier.search import SearchResult, find_plan
from gmid.files.locks import locked
from gmid.request import Bench, Request, open_bench
from gmid.request.reading import parse_request
from gmid.simulation.comparison import compare_plan
from gmid.simulation.plans import SimulatedPlan, simulate_plan
from gmid.sweep.derive import derive_missing
from gmid.table.saving import save_sweeps
from reference.amplifier_cases import LIMITS
from reference.cards import BIRCH, CONDITIONS, REED, Process

pytestmark = pytest.mark.reference

NOISE = (1e3, 1e6)
PARTS = ("bias", "open_loop", "common_mode", "noise")

PROCESSES = {
    "birch250": replace(BIRCH, grid={
        "length": [0.25e-6, 0.4e-6, 0.85e-6, 2e-6],
        "vsb": [0.0, 0.5, 1.6],
        "vds": [0.0, 0.05, 0.1, 0.17, 0.26, 0.38, 0.55, 0.8, 1.15, 1.6, 2.1, 2.75],
        "vgs": [-0.2, *np.arange(0.0, 1.201, 0.06), 1.4, 1.75, 2.2],
    }),
    "reed90": replace(
        REED,
        grid={
            "length": [0.105e-6, 0.18e-6, 0.35e-6, 0.8e-6],
            "vsb": [0.0, 0.3, 0.8],
            "vds": [0.0, 0.03, 0.06, 0.1, 0.15, 0.21, 0.3, 0.42, 0.58, 0.8, 1.05, 1.32],
            "vgs": [-0.2, -0.1, *np.arange(0.0, 0.901, 0.05), 1.05, 1.2],
        },
        cards={name: {**card, "igcmod": 0, "igbmod": 0} for name, card in REED.cards.items()},
    ),
}  # fmt: skip
"""Just what an amplifier needs; tables hold no gate current, so gates do not leak here."""

REQUESTS = {
    "birch250": """
        [supply]
        voltage = "2.5 V"
        tolerance = "10 %"
        reference_current = "4 uA"
        reference_tolerance = "10 %"
        [amplifier]
        input_pair = "p"
        output = "cascoded"
        common_mode_sense = "pairs"
        [demands]
        dc_gain = "70 dB"
        gbw = "15 MHz"
        phase_margin = "60 deg"
        load_capacitance = "1.5 pF"
        swing = "0.6 V"
        input_noise = { density = "100 nV/rtHz", at = "1 MHz" }
    """,
    "reed90": """
        [supply]
        voltage = "1.2 V"
        tolerance = "10 %"
        reference_current = "4 uA"
        reference_tolerance = "10 %"
        [amplifier]
        input_pair = "n"
        output = "plain"
        [demands]
        dc_gain = "36 dB"
        gbw = "60 MHz"
        phase_margin = "60 deg"
        load_capacitance = "0.5 pF"
        swing = "0.4 V"
        slew_rate = "30 V/us"
    """,
}


@dataclass(frozen=True, eq=False)
class Sized:
    """A request, its devices and what was found."""

    process: Process
    asked: Request
    bench: Bench
    found: SearchResult


@pytest.fixture(scope="module", params=REQUESTS)
def sized(request: pytest.FixtureRequest, shared_folder: Path) -> Sized:
    process = PROCESSES[request.param]
    path = shared_folder / f"sized-{process.name}.h5"
    with locked(path.with_suffix(".lock"), wait=300.0):
        if not path.exists():
            sweeps = [
                derive_missing(process.sweep(device, condition))[0]
                for condition in CONDITIONS
                for device in process.devices
            ]
            save_sweeps(path, sweeps, process=process.name)
    text = f"""
        format = 1
        title = "An amplifier on {process.name}"
        [process]
        table = "{path.name}"
        [process.devices]
        n = "nmos"
        p = "pmos"
        {REQUESTS[process.name]}
    """
    asked = parse_request(text, name=process.name, path=path.with_suffix(".toml"))
    bench = open_bench(asked.process)
    found = find_plan(
        asked.demands, load_capacitance=asked.load_capacitance,
        load_resistance=asked.load_resistance, bench=bench, roles=asked.process.devices,
        supply=asked.supply, choices=asked.choices, matching=asked.matching,
    )  # fmt: skip
    return Sized(process, asked, bench, found)


def run(sized: Sized) -> Iterator[tuple[str, Prediction, SimulatedPlan]]:
    """Predict and simulate in every condition, at low and high supply."""
    asked, plan = sized.asked, sized.found.plan
    for condition, devices in sized.bench:
        models = sized.process.models(condition.corner)
        models += f"\n.options temp={condition.temperature:g}\n"
        for voltage in asked.supply.voltages[[0, 2]]:
            predicted = predict(plan, devices, asked.supply, voltage=float(voltage))
            yield f"{condition}/{voltage:g}", predicted, simulate_plan(
                plan, asked.supply, devices, models, voltage=float(voltage),
                gbw=float(predicted.signal.gbw), parts=PARTS, noise_frequency=NOISE,
            )  # fmt: skip


def list_excess(predicted: Prediction, seen: SimulatedPlan) -> dict[str, float]:
    """Give differences over what is allowed, by figure."""
    kinds = {"node": "node_voltages", "common_mode.dc_gain_db": "common_mode_gain_db"}
    found = {}
    for one in compare_plan(predicted, seen):
        kind = kinds.get(one.name.split()[0], one.name.split()[0])
        if kind in LIMITS:
            size = one.difference if one.unit in ("dB", "deg", "V") else one.relative
            found[one.name] = abs(size) / LIMITS[kind]
    return found


def test_what_is_met_in_the_table_is_met_and_predicted_in_the_simulator(sized):
    assert sized.found.met, sized.found.suggestion
    assert len(sized.bench.conditions) >= 3
    least = {name: one.value for name, one in sized.asked.demands.items()}
    for label, predicted, seen in run(sized):
        assert seen.dc_gain_db >= least["dc_gain"], label
        assert seen.gbw >= least["gbw"], label
        assert seen.phase_margin >= least["phase_margin"], label
        if "input_noise" in least:
            assert seen.input_noise[1] <= least["input_noise"], label
        outputs = [seen.node_voltages[node] for node in ("vop", "von")]
        assert abs(np.mean(outputs) - 0.5 * float(predicted.voltage)) < 5e-3, label
        excess = list_excess(predicted, seen)
        assert len(excess) > 10
        assert max(excess.values()) < 1.0, (label, max(excess, key=lambda name: excess[name]))
