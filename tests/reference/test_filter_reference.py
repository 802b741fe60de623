"""Whole filters with transistor-level amplifiers against the reference simulation of their deck.

The promise: within 0.05 dB over the passband in every condition; the start-up settles; the third
harmonic at full swing within 2 dB where it is above -70 dB.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest

from gmid.amplifier import AmplifierPlan, Variant
from gmid.amplifier.drafting import Draft, draft_plan
from gmid.amplifier.filtering.distortion import find_amplitude, measure_harmonic
from gmid.amplifier.filtering.realised import realise_filter
from gmid.amplifier.filtering.transconductors import choose_multiples, fit_elements
from gmid.amplifier.plan import Supply
from gmid.condition import Condition
from gmid.filters import FilterSpec, Passives, Realisation, realise
from gmid.simulation.filters import simulate_filter
from reference.amplifier_cases import LENGTHS, find_devices, find_models

pytestmark = pytest.mark.reference

CONDITIONS = ("tt/27", "ss/-40", "ss/125", "ff/-40", "ff/125", "sf/27", "fs/27")
PASSIVES = Passives(bottom_plate=0.05, resistor_capacitance=20e-21)
SUPPLIES = {"larch180": Supply(1.8, 2e-6, tolerance=0.1), "birch350": Supply(3.3, 20e-6)}


@dataclass(frozen=True)
class Case:
    """A filter and its amplifiers."""

    process: str
    spec: FilterSpec
    variant: Variant
    tail: float
    capacitor: float = 4e-12

    def make(self) -> tuple[Realisation, tuple[AmplifierPlan, ...]]:
        devices, supply = find_devices(self.process, "tt/27"), SUPPLIES[self.process]
        draft = Draft(
            {"n": "nmos", "p": "pmos"}, self.variant, self.tail, 1e-12, 200e3,
            length=LENGTHS.get(self.process, {}),
        )  # fmt: skip
        base = replace(draft_plan(draft, devices, supply), output_capacitance=0.5e-12)
        made = realise(self.spec, capacitor=self.capacitor, passives=PASSIVES)
        names = [place.name for place in made.amplifiers]
        if self.spec.style != "gm-c":
            multiples = {name: 1 + k % 2 for k, name in enumerate(names)}
        else:
            multiples = choose_multiples(made)
            base = replace(base, output_capacitance=0.0)
            made = fit_elements(made, multiples, 150e-6)
        plans = [
            replace(base, name=f"a{m}", multiple=m,
                    positions=tuple(n for n in names if multiples[n] == m))
            for m in sorted(set(multiples.values()))
        ]  # fmt: skip
        return made, tuple(plans)


ACTIVE = Case(
    "larch180",
    FilterSpec(
        response="chebyshev", order=3, edge=400e3, ripple_db=0.5, load_capacitance=0.5e-12,
        load_resistance=1e6, source_resistance=1e3,
    ),
    Variant("n", "plain", "resistors"),
    15e-6,
)  # fmt: skip
BANDPASS = Case(
    "larch180",
    FilterSpec(response="butterworth", kind="bandpass", order=1, edge=(80e3, 120e3)),
    Variant("p", "cascoded", "pairs"),
    10e-6,
)
GM_C = Case(
    "larch180",
    FilterSpec(response="butterworth", order=2, edge=2e6, style="gm-c", load_capacitance=0.2e-12),
    Variant("n", "cascoded", "pairs"),
    4e-6,
    12e-12,
)
OTHER = Case(
    "birch350",
    FilterSpec(response="butterworth", order=2, edge=400e3),
    Variant("n", "plain", "resistors"),
    60e-6,
)


def _error_db(case: Case, condition: str, voltage: float, r: float = 1.0, c: float = 1.0) -> float:
    made, plans = case.make()
    by_position = {name: plan for plan in plans for name in plan.positions}
    supply, devices = SUPPLIES[case.process], find_devices(case.process, condition)
    found = realise_filter(made, by_position, devices, supply, voltage=voltage)
    models = find_models(case.process, Condition.parse(condition))
    seen = simulate_filter(
        made, plans, supply, devices, models, voltage=voltage, rscale=r, cscale=c, parts=["ac"]
    )
    low, high = case.spec.passband
    inside = (seen.frequency >= low) & (seen.frequency <= high)
    predicted = found.respond(seen.frequency, rscale=r, cscale=c)
    return float(np.abs(20 * np.log10(np.abs(seen.response / predicted)))[inside].max())


@pytest.mark.parametrize("condition", CONDITIONS)
@pytest.mark.parametrize("case", [ACTIVE, GM_C], ids=["active-rc", "gm-c"])
def test_the_passband_is_as_predicted_in_every_condition(case: Case, condition: str):
    assert _error_db(case, condition, 1.8) < 0.05


@pytest.mark.parametrize(
    ("case", "condition", "voltage", "r", "c"),
    [
        (ACTIVE, "ss/125", 1.62, 1.18, 1 / 1.18),
        (ACTIVE, "ff/-40", 1.98, 0.82, 0.88),
        (BANDPASS, "tt/27", 1.8, 1.0, 1.0),
        (BANDPASS, "ss/-40", 1.8, 1.2, 1.1),
        (GM_C, "ss/-40", 1.62, 1.0, 0.8),
        (OTHER, "tt/27", 3.3, 1.0, 1.0),
        (OTHER, "ss/-40", 3.0, 1.1, 0.9),
    ],
)
def test_corners_bandpass_and_another_process_are_as_predicted(
    case: Case, condition: str, voltage: float, r: float, c: float
):
    assert _error_db(case, condition, voltage, r, c) < 0.05


@pytest.mark.parametrize("case", [ACTIVE, GM_C], ids=["active-rc", "gm-c"])
def test_the_start_up_settles_at_the_predicted_point(case: Case):
    made, plans = case.make()
    by_position = {name: plan for plan in plans for name in plan.positions}
    supply, devices = SUPPLIES[case.process], find_devices(case.process, "tt/27")
    found = realise_filter(made, by_position, devices, supply, voltage=1.8)
    models = find_models(case.process, Condition.parse("tt/27"))
    seen = simulate_filter(made, plans, supply, devices, models, parts=["startup"])
    assert seen.startup_error < 1e-4
    assert set(found.node_voltages) <= set(seen.node_voltages)
    errors = [abs(float(v) - seen.node_voltages[n]) for n, v in found.node_voltages.items()]
    assert max(errors) < 0.5e-3


def test_the_third_harmonic_at_full_swing_is_as_predicted():
    made, plans = ACTIVE.make()
    by_position = {name: plan for plan in plans for name in plan.positions}
    supply, devices = SUPPLIES["larch180"], find_devices("larch180", "ss/125")
    found = realise_filter(made, by_position, devices, supply, voltage=1.62)
    tone = (400e3 / 3, find_amplitude(found, 0.8))
    harmonic = measure_harmonic(found, devices, supply, frequency=tone[0], amplitude=tone[1])
    models = find_models("larch180", Condition.parse("ss/125"))
    seen = simulate_filter(
        made, plans, supply, devices, models, voltage=1.62, parts=["distortion"], tone=tone
    )
    assert seen.harmonic_db > -70
    assert float(harmonic.decibels) == pytest.approx(seen.harmonic_db, abs=2.0)
