"""Offset and rejection that mismatch makes, against the exported netlist with unlike devices.

A device's threshold is moved by a source in series with its gate, its current factor by a
current source beside it that carries a share of its current.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
import pytest

from gmid.amplifier import AmplifierPlan, Matching, Prediction, Supply, Variant, predict
from reference.amplifier_cases import Case, find_devices, make_plan
from reference.flattened import Flat, Unit, by_instance, flatten, place_of, stand_alone

pytestmark = pytest.mark.reference

RULES = {
    "larch_n": Matching(3.5e-9, 1.0e-8),
    "larch_p": Matching(4.2e-9, 1.2e-8),
    "larch_n_low": Matching(4.0e-9, 1.0e-8),
}
"""By model, invented: sigma of the difference of two devices."""

NAMES = {"larch_n": "nmos", "larch_p": "pmos", "larch_n_low": "nmos_low"}

CASES = [
    Case("larch180", Variant("n", "plain", "resistors"), "tt/27", 1.8),
    Case("larch180", Variant("n", "cascoded", "pairs"), "ss/-40", 1.62, tail=12e-6,
         resistance=1e15),
    Case("larch180", Variant("p", "plain", "followers"), "ff/125", 1.98),
]  # fmt: skip


def _name(case: Case) -> str:
    return case.label.replace(",", "").replace(" ", "-")


SAMPLES = 200
SHORT = "rshort vop von 2k"
"""Lets the output follow the input over millivolts; where it is zero the load carries nothing."""

SPAN = 0.02
STEP = 1e-3
LIMIT = 0.05


def sigmas(unit: Unit) -> tuple[float, float]:
    """Give sigma of one device's threshold [V] and relative current factor by the law of area."""
    rule = RULES[unit.model]
    root = math.sqrt(2 * unit.sizes["w"] * unit.sizes["l"] * unit.sizes["m"])
    return rule.avt / root, rule.abeta / root


def shift(k: int, unit: Unit, threshold: float, factor: float) -> tuple[Unit, list[str]]:
    """Make a device that differs, and what it takes beside it."""
    lines = [
        f"vgate{k} {unit.gate} gate{k} dc {unit.sign * threshold:.12g}",
        f"vsense{k} {unit.drain} drain{k} dc 0",
        f"fbeside{k} {unit.drain} {unit.source} vsense{k} {factor:.12g}",
    ]
    return replace(unit, gate=f"gate{k}", drain=f"drain{k}"), lines


def measure_offset(flat: Flat, thresholds: np.ndarray, factors: np.ndarray) -> float:
    """Find the differential input at which the differential output is zero [V]."""
    units, more = [], [SHORT]
    for k, unit in enumerate(flat.units):
        other, lines = shift(k, unit, thresholds[k], factors[k])
        units.append(other)
        more += lines
    swept = flat.run(f".dc vid {-SPAN} {SPAN} {SPAN / 2}", units=units, more=more)
    output = swept.voltage("vdiff")
    assert output[0] < 0 < output[-1]
    return float(np.polynomial.Polynomial.fit(output, swept.swept, 4)(0.0))


@dataclass(frozen=True, eq=False)
class Judged:
    """An amplifier, and what its devices' differences do to it in the simulator."""

    plan: AmplifierPlan
    predicted: Prediction
    flat: Flat

    @cached_property
    def sigma(self) -> np.ndarray:
        """Threshold and factor of every device, shape (2, units)."""
        return np.array([sigmas(unit) for unit in self.flat.units]).T

    @cached_property
    def by_place(self) -> Mapping[str, float]:
        """Variance of the offset by place, from moving every device both ways by its sigma."""
        found = dict.fromkeys(self.plan.transistors, 0.0)
        for k, unit in enumerate(self.flat.units):
            place = place_of(unit.name[1:], list(found))
            for row in (0, 1):
                moved = np.zeros_like(self.sigma)
                moved[row, k] = self.sigma[row, k]
                up, down = (measure_offset(self.flat, *(sign * moved)) for sign in (1, -1))
                found[place] += (0.5 * (up - down)) ** 2
        return found

    @cached_property
    def offset(self):
        return self.predicted.offset({NAMES[model]: rule for model, rule in RULES.items()})


def judge(case: Case, plan: AmplifierPlan, supply: Supply) -> Judged:
    devices = find_devices(case.process, case.condition)
    return Judged(plan, predict(plan, devices, supply, voltage=case.level),
                  flatten(case, plan, supply))  # fmt: skip


@pytest.fixture(scope="module", params=CASES, ids=_name)
def judged(request) -> Judged:
    return judge(request.param, *make_plan(request.param))


def test_the_offset_of_each_place(judged):
    """Every device moved alone in the simulator; places that matter, and the sum."""
    total = sum(judged.by_place.values())
    assert float(judged.offset.sigma) == pytest.approx(math.sqrt(total), rel=LIMIT)
    for place, variance in judged.by_place.items():
        found = float(judged.offset.variance[place])
        if variance > 1e-4 * total:
            assert math.sqrt(found) == pytest.approx(math.sqrt(variance), rel=LIMIT), place
        else:
            assert found < 2e-4 * total, place


def test_the_offset_against_its_closed_form(judged):
    """Mirror factors and transconductances measured in the simulator, device by device.

    sigma^2 = 2 [(Kd+Ko)^2 (S_pair+S_load) + m^2 (S_copy+S_turn) + S_direct + S_opposite
    + S_control] / ((Kd+Ko) gm_pair)^2, S the variance of one device's current.
    """
    alone = stand_alone(judged.flat, judged.flat.nodes())
    gm, gds, current = alone.measure_conductances()
    names = [unit.name[1:] for unit in judged.flat.units]
    at = {place: names.index(f"{place}_p") for place in
          ("pair", "load", "direct", "copy", "turn", "opposite", "control")}  # fmt: skip
    s = {k: (gm[i] * judged.sigma[0, i]) ** 2 + (current[i] * judged.sigma[1, i]) ** 2
         for k, i in at.items()}  # fmt: skip
    load, turn, copy = at["load"], at["turn"], at["copy"]
    gl = gm[load] + gds[load] + gds[at["pair"]]
    gt = gm[turn] + gds[turn] + gds[copy]
    turned = gm[at["opposite"]] / gt
    both = gm[at["direct"]] / gl + gm[copy] / gl * turned
    inner = both**2 * (s["pair"] + s["load"]) + turned**2 * (s["copy"] + s["turn"])
    power = 2 * (inner + s["direct"] + s["opposite"] + s["control"])
    closed = math.sqrt(power) / (both * gm[at["pair"]])
    assert float(judged.offset.sigma) == pytest.approx(closed, rel=LIMIT)


@pytest.mark.parametrize("case", CASES[:2], ids=_name)
def test_the_offset_of_sampled_amplifiers(case):
    """All devices differ at once, 200 times: the spread of offsets, and no shift of their mean.

    Samples are made uncorrelated and of unit variance exactly, as they are on average: a spread
    of independent ones would be 5 % uncertain with so few.
    """
    judged = judge(case, *make_plan(case))
    count = judged.sigma.size
    drawn = np.random.default_rng(20).standard_normal((SAMPLES, count))
    whole, _ = np.linalg.qr(drawn - drawn.mean(axis=0))
    samples = (whole * math.sqrt(SAMPLES)).reshape(SAMPLES, *judged.sigma.shape)
    assert np.abs(samples).max() > 3.0
    offsets = [measure_offset(judged.flat, *(one * judged.sigma)) for one in samples]
    assert float(judged.offset.sigma) == pytest.approx(np.std(offsets), rel=LIMIT)
    assert abs(np.mean(offsets)) < 0.05 * np.std(offsets)


def test_a_stack_of_unlike_units():
    """Each unit of a stack differs from the others; its lower ones hardly matter in saturation."""
    case = CASES[0]
    plan, supply = make_plan(case)
    for place in ("load", "direct", "copy"):
        plan = plan.with_place(place, stack=2, length=0.55e-6)
    judged = judge(case, plan, supply)
    total = sum(judged.by_place.values())
    assert float(judged.offset.sigma) == pytest.approx(math.sqrt(total), rel=LIMIT)
    share = math.sqrt(judged.by_place["load"])
    assert math.sqrt(float(judged.offset.variance["load"])) == pytest.approx(share, rel=LIMIT)


def test_rejection_at_one_sigma(judged):
    """Gains from supply and input common mode to the differential output, device by device."""
    level = f"{float(judged.predicted.voltage) / 2:.12g}"
    fixed = {"vid vid": "vid vid 0 dc 0", "evcm vcm": f"vcm vcm 0 dc {level}"}
    driven = {
        "supply": {**fixed, "vdd vdd": "vdd vdd 0 dc {vsupply} ac 1",
                   "evic vic": f"vic vic 0 dc {level}"},
        "common_mode": {**fixed, "evic vic": f"vic vic 0 dc {level} ac 1"},
    }  # fmt: skip
    gm, _, current = stand_alone(judged.flat, judged.flat.nodes()).measure_conductances()
    spread = np.hypot(gm / current * judged.sigma[0], judged.sigma[1])
    stacked = {unit.name for stack in by_instance(judged.flat.units).values() for unit in stack[1:]}
    found = judged.predicted.rejection({NAMES[model]: rule for model, rule in RULES.items()})
    for way, changes in driven.items():
        parts = []
        for k, unit in enumerate(judged.flat.units):
            other, more = shift(k, unit, 0.0, STEP)
            units = [*judged.flat.units[:k], other, *judged.flat.units[k + 1 :]]
            result = judged.flat.run(".ac lin 1 1 1", changes, units=units, more=more)
            parts.append(abs(result.voltage("vdiff")[0]) / STEP * spread[k])
            if unit.name in stacked:  # the cascodes' bias, which both sides share
                assert parts[-1] < 1e-4 * getattr(found, way)
        expected = math.hypot(*parts)
        assert float(getattr(found, way)) == pytest.approx(expected, rel=LIMIT), way
