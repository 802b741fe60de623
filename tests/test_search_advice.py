"""What is said where demands cannot be met: what binds, and which change was tried with success."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from gmid.amplifier import Choices, Requirement
from gmid.amplifier.checks import Check
from gmid.amplifier.example import example_devices, example_supply
from gmid.amplifier.search import SearchResult, find_plan
from gmid.amplifier.search.wording import tell_binding, tell_change
from gmid.quantity import parse_quantity

PLAIN = Choices(
    input_pair="n", output="plain", common_mode_sense="resistors", lengths=(0.5e-6, 1e-6),
    largest_count=32,
)  # fmt: skip
DEMANDS = {"gbw": 5e6, "dc_gain": 38.0, "phase_margin": 60.0, "swing": 0.3}


def find(**values: float) -> SearchResult:
    devices = example_devices()
    demands = {name: Requirement(value) for name, value in {**DEMANDS, **values}.items()}
    return find_plan(
        demands, load_capacitance=1e-12, load_resistance=1e6,
        bench=[(devices["nmos"].condition, devices)], roles={"n": "nmos", "p": "pmos"},
        supply=replace(example_supply(), reference_tolerance=0.0), choices=PLAIN,
    )  # fmt: skip


@pytest.fixture(scope="module")
def near() -> SearchResult:
    return find(dc_gain=50.0)


@pytest.fixture(scope="module")
def hopeless() -> SearchResult:
    return find(swing=1.9, dc_gain=60.0, gbw=80e6)


def test_what_binds_comes_first_with_its_condition_and_the_gap(near, hopeless):
    for found in (near, hopeless):
        assert not found.met
        assert found.suggestion.startswith(f"{found.binding.name} binds: ")
        assert f" in {found.binding.condition}, " in found.suggestion
        others = [one.name for one in found.checks if not one.met and one != found.binding]
        facts = found.suggestion.split(" too. ")[0] if others else ""
        assert all(name in facts for name in others)


def test_a_change_that_would_be_enough_is_enough(near):
    found = re.search(r"(\w+) of ([^ ]+ [^ ]+) instead of .* would be enough", near.suggestion)
    assert found, near.suggestion
    name, amount = found.groups()
    unit = next(one.unit for one in near.checks if one.name == name)
    assert find(**{"dc_gain": 50.0, name: parse_quantity(amount, unit)}).met


def test_where_no_change_is_enough_what_is_left_is_told(hopeless):
    words = hopeless.suggestion
    assert "would be enough" not in words
    if "No single change that was tried helps" not in words:
        left = re.search(r"helps most: ([\d.]+) % of what is missed is left \(", words)
        assert left, words
        assert 0 < float(left[1]) < 98


def check(name: str, required: float, achieved: float, unit: str) -> Check:
    return Check(name, required, achieved, unit, "ss/125/1.62", -0.3, met=False)


@pytest.mark.parametrize(
    ("one", "words"),
    [
        (check("gbw", 20e6, 15e6, "Hz"), "gbw binds: 15 MHz of 20 MHz in ss/125/1.62, 25 % short."),
        (check("dc_gain", 60.0, 57.0, "dB"), "57 dB of 60 dB in ss/125/1.62, 3 dB short."),
        (check("phase_margin", 60.0, 59.97, "deg"), "59.97 deg of 60 deg"),
        (check("supply_current", 1e-5, 1.2e-5, "A"), "12 uA for 10 uA in ss/125/1.62, 20 % too"),
        (check("input_noise", 6e-9, 36e-9, "V/rtHz"), "6 times as much"),
    ],
)
def test_a_gap_is_told_in_its_own_measure(one, words):
    assert words in tell_binding([one])


def test_a_demand_that_is_hardly_met_at_all_is_given_up():
    words = tell_change("", "swing", [check("swing", 1.0, 0.0, "V")], 0.0)
    assert words == "Giving up swing (now 1 V) would be enough."


def test_what_is_still_missed_is_never_said_to_be_enough():
    checks = [check("swing", 1.0, 0.5, "V"), check("gbw", 2e7, 1e7, "Hz")]
    words = tell_change("", "swing", checks, 0.5)
    assert words == (
        "No single change is enough. swing of 485 mV instead of 1 V helps most: 50 % of what is "
        "missed is left (gbw 10 MHz of 20 MHz)."
    )
