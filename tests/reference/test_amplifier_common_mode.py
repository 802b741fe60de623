"""What reaches the output common mode, and the margin of the loop that holds it.

Gains from the inputs' common mode and from the supply, over frequency, and the loop gain by
injection of a voltage and of a current, all measured in the simulator.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest

from gmid.amplifier import Prediction, Variant, predict
from gmid.amplifier.signal import to_db
from gmid.simulation.plans import measure_sampled
from reference.amplifier_cases import Case, find_devices, make_plan
from reference.flattened import Flat, flatten

pytestmark = pytest.mark.reference

CASES = [
    Case("larch180", Variant("n", "plain", "resistors"), "ss/-40", 1.62, ratio=3.0),
    Case("larch180", Variant("p", "plain", "resistors"), "ff/125", 1.8, load=0.5e-12),
    Case("larch180", Variant("n", "cascoded", "followers"), "sf/27", 1.8, resistance=1e15,
         follower="nmos_low"),
    Case("larch180", Variant("p", "cascoded", "pairs"), "ss/125", 1.8, load=3e-12,
         resistance=1e15),
    Case("larch180", Variant("n", "plain", "pairs"), "fs/27", 1.98, resistance=150e3),
    Case("larch180", Variant("p", "plain", "followers"), "tt/27", 1.98),
]  # fmt: skip

QUIET = "vid vid 0 dc 0"
GAIN = 0.2
"""[dB], as for the loop's gain."""


@dataclass(frozen=True, eq=False)
class Made:
    """An amplifier, predicted and exported, with its levels held apart from the supply."""

    case: Case
    predicted: Prediction
    flat: Flat

    def mean(self, driven: str, analysis: str) -> np.ndarray:
        """Run an AC analysis with 1 V at `vdd` or `vic`; give the output common mode."""
        level = f"{0.5 * self.case.level:.12g}"
        drive = {driven: " ac 1"}
        result = self.flat.run(analysis, {
            "vid vid": QUIET,
            "vdd vdd": f"vdd vdd 0 dc {{vsupply}}{drive.get('vdd', '')}",
            "evic vic": f"vic vic 0 dc {level}{drive.get('vic', '')}",
            "evcm vcm": f"vcm vcm 0 dc {level}",
        })  # fmt: skip
        return 0.5 * (result.voltage("vop") + result.voltage("von"))

    def loop_margin(self, *, loaded: bool) -> float:
        """Measure the loop's phase margin by both injections, with the load resistors or not."""
        units = [
            replace(unit, gate="cm_gate") if unit.name.startswith("mcontrol") else unit
            for unit in self.flat.units
        ]
        changes = {"vid vid": QUIET}
        if not loaded:
            changes[".param rload"] = ".param rload=1e15"
        assert sum(unit.gate == "cm_gate" for unit in units) == 2
        sweep = ".ac dec 50 1 1e11"
        ends = "cm_drive cm_gate"
        by_voltage = self.flat.run(sweep, changes, units, [f"vprobe {ends} dc 0 ac 1"])
        voltage = -by_voltage.voltage("cm_drive") / by_voltage.voltage("cm_gate")
        by_current = self.flat.run(
            sweep, changes, units, [f"vprobe {ends} dc 0", "iprobe 0 cm_gate dc 0 ac 1"]
        )
        out = by_current.current("vprobe")
        current = -out / (out + 1.0)
        loop = 1 / (1 / (1 + voltage) + 1 / (1 + current)) - 1
        return measure_sampled(by_voltage.frequency, loop)[2]


def make(case: Case) -> Made:
    plan, supply = make_plan(case)
    devices = find_devices(case.process, case.condition)
    return Made(case, predict(plan, devices, supply, voltage=case.level),
                flatten(case, plan, supply))  # fmt: skip


@pytest.fixture(scope="module", params=CASES, ids=lambda case: case.label.replace(",", ""))
def made(request) -> Made:
    return make(request.param)


def test_the_gain_from_the_input_common_mode(made):
    """At DC, and its largest value over frequency."""
    loop = made.predicted.common_mode
    sizes = to_db(made.mean("vic", ".ac dec 50 1 1e10"))
    assert float(loop.input_to_output_gain_db) == pytest.approx(sizes[0], abs=GAIN)
    peak = float(to_db(loop.input_to_output_peak))
    assert peak == pytest.approx(sizes.max(), abs=GAIN)
    assert peak > sizes[0] + 20


def test_the_gain_from_the_supply(made):
    sizes = to_db(made.mean("vdd", ".ac lin 1 1 1"))
    assert float(to_db(made.predicted.common_mode.supply_gain)) == pytest.approx(sizes[0], abs=GAIN)


def test_the_margin_of_the_loop_itself(made):
    """The smaller of those with and without load resistors, which the sheet judges."""
    expected = min(made.loop_margin(loaded=loaded) for loaded in (True, False))
    assert float(made.predicted.loop_margin) == pytest.approx(expected, abs=0.5)
