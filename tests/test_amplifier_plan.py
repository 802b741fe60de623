"""Plans: what they refuse, and what follows from them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gmid.amplifier import PLACES, Level, Supply, TransistorPlan, Variant, list_places
from gmid.amplifier.example import example_plan
from gmid.amplifier.plan import AmplifierPlan
from gmid.errors import DataFault, Faults, UnknownName


def change(place, **changes):
    return example_plan().with_place(place, **changes)


@pytest.mark.parametrize(
    ("place", "changes", "where", "word"),
    [
        ("pair", {"count": 2.5}, "transistors.pair.count", "2.5"),
        ("load", {"count": 0}, "transistors.load.count", "whole number"),
        ("tail", {"stack": 1.5}, "transistors.tail.stack", "1.5"),
        ("tail", {"length": -1e-6}, "transistors.tail.length", "positive"),
        ("pair", {"bulk": "drain"}, "transistors.pair.bulk", "drain"),
    ],
)
def test_a_faulty_place_is_named(place, changes, where, word):
    with pytest.raises((DataFault, UnknownName)) as caught:
        change(place, **changes)
    assert caught.value.where == where
    assert word in str(caught.value)


def test_an_unknown_place_is_advised():
    transistors = {**example_plan().transistors, "dirct": TransistorPlan("pmos", 1e-6, 2)}
    with pytest.raises(UnknownName, match="Did you mean direct"):
        replace(example_plan(), transistors=transistors)
    with pytest.raises(UnknownName, match="no place"):
        change("pear", count=2)


def test_missing_places_are_listed():
    transistors = dict(example_plan().transistors)
    del transistors["copy"], transistors["turn"]
    with pytest.raises(DataFault, match=r"lacks copy, turn\. A n-input, plain, resistors has"):
        replace(example_plan(), transistors=transistors)


def test_all_faults_are_told_at_once():
    transistors = dict(example_plan().transistors)
    transistors["pair"] = replace(transistors["pair"], count=1.5)
    transistors["load"] = replace(transistors["load"], length=0.0)
    with pytest.raises(Faults) as caught:
        replace(example_plan(), transistors=transistors, multiple=0)
    assert len(caught.value.faults) == 3


def test_a_form_that_does_not_exist():
    with pytest.raises(UnknownName, match="cascoded"):
        Variant("n", "cascode", "resistors")
    with pytest.raises(UnknownName, match="input_pair is 'x'"):
        AmplifierPlan("a1", {}, 1e-12, input_pair="x")


@pytest.mark.parametrize("sense", ["resistors", "followers", "pairs"])
@pytest.mark.parametrize("output", ["plain", "cascoded"])
def test_the_places_of_every_form(output, sense):
    places = set(list_places(Variant("n", output, sense)))
    assert places == set(list_places(Variant("p", output, sense)))
    assert ("direct_cascode" in places) == (output == "cascoded")
    assert ("bias_direct" in places) == (output == "cascoded")
    assert ("follower" in places) == (sense == "followers")
    assert ("sense_pair" in places) == (sense == "pairs")
    assert ("error_pair" in places) == (sense != "pairs")
    assert places <= set(PLACES)


def test_channels_follow_the_input_pair():
    """Device-theory: for an n-input, load, direct and copy are p-channel, the others n."""
    n_input = {name: PLACES[name].polarity("n") for name in PLACES}
    assert [n_input[name] for name in ("load", "direct", "copy")] == ["p"] * 3
    assert [n_input[name] for name in ("pair", "tail", "turn", "opposite", "control")] == ["n"] * 5
    for name, polarity in n_input.items():
        assert {polarity, PLACES[name].polarity("p")} == {"n", "p"}


def test_levels_and_supplies():
    supply = Supply(1.8, 2e-6, tolerance=0.1, common_mode=Level(0.5), input_common_mode=None)
    np.testing.assert_allclose(supply.voltages, [1.62, 1.8, 1.98])
    np.testing.assert_allclose(supply.input_level.at(supply.voltages), [0.81, 0.9, 0.99])
    other = replace(supply, input_common_mode=Level(0.0, 0.7))
    assert float(other.input_level.at(1.62)) == 0.7


def test_counts_that_leave_control_no_current():
    with pytest.raises(DataFault, match=r"leave control no current: direct carries 2\.5 times"):
        change("opposite", count=10)
    with pytest.raises(DataFault) as caught:
        change("direct", count=3)
    assert caught.value.where == "transistors.control"
    assert change("opposite", count=np.array([8, 12])).count("opposite").shape == (2,)


def test_a_name_that_no_netlist_takes():
    with pytest.raises(DataFault, match="cannot name a subcircuit"):
        replace(example_plan(), name="a 1")


def test_counts_are_multiplied():
    plan = replace(example_plan(), multiple=3)
    assert float(plan.count("pair")) == 12.0
