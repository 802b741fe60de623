"""The search as a whole, on invented devices of closed formulas."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gmid.amplifier import Choices, Requirement, Supply, predict
from gmid.amplifier.checks import judge
from gmid.amplifier.example import example_devices, example_supply
from gmid.amplifier.places import PLACES
from gmid.amplifier.search import find_plan
from gmid.amplifier.search.floor import measure_floor
from gmid.amplifier.search.starts import Task
from gmid.errors import DataFault

PLAIN = Choices(
    input_pair="n", output="plain", common_mode_sense="resistors", lengths=(0.5e-6, 1e-6),
    largest_count=32,
)  # fmt: skip
DEMANDS = {"gbw": Requirement(5e6), "dc_gain": Requirement(38.0), "swing": Requirement(0.3)}
LOAD = {"load_capacitance": 1e-12, "load_resistance": 1e6}


def find(demands=None, choices=PLAIN, **changes):
    devices = example_devices()
    given = {
        "bench": [(devices["nmos"].condition, devices)], "roles": {"n": "nmos", "p": "pmos"},
        "supply": example_supply(), "choices": choices, **LOAD, **changes,
    }  # fmt: skip
    return find_plan(DEMANDS if demands is None else demands, **given)


@pytest.fixture(scope="module")
def found():
    heard: list[tuple[float, str]] = []
    result = find(progress=lambda share, words: heard.append((share, words)))
    return result, heard


def test_the_plan_meets_everything_when_judged_anew(found):
    result, _ = found
    prediction = predict(result.plan, example_devices(), example_supply())
    checks = judge([prediction], PLAIN)
    assert result.met
    assert result.suggestion == ""
    assert all(check.met for check in checks)
    assert {check.name for check in checks} >= set(DEMANDS)
    assert result.binding == min(result.checks, key=lambda check: check.margin)


def test_counts_lengths_and_stacks_are_within_bounds_and_even(found):
    for place, one in found[0].plan.transistors.items():
        assert 1 <= one.count <= PLAIN.largest_count
        assert one.stack <= PLAIN.largest_stack
        assert one.length in PLAIN.lengths
        if PLACES[place].sides:
            assert one.count % 2 == 0, place


def test_mirrors_share_a_length(found):
    transistors = found[0].plan.transistors
    for members in (("load", "direct", "copy"), ("turn", "opposite", "control", "error_load"),
                    ("tail", "bias_reference", "bias_mirror")):  # fmt: skip
        assert len({transistors[place].length for place in members}) == 1


def test_progress_rises_to_one_and_says_what_is_done(found):
    shares = [share for share, _ in found[1]]
    assert shares == sorted(shares)
    assert shares[-1] == 1.0
    assert all(words for _, words in found[1])


def test_the_ratio_is_that_of_the_largest_current_to_the_floor(found):
    result, _ = found
    prediction = predict(result.plan, example_devices(), example_supply())
    largest = float(prediction.supply_current.max())
    assert result.ratio_to_floor * result.floor == pytest.approx(largest, rel=1e-4)
    assert result.ratio_to_floor > 1


def test_the_same_question_gets_the_same_plan(found):
    again = find()
    assert again.plan.error_resistance == found[0].plan.error_resistance
    for place, one in found[0].plan.transistors.items():
        other = again.plan.transistors[place]
        assert (one.length, one.count) == (other.length, other.count)


def test_less_area_is_found_when_area_counts(found):
    small = find(choices=replace(PLAIN, minimise="area"))
    areas = [float(predict(plan, example_devices(), example_supply()).gate_area)
             for plan in (small.plan, found[0].plan)]  # fmt: skip
    assert small.met
    assert areas[0] < areas[1]


def test_what_cannot_be_met_gets_the_nearest_plan_and_a_change_that_was_tried():
    demands = {"gbw": Requirement(5e6), "dc_gain": Requirement(80.0)}
    few = PLAIN
    result = find(demands, few)
    assert not result.met
    assert result.binding.name == "dc_gain"
    assert 30 < result.binding.achieved < 80
    assert result.binding.condition.startswith("tt/27/")
    assert "dc_gain of" in result.suggestion
    assert "would be enough" in result.suggestion
    words = result.suggestion.split("dc_gain of ")[1].split()
    eased = {**demands, "dc_gain": Requirement(float(words[0]))}
    assert find(eased, few).met


def test_the_floor_is_the_load_over_the_best_efficiency():
    devices = example_devices()
    task = Task(
        {"gbw": Requirement(10e6)}, (1e-12, np.inf), ((devices["nmos"].condition, devices),),
        Supply(1.8, 1e-7),
    )  # fmt: skip
    needed = 2 * np.pi * 10e6 * 1e-12
    floor = measure_floor(task, {"n": "nmos", "p": "pmos"})
    assert needed / 38.7 < floor < needed / 20


def test_an_empty_bench_is_refused():
    with pytest.raises(DataFault, match="no condition"):
        find(bench=[])


def test_lengths_beyond_the_table_are_refused():
    with pytest.raises(DataFault, match="no length to choose from"):
        find(choices=replace(PLAIN, lengths=(50e-6,)))
