"""Amplifiers over three invented processes, each in some conditions, predicted and simulated."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path

import numpy as np

from gmid.amplifier import AmplifierPlan, Prediction, Supply, Variant, predict
from gmid.amplifier.drafting import Draft, draft_plan
from gmid.condition import Condition
from gmid.device import Device
from gmid.simulation.plans import SimulatedPlan, simulate_plan
from gmid.sweep.derive import derive_missing
from gmid.table.table import open_grid_data
from reference.cards import BIRCH, REED, Process

ROOT = Path(__file__).resolve().parents[2]

LIMITS = {
    "dc_gain_db": 0.1, "gbw": 0.003, "phase_margin": 0.2, "input_noise": 0.005,
    "supply_current": 0.001, "node_voltages": 0.5e-3, "common_mode_gain_db": 0.2,
}  # fmt: skip
"""[dB], relative, [deg], relative, relative, [V], [dB]: 95 % within, none beyond twice."""

FAST = ("bias", "open_loop", "common_mode", "noise")
NOISE = (1e3, 1e6)


@dataclass(frozen=True)
class Case:
    """One amplifier in one condition at one supply."""

    process: str
    variant: Variant
    condition: str
    level: float
    tail: float = 8e-6
    load: float = 1e-12
    resistance: float = 1e6
    ratio: float = 2.5
    pair: float = 16.0
    follower: str | None = None

    @property
    def label(self) -> str:
        return f"{self.process} {self.variant} {self.condition}/{self.level:g}"


def _larch(form: str, condition: str, level: float, **more: object) -> Case:
    return Case("larch180", Variant(*form.split()), condition, level, **more)  # type: ignore[arg-type]


CASES = [
    _larch("n plain resistors", "tt/27", 1.8),
    _larch("n plain resistors", "ss/-40", 1.62, ratio=3.0),
    _larch("n plain resistors", "fs/27", 1.98, tail=20e-6, load=3e-12),
    _larch("n plain resistors", "ff/125", 1.98, tail=4e-6, pair=18.0),
    _larch("n plain resistors", "ss/125", 1.62, ratio=4.0, load=4e-12, resistance=150e3),
    _larch("p plain resistors", "tt/27", 1.8, tail=12e-6),
    _larch("p plain resistors", "ss/-40", 1.62, pair=18.0, load=2e-12),
    _larch("p plain resistors", "sf/27", 1.62, tail=16e-6, ratio=2.0),
    _larch("p plain resistors", "ff/-40", 1.98, tail=6e-6),
    _larch("p plain resistors", "ff/125", 1.8, load=0.5e-12),
    _larch("n plain followers", "ss/-40", 1.62, follower="nmos_low"),
    _larch("n cascoded resistors", "tt/27", 1.8, resistance=1e15),
    _larch("n cascoded followers", "sf/27", 1.8, resistance=1e15, follower="nmos_low"),
    _larch("n cascoded pairs", "ss/-40", 1.62, tail=12e-6, resistance=1e15),
    _larch("n plain pairs", "fs/27", 1.62),
    _larch("p plain followers", "tt/27", 1.98),
    _larch("p cascoded resistors", "ff/125", 1.98, resistance=1e15),
    _larch("p cascoded followers", "fs/27", 1.98, resistance=1e15),
    _larch("p cascoded pairs", "ss/125", 1.8, resistance=1e15, load=3e-12),
    Case("birch350", Variant("n", "plain", "resistors"), "tt/27", 3.3, tail=40e-6),
    Case("birch350", Variant("n", "cascoded", "pairs"), "ss/-40", 3.0, 40e-6, 2e-12, 1e15),
    Case("birch350", Variant("p", "cascoded", "followers"), "ss/-40", 3.3, 40e-6, 1e-12, 1e15),
    Case("birch350", Variant("p", "plain", "resistors"), "tt/27", 3.6, 40e-6, 3e-12),
    Case("reed90", Variant("n", "plain", "resistors"), "tt/27", 1.2, tail=40e-6),
    Case("reed90", Variant("p", "plain", "pairs"), "tt/27", 1.2, tail=40e-6, resistance=200e3),
]  # fmt: skip


@dataclass(frozen=True, eq=False)
class Outcome:
    """What was predicted and simulated of a case."""

    case: Case
    plan: AmplifierPlan
    predicted: Prediction
    simulated: SimulatedPlan

    def differences(self) -> Iterator[tuple[str, float]]:
        """Yield the differences by the names of `LIMITS`."""
        p, s = self.predicted, self.simulated
        yield "dc_gain_db", float(p.signal.dc_gain_db) - s.dc_gain_db
        yield "gbw", float(p.signal.gbw) / s.gbw - 1
        yield "phase_margin", float(p.signal.phase_margin) - s.phase_margin
        noise = p.noise(NOISE).input_density / s.input_noise - 1
        yield "input_noise", float(np.abs(noise).max())
        yield "supply_current", float(p.supply_current) / s.supply_current - 1
        nodes = p.node_voltages
        assert set(nodes) <= set(s.node_voltages)
        errors = [abs(float(nodes[name]) - s.node_voltages[name]) for name in nodes]
        yield "node_voltages", max(errors)
        yield "common_mode_gain_db", float(p.common_mode.dc_gain_db) - s.common_mode[0]


def run_case(case: Case, parts: tuple[str, ...] = FAST) -> Outcome:
    """Predict and simulate one case."""
    return run_plan(case, *make_plan(case), parts)


def run_plan(
    case: Case, plan: AmplifierPlan, supply: Supply, parts: tuple[str, ...] = FAST
) -> Outcome:
    """Predict and simulate a plan in the condition of a case."""
    condition = Condition.parse(case.condition)
    devices = find_devices(case.process, case.condition)
    predicted = predict(plan, devices, supply, voltage=case.level)
    simulated = simulate_plan(
        plan, supply, devices, find_models(case.process, condition), voltage=case.level,
        gbw=float(predicted.signal.gbw), parts=parts, noise_frequency=NOISE,
    )  # fmt: skip
    return Outcome(case, plan, predicted, simulated)


def make_plan(case: Case) -> tuple[AmplifierPlan, Supply]:
    """Draft a plan at the typical condition."""
    names = {"n": "nmos", "p": "pmos"}
    if case.follower:
        names["follower"] = case.follower
    nominal, reference = _SUPPLIES[case.process]
    supply = Supply(nominal, reference, tolerance=0.1)
    draft = Draft(
        names, case.variant, case.tail, case.load, case.resistance, ratio=case.ratio,
        gm_over_id={"pair": case.pair}, length=LENGTHS.get(case.process, {}),
    )  # fmt: skip
    return draft_plan(draft, find_devices(case.process, "tt/27"), supply), supply


_SUPPLIES = {"larch180": (1.8, 2e-6), "birch350": (3.3, 20e-6), "reed90": (1.2, 20e-6)}

LENGTHS = {
    "birch350": {"pair": 0.55e-6, "mirror": 1.4e-6, "turn": 1.4e-6, "source": 1.4e-6,
                 "other": 1.4e-6, "cascode": 0.55e-6, "follower": 0.55e-6},
    "reed90": {"pair": 0.18e-6, "mirror": 0.5e-6, "turn": 0.5e-6, "source": 0.5e-6,
               "other": 0.5e-6, "cascode": 0.18e-6, "follower": 0.18e-6},
}  # fmt: skip

_GRIDS = {
    "birch350": {
        "length": [0.55e-6, 1.4e-6], "vsb": [0.0, 0.4, 1.0, 2.2],
        "vds": [0.0, 0.04, 0.08, 0.13, 0.18, 0.24, 0.32, 0.42, 0.56, 0.75, 1.0, 1.35, 1.8, 2.3,
                2.9, 3.7],
        "vgs": [-0.2, *np.arange(0.0, 1.501, 0.05), 1.65, 1.9, 2.3],
    },
    "reed90": {
        "length": [0.18e-6, 0.5e-6], "vsb": [0.0, 0.3, 0.7],
        "vds": [0.0, 0.03, 0.06, 0.1, 0.15, 0.21, 0.3, 0.42, 0.58, 0.8, 1.05, 1.35],
        "vgs": [-0.2, -0.1, *np.arange(0.0, 0.901, 0.06), 1.0],
    },
}  # fmt: skip
"""Just what these amplifiers need."""

_TIGHT = {name: {**card, "igcmod": 0, "igbmod": 0} for name, card in REED.cards.items()}
_OWN = {
    "birch350": replace(BIRCH, grid=_GRIDS["birch350"]),
    "reed90": replace(REED, grid=_GRIDS["reed90"], cards=_TIGHT),
}
"""Tables hold no gate current, so the gates of reed90 do not leak here."""


@cache
def find_devices(process: str, condition: str) -> dict[str, Device]:
    """Read devices from the shipped table, or characterise them."""
    wanted = Condition.parse(condition)
    if process == "larch180":
        table = open_grid_data(ROOT / "tables" / "larch180.h5")
        return {name: Device(table.sweep(name, wanted)) for name in table.devices}
    own: Process = _OWN[process]
    return {name: Device(derive_missing(own.sweep(name, wanted))[0]) for name in own.devices}


def find_models(process: str, condition: Condition) -> str:
    """Give what a user's `models.inc` holds."""
    if process == "larch180":
        path = ROOT / "demo" / "larch180" / "models" / f"{condition.corner}.inc"
        cards = path.read_text(encoding="utf-8")
    else:
        cards = _OWN[process].models(condition.corner)
    return f"{cards}\n.options temp={condition.temperature:g}\n"
