"""Circuits of unit transistors: bias points, linearisation and netlist text.

The package knows no amplifier.

Examples
--------
A current mirror with twice the units on its output side:

>>> from gmid.device import Device
>>> from gmid.device.example import example_sweep
>>> c = Circuit()
>>> c.add_voltage_source("vout", "out", "0", 0.6)
>>> c.add_current_source("iref", "0", "g", 2e-6)
>>> for name, drain, count in (("m1", "g", 2), ("m2", "out", 4)):
...     c.add_transistor(name, "nmos", polarity="n", drain=drain, gate="g", source="0",
...                      bulk="0", length=1e-6, count=count)
>>> bias = solve_bias(c, {"nmos": Device(example_sweep())}).require()
>>> bias.voltage("g").round(4), (bias.id("m2") / bias.id("m1")).round(4)
(np.float64(0.433), np.float64(2.0163))
"""

from __future__ import annotations

from gmid.circuit.bias import Bias, solve_bias
from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import (
    Capacitor,
    CurrentSource,
    Element,
    Resistor,
    Transistor,
    VoltageSource,
)
from gmid.circuit.flow import Flow, evaluate
from gmid.circuit.netlist import (
    format_value,
    wrap_line,
    write_deck,
    write_element,
    write_elements,
    write_source,
    write_subcircuit,
)
from gmid.circuit.symmetry import Fold, fold_circuit

__all__ = [
    "Bias",
    "Capacitor",
    "Circuit",
    "CurrentSource",
    "Element",
    "Flow",
    "Fold",
    "Resistor",
    "Transistor",
    "VoltageSource",
    "evaluate",
    "fold_circuit",
    "format_value",
    "solve_bias",
    "wrap_line",
    "write_deck",
    "write_element",
    "write_elements",
    "write_source",
    "write_subcircuit",
]
