"""What no amplifier can do, what is kept of earlier rounds, and filters rebuilt from plans."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pytest

from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.amplifier.filtering import rounds
from gmid.amplifier.filtering.distortion import measure_harmonic
from gmid.amplifier.filtering.pairs import LEAST_SCALE, list_smaller_pairs
from gmid.amplifier.filtering.reach import find_fastest_pole, find_largest_swing
from gmid.amplifier.filtering.realised import realise_filter
from gmid.amplifier.filtering.sizing import FilterSizing, size_filter
from gmid.amplifier.filtering.transconductors import refit_elements
from gmid.amplifier.plan import AmplifierPlan, Choices, Level, Requirement, Supply
from gmid.amplifier.predicting import predict
from gmid.filters import FilterSpec, Tolerance, realise
from gmid.filters.demand import demands_of
from gmid.filters.demand_level import estimate_demands

DEVICES = example_devices()
BENCH = [(DEVICES["nmos"].condition, DEVICES)]
ROLES = {"n": "nmos", "p": "pmos"}
CHOICES = Choices(saturation_margin=0.01, common_mode_phase_margin=30.0)
LOOSE = Tolerance(passband_db=0.5, counts="tuned-shape")
SPEC = FilterSpec(
    response="butterworth", order=3, edge=50e3, swing=0.3, snr_db=58.0, noise_band=(100.0, 50e3),
    load_capacitance=0.2e-12,
)  # fmt: skip
GM_C = FilterSpec(
    response="butterworth", order=2, edge=1e6, style="gm-c", swing=0.02, snr_db=30.0,
    noise_band=(1e3, 1e6), load_capacitance=0.2e-12,
)  # fmt: skip


@dataclass
class Finder:
    """Gives one amplifier after the other; the last one again and again."""

    plans: list[AmplifierPlan]
    met: list[bool]
    asked: list[dict[str, Requirement]] = field(default_factory=list)
    choices: list[Choices] = field(default_factory=list)

    def __call__(
        self, demands: dict[str, Requirement], *, load_capacitance: float, choices: Choices,
        **_: Any,
    ) -> Any:  # fmt: skip
        k = len(self.asked)
        self.asked.append(demands)
        self.choices.append(choices)
        plan, met = (row[min(k, len(row) - 1)] for row in (self.plans, self.met))
        fields = {
            "plan": replace(plan, demands=demands, load_capacitance=load_capacitance),
            "suggestion": "", "floor": 1e-6, "met": met,
        }  # fmt: skip
        return type("Result", (), fields)()


def _size(spec: FilterSpec, tolerance: Tolerance, finder: Finder) -> FilterSizing:
    return size_filter(
        spec, tolerance, bench=BENCH, roles=ROLES, supply=example_supply(), choices=CHOICES,
        find=finder,
    )  # fmt: skip


def test_an_output_reaches_a_rail_where_its_common_mode_is_nearer_to_it():
    middle = Supply(1.8, 2e-6, tolerance=0.1)
    assert find_largest_swing(middle) == pytest.approx(1.62)
    low = replace(middle, common_mode=Level(0.0, 0.6))
    assert find_largest_swing(low) == pytest.approx(1.2)
    high = replace(middle, common_mode=Level(0.0, 1.2))
    assert find_largest_swing(high) == pytest.approx(2 * (1.62 - 1.2))


def test_a_swing_beyond_the_rails_is_said_at_once_and_the_nearest_plan_is_judged_by_it():
    finder = Finder([example_plan()], [True])
    found = _size(SPEC.with_values(swing=3.4), LOOSE, finder)
    assert len(finder.asked) == 1
    assert finder.asked[0]["swing"].value < 0.5 * find_largest_swing(example_supply()) + 1e-9
    assert not found.is_met
    swings = {c.name: c for checks in found.amplifier_checks for c in checks if c.name == "swing"}
    assert swings["swing"].required == pytest.approx(3.4, rel=0.05)
    assert found.suggestion.startswith("No amplifier swings 3.4 V: at a supply of 1.62 V")


def test_a_speed_beyond_the_transistors_is_said_at_once():
    spec = SPEC.with_values(edge=400e6, noise_band=(1e3, 400e6), snr_db=30.0)
    finder = Finder([example_plan()], [True])
    found = _size(spec, Tolerance(passband_db=0.01, counts="all"), finder)
    assert len(finder.asked) == 1
    fastest = find_fastest_pole(BENCH, ROLES, example_supply())
    assert finder.asked[0]["excess_pole"].value < fastest
    assert found.suggestion.startswith("No amplifier is so fast")
    missed = {c.name for checks in found.amplifier_checks for c in checks if not c.met}
    assert {"gm_total", "excess_pole"} <= missed
    wanted = found.plans[0].demands["excess_pole"].value
    assert wanted > fastest


def test_no_mirror_node_is_faster_than_the_bound():
    fastest = find_fastest_pole(BENCH, ROLES, example_supply())
    signal = predict(example_plan(), DEVICES, example_supply()).signal
    assert float(np.max(signal.excess_pole)) < fastest


def test_an_amplifier_that_served_is_kept_where_a_lower_level_has_none(monkeypatch):
    monkeypatch.setattr(rounds, "_SAVED", 0.0)
    monkeypatch.setattr(rounds, "_QUIET", 10.0)
    worse = example_plan().with_place("tail", count=1)
    finder = Finder([example_plan(), worse], [True, False])
    spec = SPEC.with_values(order=2, snr_db=62.0)
    found = _size(spec, LOOSE, finder)
    assert len(finder.asked) > 1
    assert found.is_met
    assert int(found.plans[0].count("tail")) == int(example_plan().count("tail"))


def test_smaller_pairs_have_the_transconductance_that_is_told():
    plan, supply = example_plan(), example_supply()
    gm = float(predict(plan, DEVICES, supply, voltage=1.8).signal.gm_total)
    found = list_smaller_pairs(plan, DEVICES, supply, CHOICES, wanted=0.9 * gm)
    assert found
    distances = [abs(np.log(scale)) for _, scale in found]
    assert distances == sorted(distances)
    for smaller, scale in found:
        real = float(predict(smaller, DEVICES, supply, voltage=1.8).signal.gm_total)
        assert real == pytest.approx(scale * 0.9 * gm, rel=1e-9)
        assert LEAST_SCALE <= scale < 1 / 0.9
        others = {name: one for name, one in smaller.transistors.items() if name != "pair"}
        assert all(others[name] is plan.transistors[name] for name in others)


@pytest.fixture(scope="module")
def gm_c() -> tuple[FilterSizing, Finder]:
    finder = Finder([example_plan()], [True])
    return _size(GM_C, Tolerance(passband_db=1.0, counts="tuned-shape"), finder), finder


def test_a_transconductor_is_searched_with_a_longer_pair_where_it_has_too_much(
    gm_c: tuple[FilterSizing, Finder],
):
    found, finder = gm_c
    assert finder.choices[0].smallest_length == {}
    assert finder.choices[0].input_pair == "auto"
    longer = [one for one in finder.choices if one.smallest_length]
    assert all(one.input_pair == "n" for one in longer)
    shortest = float(np.asarray(example_plan().transistors["pair"].length))
    assert all(one.smallest_length["pair"] > shortest for one in longer)
    # the filter has the transconductance of its amplifiers
    made = found.demands.realisation
    for place in made.amplifiers:
        plan = found.by_position[place.name]
        gm = float(predict(plan, DEVICES, example_supply(), voltage=1.8).signal.gm_total)
        assert made.find(str(place.element)).value == pytest.approx(gm, rel=0.011)


def test_a_gm_c_filter_is_rebuilt_from_its_plans(gm_c: tuple[FilterSizing, Finder]):
    found, _ = gm_c
    made = found.demands.realisation
    again = realise(GM_C, capacitor=made.capacitor, passives=made.passives)
    rebuilt = refit_elements(again, found.plans, DEVICES, example_supply())
    for element in made.elements:
        assert rebuilt.find(element.name).value == pytest.approx(element.value, rel=1e-3)


def test_multiples_of_a_unit_make_the_harmonic_that_they_make_alone():
    made = realise(FilterSpec(response="butterworth", order=2, edge=150e3), capacitor=4e-12)
    supply = example_supply()
    triple = replace(example_plan(), multiple=3)
    together = {"A1": example_plan(), "A2": replace(example_plan(), multiple=3)}
    apart = {"A1": example_plan(),
             "A2": replace(triple, transistors=dict(triple.transistors))}  # fmt: skip
    one, two = (
        measure_harmonic(
            realise_filter(made, plans, DEVICES, supply, voltage=1.8), DEVICES, supply,
            frequency=50e3, amplitude=0.6,
        )
        for plans in (together, apart)
    )  # fmt: skip
    assert list(one.shares) == ["A1", "A2"]
    for name in one.shares:
        assert abs(one.shares[name]) == pytest.approx(abs(two.shares[name]), rel=0.1)


@pytest.mark.parametrize("split", ["alike", "each"])
def test_an_estimate_is_near_the_demand(split: str):
    spec = FilterSpec(response="chebyshev", order=3, edge=400e3, ripple_db=0.5, capacitor=4e-12)
    tolerance = Tolerance(passband_db=0.2, counts="tuned-shape")
    about = estimate_demands(spec, tolerance, split=split)
    exact = demands_of(spec, tolerance, split=split)
    gm = [one["gm_total"].value for one in exact.demands]
    assert about.gm_total == pytest.approx(gm, rel=0.1)
    pole = [one["excess_pole"].value for one in exact.demands]
    assert about.excess_pole == pytest.approx(pole, rel=0.15)
