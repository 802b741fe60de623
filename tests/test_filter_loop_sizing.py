"""The rounds between filter and amplifier, with a finder that knows one amplifier by heart."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pytest

from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.amplifier.filtering.grouping import (
    collect_requirements,
    find_noise_frequency,
    group_positions,
    make_plans,
    share_loads,
)
from gmid.amplifier.filtering.reviewing import review_filter
from gmid.amplifier.filtering.rounds import ROUNDS
from gmid.amplifier.filtering.sizing import FilterSizing, size_filter
from gmid.amplifier.plan import AmplifierPlan, Choices, Requirement
from gmid.filters import FilterSpec, Passives, Tolerance
from gmid.filters.demand import demands_of
from gmid.filters.demand_types import FilterDemands

DEVICES = example_devices()
BENCH = [(DEVICES["nmos"].condition, DEVICES)]
ROLES = {"n": "nmos", "p": "pmos"}
CHOICES = Choices(saturation_margin=0.01, common_mode_phase_margin=30.0)
SPEC = FilterSpec(
    response="butterworth",
    order=3,
    edge=50e3,
    swing=0.3,
    snr_db=58.0,
    noise_band=(100.0, 50e3),
    load_capacitance=0.2e-12,
)
TOLERANCE = Tolerance(passband_db=0.5, counts="tuned-shape")


@dataclass
class Finder:
    """Gives the example amplifier, and remembers what was asked of it."""

    asked: list[dict[str, Requirement]]
    loads: list[tuple[float, float]]
    met: bool = True

    def __call__(
        self, demands: dict[str, Requirement], *, load_capacitance: float, load_resistance: float,
        **_: Any,
    ) -> Any:  # fmt: skip
        self.asked.append(demands)
        self.loads.append((load_capacitance, load_resistance))
        plan = replace(example_plan(), demands=demands, load_capacitance=load_capacitance)
        fields = {"plan": plan, "suggestion": "", "floor": 1e-6, "met": self.met}
        return type("Result", (), fields)()


def _size(spec: FilterSpec = SPEC, *, met: bool = True) -> tuple[FilterSizing, Finder]:
    finder = Finder([], [], met)
    found = size_filter(
        spec, TOLERANCE, bench=BENCH, roles=ROLES, supply=example_supply(), choices=CHOICES,
        find=finder,
    )  # fmt: skip
    return found, finder


@pytest.fixture(scope="module")
def sized() -> tuple[FilterSizing, Finder]:
    return _size()


def test_a_filter_that_the_amplifier_serves_is_met(sized: tuple[FilterSizing, Finder]):
    found, _ = sized
    missed = [c.name for checks in found.amplifier_checks for c in checks if not c.met]
    assert missed == []
    assert found.review.is_met
    assert found.is_met
    names = [check.name for check in found.review.checks]
    assert names == ["passband", "snr", "damping", "common_mode_damping"]
    assert list(found.by_position) == ["A1", "A2", "A3"]
    assert found.review.largest_current >= found.review.supply_current > 0
    assert sum(found.review.noise_shares.values()) == pytest.approx(1.0, rel=1e-6)


def test_the_amplifiers_own_capacitances_are_in_the_demands(sized: tuple[FilterSizing, Finder]):
    found, _ = sized
    signal = found.predictions[0][0].signal
    for one in found.demands.demands:
        multiple = found.by_position[one.position].multiple / found.plans[0].multiple
        own = float(np.max(signal.output_capacitance)) * multiple
        assert one.load.own_capacitance == pytest.approx(own, rel=1e-3)


def test_every_demand_says_why_and_who(sized: tuple[FilterSizing, Finder]):
    found, finder = sized
    for plan in found.plans:
        assert {"gm_total", "excess_pole", "dc_gain", "output_current", "swing", "input_noise"} <= (
            set(plan.demands)
        )
        for demand in plan.demands.values():
            assert demand.because.startswith(plan.positions)
        assert plan.demands["input_noise"].at == pytest.approx(49.9e3 / np.log(500.0))
    assert finder.asked[0]["gm_total"].value > 0


def test_sizing_twice_gives_the_same(sized: tuple[FilterSizing, Finder]):
    again, _ = _size()
    for one, other in zip(sized[0].plans, again.plans, strict=True):
        assert float(np.asarray(one.output_capacitance)) == float(
            np.asarray(other.output_capacitance)
        )
        assert {k: v.value for k, v in one.demands.items()} == {
            k: v.value for k, v in other.demands.items()
        }


def test_an_amplifier_that_does_not_serve_is_said_to_miss():
    spec = SPEC.with_values(edge=5e6, noise_band=(100.0, 5e6))
    found, finder = _size(spec, met=False)
    assert not found.is_met
    assert 1 <= len(finder.asked) <= ROUNDS
    # what was missed is not searched for again
    gains = [asked["gm_total"].value for asked in finder.asked]
    assert len(set(gains)) == len(gains)
    part, check = found.binding
    assert not check.met
    assert part in ("filter", *[plan.name for plan in found.plans])


def test_responses_are_those_of_a_figure(sized: tuple[FilterSizing, Finder]):
    found, _ = sized
    passives = Passives(resistor_spread=0.2, capacitor_spread=0.1)
    spread = demands_of(SPEC, TOLERANCE, passives, realisation=found.demands.realisation)
    spread = replace(spread, realisation=replace(spread.realisation, passives=passives))
    review = review_filter(spread, found.plans, BENCH, example_supply())
    shown = [(one.tuned, one.rscale, one.cscale) for one in review.responses]
    assert shown[0][:2] == (True, 1.0)
    assert shown[1:] == [(False, 1.0, 1.0), (False, 1.2, 1.1), (False, 0.8, 0.9)]
    tuned, drawn, slow, fast = review.responses
    inside = tuned.frequency <= 50e3
    assert np.abs(tuned.deviation_db[inside]).max() <= 0.5
    assert np.abs(tuned.deviation_db[inside]).max() < np.abs(drawn.deviation_db[inside]).max()
    edge = int(np.argmin(np.abs(tuned.frequency - 50e3)))
    assert slow.gain_db[edge] < drawn.gain_db[edge] < fast.gain_db[edge]


def _demands() -> FilterDemands:
    spec = FilterSpec(
        response="chebyshev", order=3, edge=100e3, ripple_db=0.5, swing=0.5, snr_db=60.0,
        noise_band=(100.0, 100e3), load_capacitance=3e-12,
    )  # fmt: skip
    return demands_of(spec, Tolerance(passband_db=0.3, counts="tuned-shape"))


def test_multiples_divide_what_units_share():
    found = _demands()
    ones, twos = (dict.fromkeys(("A1", "A2", "A3"), m) for m in (1, 2))
    single, double = collect_requirements(found, ones), collect_requirements(found, twos)
    for name, power in (("gm_total", -1), ("output_current", -1), ("excess_pole", 0),
                        ("swing", 0), ("input_noise", 0.5), ("common_mode_gain", 0)):  # fmt: skip
        assert double[name].value == pytest.approx(single[name].value * 2.0**power, rel=1e-12)
    assert double["dc_gain"].value == pytest.approx(single["dc_gain"].value, abs=1e-9)


def test_one_amplifier_for_all_meets_the_hardest_of_everything():
    found = _demands()
    grouping = group_positions(found, alike=True)
    assert set(grouping.multiples.values()) == {1}
    hardest = max(one["gm_total"].value for one in found.demands)
    assert grouping.demands["gm_total"].value == hardest
    (plan,) = make_plans(example_plan(), grouping, found)
    assert plan.positions == ("A1", "A2", "A3")
    assert plan.load_resistance == min(one.load.bench_resistance for one in found.demands)


def test_multiples_serve_every_position():
    found = _demands()
    grouping = group_positions(found)
    plans: tuple[AmplifierPlan, ...] = make_plans(example_plan(), grouping, found)
    for plan in plans:
        for name in plan.positions:
            unit = grouping.demands["gm_total"].value
            assert unit * plan.multiple >= found.find(name)["gm_total"].value * (1 - 1e-9)
    assert sorted(name for plan in plans for name in plan.positions) == ["A1", "A2", "A3"]


def test_transconductors_of_one_node_share_its_load():
    spec = FilterSpec(response="butterworth", order=2, edge=1e6, style="gm-c", capacitor=3e-12)
    found = demands_of(spec, Tolerance(passband_db=0.3, counts="tuned-shape"))
    names = [one.position for one in found.demands]
    loads = share_loads(found, dict.fromkeys(names, 2))
    outputs = {place.name: place.output for place in found.realisation.amplifiers}
    for node in set(outputs.values()):
        here = [name for name in names if outputs[name] == node]
        total = sum(loads[name][0] for name in here)
        assert total == pytest.approx(found.find(here[0]).load.bench_capacitance, rel=1e-12)


def test_the_noise_frequency_has_the_mean_of_white_and_flicker():
    low, high = 100.0, 100e3
    corner = 30e3
    f = np.linspace(low, high, 200_001)
    mean = np.trapezoid(1 + corner / f, f) / (high - low)
    assert 1 + corner / find_noise_frequency((low, high)) == pytest.approx(mean, rel=1e-3)
