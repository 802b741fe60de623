"""Netlist text: what it holds, how it is named, what it refuses."""

from __future__ import annotations

import re

import numpy as np
import pytest

from gmid.circuit import (
    Circuit,
    format_value,
    write_deck,
    write_element,
    write_elements,
    write_source,
    write_subcircuit,
)
from gmid.errors import DataFault, UnknownName, UsageFault
from gmid.sweep.model import UnitTransistor

UNITS = {
    "nmos": UnitTransistor(
        "n", 2e-6, netlist="M{name} {d} {g} {s} {b} unit_n w={width} l={length} m={count}"
    ),
    "pmos": UnitTransistor(
        "p", 3e-6, netlist="X{name} {d} {g} {s} {b} unit_p w={width} l={length} mult={count}"
    ),
}


def example(**changes):
    options = {"length": 0.18e-6, "count": 4, "stack": 3} | changes
    c = Circuit()
    c.add_transistor("mtail", "nmos", polarity="n", drain="tail", gate="bn", source="vss",
                     bulk="vss", **options)  # fmt: skip
    c.add_transistor("mload", "pmos", polarity="p", drain="tail", gate="tail", source="vdd",
                     bulk="vdd", length=0.35e-6, count=2)  # fmt: skip
    c.add_resistor("rz", "tail", "cz_top", 123456.789)
    c.add_capacitor("cz", "cz_top", "vss", 1.23e-13)
    return c


def test_a_subcircuit_holds_transistors_resistors_and_capacitors_alone():
    text = write_subcircuit(example(), "stage", ["bn", "tail", "vdd", "vss"], UNITS)
    first, *body, last = text.splitlines()
    assert (first, last) == (".subckt stage bn tail vdd vss", ".ends stage")
    assert {line[0].lower() for line in body} == {"m", "x", "r", "c"}
    assert body[:4] == [
        "Mtail_1 tail bn mtail_1 vss unit_n w=2e-06 l=1.8e-07 m=4",
        "Mtail_2 mtail_1 bn mtail_2 vss unit_n w=2e-06 l=1.8e-07 m=4",
        "Mtail_3 mtail_2 bn vss vss unit_n w=2e-06 l=1.8e-07 m=4",
        "Xmload tail tail vdd vdd unit_p w=3e-06 l=3.5e-07 mult=2",
    ]
    names = [line.split()[0].lower() for line in body]
    assert len(set(names)) == len(names)


def test_numbers_are_read_back_as_they_were():
    rng = np.random.default_rng(3)
    for value in (*10.0 ** rng.uniform(-18, 12, 200), 0.1, 1e15, 1e22, 0.0, -2.5):
        assert float(format_value(value)) == value


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"count": 2.5}, "count of mtail is 2.5; a netlist holds whole units only"),
        ({"count": [1, 2]}, "count of mtail has 2 values"),
        ({"length": [1e-6, 2e-6]}, "length of mtail has 2 values"),
    ],
)
def test_values_that_no_netlist_can_hold(changes, words):
    with pytest.raises(UsageFault, match=words):
        write_subcircuit(example(**changes), "stage", ["bn"], UNITS)


def test_subcircuits_refuse_sources_ground_and_unknown_ports():
    c = example()
    with pytest.raises(UnknownName, match=r"no node vss2\. Did you mean vss"):
        write_subcircuit(c, "stage", ["vss2"], UNITS)
    source = c.copy()
    source.add_voltage_source("vdd", "vdd", "vss", 1.8)
    with pytest.raises(UsageFault, match="vdd is a source"):
        write_subcircuit(source, "stage", ["vdd"], UNITS)
    c.add_resistor("rg", "tail", "0", 1e3)
    with pytest.raises(UsageFault, match="rg lies at ground"):
        write_subcircuit(c, "stage", ["vdd"], UNITS)
    with pytest.raises(UsageFault, match="'a b' cannot name a subcircuit"):
        write_subcircuit(example(), "a b", ["vdd"], UNITS)


@pytest.mark.parametrize(
    ("template", "words"),
    [
        (None, "nmos has no netlist template, so mtail cannot be written"),
        ("M{name} {d} {g} {s} {b} n w={w}", r"netlist template of nmos holds \{w\}"),
        ("R{name} {d} {s} 1k", "makes no transistor line"),
        ("M1 {d} {g} {s} {b} n", "makes no transistor line"),
    ],
)
def test_templates_that_will_not_do(template, words):
    units = UNITS | {"nmos": UnitTransistor("n", 2e-6, netlist=template)}
    with pytest.raises(DataFault, match=words):
        write_elements(example(), units)


def test_lines_of_one_name_are_refused():
    c = Circuit()
    c.add_resistor("r1", "a", "b", 1.0)
    c.add_voltage_source("v1", "a", "b", 1.0)
    c.add_resistor("rr1", "a", "b", 1.0)
    assert [line.split()[0] for line in write_elements(c, {})] == ["r1", "v1", "rr1"]
    c.add_transistor("tail", "nmos", polarity="n", drain="a", gate="a", source="b", bulk="b",
                     length=1e-6, count=1)  # fmt: skip
    c.add_transistor("mtail", "nmos", polarity="n", drain="a", gate="a", source="b", bulk="b",
                     length=1e-6, count=1)  # fmt: skip
    with pytest.raises(UsageFault, match="two netlist lines would be named mtail"):
        write_elements(c, UNITS)
    with pytest.raises(UnknownName, match="tail: there is no device nmos"):
        write_elements(c, {})


def test_sources_and_decks():
    c = Circuit()
    c.add_current_source("ref", "vdd", "bn", 2e-6)
    c.add_voltage_source("vid", "vip", "vin", 0.0)
    assert write_element(c.find("ref"), {}) == ["iref vdd bn dc 2e-06"]
    wave = "pulse(0 0.1 1u 1n 1n 1 2)"
    assert write_source(c.find("vid"), ac=1.0, wave=wave) == f"vid vip vin dc 0 ac 1 {wave}"
    deck = write_deck(
        "open loop", analysis=".ac dec 50 1 1e9", includes=["models.inc", "amplifier.cir"],
        parameters={"vsupply": 1.8}, lines=["x1 " + " ".join(f"node{k}" for k in range(30))],
    )  # fmt: skip
    lines = deck.splitlines()
    assert lines[:4] == [
        "* open loop", ".include models.inc", ".include amplifier.cir", ".param vsupply=1.8",
    ]  # fmt: skip
    assert lines[-2:] == [".ac dec 50 1 1e9", ".end"]
    assert max(map(len, lines)) <= 100
    joined = re.sub(r"\n\+", "", deck)
    assert "node28 node29" in joined
    with pytest.raises(UsageFault, match=r"one analysis line, not \.op, \.tran 1n 1u"):
        write_deck("x", analysis=".tran 1n 1u", lines=[".op"])
    with pytest.raises(UsageFault, match="one analysis line"):
        write_deck("x", analysis="no analysis")
