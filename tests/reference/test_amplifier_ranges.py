"""Where an amplifier stops working: input range, output swing, common-mode sensing.

Found in the simulator by stepping the exported bench and looking at every device on its own.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
import pytest

from gmid.amplifier import Prediction, Variant, predict
from gmid.amplifier.large import BY_GAIN
from reference.amplifier_cases import CASES, Case, find_devices, make_plan
from reference.flattened import Flat, flatten, measure_headroom, read_nodes

pytestmark = pytest.mark.reference

MARGIN = 0.05
ROOM = 5e-3
"""What an edge of saturation may be off [V], as in the checks of devices."""

SENSED = {
    "n plain followers": Case("larch180", Variant("n", "plain", "followers"), "ss/-40", 1.62,
                              follower="nmos_low"),
    "p plain followers": Case("larch180", Variant("p", "plain", "followers"), "tt/27", 1.98),
    "n plain pairs": Case("larch180", Variant("n", "plain", "pairs"), "fs/27", 1.8),
    "p cascoded pairs": Case("larch180", Variant("p", "cascoded", "pairs"), "ss/125", 1.8,
                             resistance=1e15),
}  # fmt: skip

OTHERS = {
    "n plain resistors": Case("larch180", Variant("n", "plain", "resistors"), "tt/27", 1.8),
    "p plain resistors": Case("larch180", Variant("p", "plain", "resistors"), "sf/27", 1.62,
                              tail=16e-6, ratio=2.0),
    "n cascoded resistors": Case("larch180", Variant("n", "cascoded", "resistors"), "tt/27", 1.8,
                                 resistance=1e15),
}  # fmt: skip


@dataclass(frozen=True, eq=False)
class Made:
    """An amplifier, predicted and exported."""

    case: Case
    predicted: Prediction
    flat: Flat

    def at_input(self, difference: float) -> dict[str, float]:
        """Give the nodes at a differential input, reached from zero in the simulator."""
        swept = self.flat.run(f".dc vid 0 {difference:.12g} {difference / 4:.12g}")
        return read_nodes(swept, -1)

    def at_level(self, level: float) -> dict[str, float]:
        """Give the nodes at an input common mode."""
        return self.flat.nodes(changes={"evic vic": f"vic vic 0 dc {level:.12g}"})

    def find_input(self, output: float) -> float:
        """Find the differential input for an output [V]."""
        gain = float(self.predicted.signal.dc_gain)
        swept = self.flat.run(f".dc vid 0 {4 * output / gain:.12g} {output / gain / 100:.12g}")
        return float(np.interp(output, swept.voltage("vdiff"), swept.swept))


CUT_OFF = "n plain followers, cut off by their resistors"


def make(case: Case, **changes: float) -> Made:
    plan, supply = make_plan(case)
    plan = replace(plan, **changes)
    devices = find_devices(case.process, case.condition)
    return Made(case, predict(plan, devices, supply, voltage=case.level),
                flatten(case, plan, supply))  # fmt: skip


@pytest.fixture(scope="module", params=[*OTHERS, *SENSED])
def made(request) -> Made:
    return make((OTHERS | SENSED)[request.param])


@pytest.fixture(scope="module", params=[*SENSED, CUT_OFF])
def sensed(request) -> Made:
    if request.param == CUT_OFF:
        return make(SENSED["n plain followers"], sense_resistance=80e3)
    return make(SENSED[request.param])


def find_end(left: Callable[[float], float], start: float, stop: float, steps: int) -> float:
    """Walk from a start where something is left until nothing is, then halve the last step."""
    points = np.linspace(start, stop, steps + 1)
    assert left(start) > 0
    for low, high in pairwise(points):
        if left(high) <= 0:
            for _ in range(6):
                middle = 0.5 * (low + high)
                low, high = (middle, high) if left(middle) > 0 else (low, middle)
            return 0.5 * float(low + high)
    return stop


def test_the_input_range(made):
    """Every device keeps the margin at all input levels between the ends, and not beyond."""
    found = made.predicted.input_range(MARGIN)
    level = 0.5 * made.case.level

    def left(at: float) -> float:
        return min(measure_headroom(made.flat, made.at_level(at)).values()) - MARGIN

    assert float(found.low) == pytest.approx(find_end(left, level, 0.0, 8), abs=ROOM)
    assert float(found.high) == pytest.approx(find_end(left, level, made.case.level, 8), abs=ROOM)


def test_the_output_swing_by_saturation(made):
    """The output at which the first device comes inside the margin: 3 %, and the device named."""
    swing = made.predicted.output_swing(MARGIN)
    reached = float(swing.by_saturation)
    last = made.find_input(1.1 * reached)

    def left(difference: float) -> float:
        return min(measure_headroom(made.flat, made.at_input(difference)).values()) - MARGIN

    nodes = made.at_input(find_end(left, 1e-9, last, 8))
    assert nodes["vdiff"] == pytest.approx(reached, rel=0.03)
    name = str(made.predicted.output_swing(MARGIN).limit)
    if swing.by_gain < swing.by_saturation:
        assert name == BY_GAIN
    else:
        rooms = measure_headroom(made.flat, nodes)
        assert rooms[name] == pytest.approx(min(rooms.values()), abs=1e-3)


def measure_sensing_gain(made: Made, nodes: dict[str, float]) -> float:
    """Hold both outputs, move either a little, and watch the gates of `control`: the less seen."""
    step, gains = 1e-5, []
    for moved in ("vop", "von"):
        held = [f"eat{node} {node}0 0 x 0 {int(node == moved)}" for node in ("vop", "von")]
        held += [f"vat{node} {node} {node}0 dc {nodes[node]:.15g}" for node in ("vop", "von")]
        swept = made.flat.run(
            f".dc vx {-step} {step} {step}",
            {"vid vid": f"vid vid 0 dc {nodes['vid']:.15g}"}, more=[*held, "vx x 0 dc 0"],
        )  # fmt: skip
        gate = swept.voltage("cm_drive")
        gains.append(abs(float(gate[2] - gate[0])) / (2 * step))
    return min(gains)


def test_the_range_of_the_sensing(sensed):
    """The output at which the gain from one of the outputs has fallen by 3 dB: 3 %."""
    reached = float(sensed.predicted.sensing.peak)
    assert np.isfinite(reached)
    rest = measure_sensing_gain(sensed, sensed.at_input(1e-9))
    assert rest > 10

    def left(difference: float) -> float:
        return measure_sensing_gain(sensed, sensed.at_input(difference)) / rest - np.sqrt(0.5)

    end = find_end(left, 1e-9, sensed.find_input(1.1 * reached), 8)
    assert sensed.at_input(end)["vdiff"] == pytest.approx(reached, rel=0.03)


def test_the_starved_device_of_the_sensing(sensed):
    """The one that has lost more of its current than any other of the sensing, where it ends."""
    found = sensed.predicted.sensing
    rest = _currents(sensed, 0.0)
    there = _currents(sensed, sensed.find_input(float(found.peak)))
    kept = {name: there[name] / rest[name] for name in rest}
    assert kept[str(found.starved)] == pytest.approx(min(kept.values()), abs=0.02)
    assert kept[str(found.starved)] < 0.75


def _currents(made: Made, difference: float) -> dict[str, float]:
    """Measure the drain currents of the sensing's devices by sources in their drains."""
    parts = ("follower", "sense", "error_pair", "error_tail")
    units, more = [], []
    for unit in made.flat.units:
        if unit.name[1:].startswith(parts):
            more.append(f"vi{unit.name[1:]} {unit.drain} i{unit.name[1:]} dc 0")
            units.append(replace(unit, drain=f"i{unit.name[1:]}"))
        else:
            units.append(unit)
    step = max(difference, 1e-9) / 4
    swept = made.flat.run(f".dc vid 0 {4 * step:.12g} {step:.12g}", units=units, more=more)
    names = [line.split()[0] for line in more]
    return {name[2:]: abs(float(swept.current(name)[-1])) for name in names}


def test_resistors_sense_as_far_as_the_outputs_go():
    """Where nothing is between outputs and resistors the sensing's gain stays within 3 dB."""
    for case in OTHERS.values():
        made = make(case)
        assert np.isinf(float(made.predicted.sensing.peak))
        rest = measure_sensing_gain(made, made.at_input(1e-9))
        end = made.find_input(float(made.predicted.output_swing().by_gain))
        assert measure_sensing_gain(made, made.at_input(end)) / rest > 0.97


def test_followers_that_reach_further_than_the_outputs():
    case = next(c for c in CASES if str(c.variant) == "n-input, cascoded, followers")
    made = make(case)
    assert np.isinf(float(made.predicted.sensing.peak))
    rest = measure_sensing_gain(made, made.at_input(1e-9))
    end = made.find_input(1.2 * float(made.predicted.output_swing().by_gain))
    assert measure_sensing_gain(made, made.at_input(end)) / rest > np.sqrt(0.5)
