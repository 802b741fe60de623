"""Circuits put together: names, nodes, values, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.circuit import Circuit
from gmid.errors import UnknownName, UsageFault


def transistor(circuit, name="m1", **changes):
    options = {"polarity": "n", "drain": "d", "gate": "g", "source": "s", "bulk": "b",
               "length": 1e-6, "count": 2} | changes  # fmt: skip
    circuit.add_transistor(name, "nmos", **options)


def test_nodes_come_in_the_order_of_use_and_stacks_bring_their_own():
    c = Circuit()
    c.add_voltage_source("vdd", "vdd", "0", 1.8)
    transistor(c, stack=3)
    assert c.nodes == ("vdd", "d", "g", "s", "b", "m1_1", "m1_2")
    top, middle, bottom = c.transistors[0].units
    assert (top.name, top.drain, top.source) == ("m1_1", "d", "m1_1")
    assert (middle.drain, middle.source) == ("m1_1", "m1_2")
    assert (bottom.drain, bottom.source, bottom.gate, bottom.bulk) == ("m1_2", "s", "g", "b")


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"count": 0}, "count of m1 must be positive"),
        ({"count": -1}, "count of m1 must be positive"),
        ({"length": np.nan}, "length of m1 is not finite"),
        ({"stack": 0}, "stack of m1"),
        ({"stack": 1.5}, "stack of m1"),
        ({"polarity": "npn"}, "polarity of m1"),
        ({"drain": "a b"}, "'a b' cannot name a node"),
        ({"name": "1m"}, "'1m' cannot name an element"),
        ({"count": [1, 2], "length": [1e-6, 2e-6, 3e-6]}, "do not broadcast"),
    ],
)
def test_what_cannot_be_is_refused(changes, words):
    with pytest.raises(UsageFault, match=words):
        transistor(Circuit(), **changes)


def test_names_are_unique_without_regard_to_capitals():
    c = Circuit()
    c.add_resistor("r1", "a", "b", 1e3)
    with pytest.raises(UsageFault, match="already has an element named R1"):
        c.add_capacitor("R1", "a", "b", 1e-12)
    with pytest.raises(UsageFault, match="A and a differ in capitals only"):
        c.add_resistor("r2", "A", "b", 1e3)


def test_nodes_inside_a_stack_belong_to_it():
    c = Circuit()
    transistor(c, stack=2)
    with pytest.raises(UsageFault, match="node m1_1 lies inside a stack"):
        c.add_resistor("r1", "m1_1", "d", 1e3)
    other = Circuit()
    other.add_resistor("r1", "m1_1", "d", 1e3)
    with pytest.raises(UsageFault, match="m1 needs node m1_1 for itself"):
        transistor(other, stack=2)


def test_values_are_replaced_in_a_new_circuit():
    c = Circuit()
    transistor(c)
    c.add_resistor("r1", "d", "s", 1e3)
    new = c.with_values({"m1": {"count": [1, 2, 4]}, "r1": 2e3})
    assert new.batch == (3,)
    assert c.batch == ()
    with pytest.raises(UnknownName, match=r"no element r2\. There are: m1, r1"):
        c.with_values({"r2": 1.0})
    with pytest.raises(UsageFault, match="m1 has several values"):
        c.with_values({"m1": 4})
    with pytest.raises(UsageFault, match="r1 has no value count"):
        c.with_values({"r1": {"count": 4}})
    with pytest.raises(UsageFault, match="must be positive"):
        c.with_values({"r1": -1.0})


def test_leading_axes_that_do_not_fit_are_told():
    c = Circuit()
    c.add_resistor("r1", "a", "b", [1.0, 2.0])
    c.add_resistor("r2", "a", "b", [1.0, 2.0, 3.0])
    with pytest.raises(UsageFault, match=r"values of r2 have leading axes \(3,\)"):
        _ = c.batch


def test_scaling_multiplies_what_carries_current():
    c = Circuit()
    transistor(c)
    c.add_resistor("r1", "d", "s", 1e3)
    c.add_capacitor("c1", "d", "s", 1e-12)
    c.add_current_source("i1", "d", "s", 1e-6)
    c.add_voltage_source("v1", "d", "s", 1.0)
    m1, r1, c1, i1, v1 = c.scaled(4).elements
    assert (m1.count, m1.length, r1.resistance, v1.voltage) == (8, 1e-6, 250, 1.0)
    assert (float(c1.capacitance), float(i1.current)) == (4e-12, 4e-6)


def test_a_part_goes_in_under_a_prefix():
    part = Circuit()
    transistor(part, stack=2, source="0", bulk="0")
    part.add_resistor("r1", "d", "vdd", 1e3)
    whole = Circuit()
    whole.insert(part, prefix="a_", nodes={"vdd": "supply", "g": "in"})
    assert whole.nodes == ("a_d", "in", "a_m1_1", "supply")
    assert whole.find("a_m1").nodes == ("a_d", "in", "0", "0")
    with pytest.raises(UnknownName, match="no node out"):
        whole.insert(part, prefix="b_", nodes={"out": "x"})


def test_one_item_and_parts_left_out():
    c = Circuit()
    transistor(c, count=[[1], [2]])
    c.add_voltage_source("vdd", "vdd", "0", [1.6, 1.8, 2.0])
    one = c.item(1, 2)
    assert (one.batch, float(one.transistors[0].count)) == ((), 2.0)
    assert float(one.voltage_sources[0].voltage) == 2.0
    assert c.without(["m1"]).nodes == ("vdd",)
    assert repr(c) == "Circuit(5 nodes: 1 transistor, 1 voltage source; batch (2, 3))"
