"""Small circuits of the demo process against the reference simulator, in four corners."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import numpy as np
import pytest

from gmid.circuit import Circuit, solve_bias, write_deck, write_elements
from gmid.condition import Condition
from gmid.device import Device
from gmid.network import compute_noise, transfer
from gmid.simulation import run_deck
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe

pytestmark = pytest.mark.reference

HOME = Path(__file__).resolve().parents[2] / "demo" / "larch180"
CONDITIONS = [Condition.parse(text) for text in ("ss/-40", "ss/125", "ff/-40", "fs/27")]
SWEEP = ".ac dec 5 1 1e9"
NOISE = ".noise v(seen) vin dec 5 1 1e9"


@pytest.fixture(scope="module")
def devices():
    """Devices by condition, from the sweeps of the demo."""
    recipe = read_recipe(HOME / "larch180.toml")
    names = [str(condition).replace("/", "_") for condition in CONDITIONS]
    wanted = tuple(
        entry for entry in recipe.sweeps
        if any(f"{device}_{name}" in str(entry.files[0])
               for device in ("nmos", "pmos") for name in names)
    )  # fmt: skip
    found: dict[Condition, dict[str, Device]] = {}
    for sweep in import_recipe(dataclasses.replace(recipe, sweeps=wanted)):
        found.setdefault(sweep.condition, {})[sweep.device] = Device(sweep)
    return found


def start(supply=1.8):
    c = Circuit()
    c.add_voltage_source("vdd", "vdd", "0", supply)
    c.add_current_source("iref", "vdd", "bn", 2e-6)

    def add(name, device, drain, gate, source, count, length=0.5e-6, stack=1):
        c.add_transistor(name, device, polarity=device[0], drain=drain, gate=gate, source=source,
                         bulk="0" if device == "nmos" else "vdd", length=length, count=count,
                         stack=stack)  # fmt: skip

    add("mb", "nmos", "bn", "bn", "0", 1)
    return c, add


def mirrors():
    """n- and p-channel mirrors one after the other, the first with stacks."""
    c, add = start()
    add("m1", "nmos", "x", "bn", "0", 3)
    add("m2", "pmos", "x", "x", "vdd", 4, length=0.7e-6, stack=2)
    add("m3", "pmos", "out", "x", "vdd", 8, length=0.7e-6, stack=2)
    c.add_voltage_source("vin", "in", "0", 0.8)
    c.add_resistor("r1", "in", "out", 50e3)
    c.add_capacitor("c1", "out", "0", 0.5e-12)
    return c, "out"


def pair():
    """A pair with a mirror as its load, driving a capacitor."""
    c, add = start(1.62)
    c.add_voltage_source("vip", "ip", "0", 0.85)
    c.add_voltage_source("vin", "ip", "in", 0.0)
    add("mt", "nmos", "tail", "bn", "0", 4)
    add("m1", "nmos", "x", "in", "tail", 4, length=0.3e-6)
    add("m2", "nmos", "out", "ip", "tail", 4, length=0.3e-6)
    add("m3", "pmos", "x", "x", "vdd", 3, length=0.6e-6)
    add("m4", "pmos", "out", "x", "vdd", 3, length=0.6e-6)
    c.add_capacitor("c1", "out", "0", 0.2e-12)
    return c, "out"


def cascode():
    """A cascoded stage that a resistor holds at its bias."""
    c, add = start(1.98)
    c.add_voltage_source("vin", "in", "out", 0.0)
    c.add_voltage_source("vc", "vc", "0", 1.0)
    add("m1", "nmos", "x", "g", "0", 2, length=0.4e-6)
    add("m2", "nmos", "out", "vc", "x", 2, length=0.25e-6)
    add("m3", "pmos", "bp", "bp", "vdd", 2, length=1e-6)
    add("m4", "nmos", "bp", "bn", "0", 1)
    add("m5", "pmos", "out", "bp", "vdd", 2, length=1e-6)
    c.add_resistor("r1", "in", "g", 2e6)
    c.add_capacitor("c2", "g", "0", 100e-15)
    c.add_capacitor("c1", "out", "0", 1e-12)
    return c, "out"


def run(circuit, output, condition, units, analysis):
    lines = write_elements(circuit, units)
    lines = [f"{line} ac 1" if line.startswith("vin ") else line for line in lines]
    deck = write_deck(
        "circuit", analysis=analysis, includes=[f"{condition.corner}.inc"],
        lines=[f".options temp={condition.temperature} gmin=1e-15", *lines,
               f"eseen seen 0 {output} 0 1"],
    )  # fmt: skip
    return run_deck(deck, folder=HOME / "models")


@pytest.mark.parametrize("condition", CONDITIONS, ids=str)
@pytest.mark.parametrize("build", [mirrors, pair, cascode])
def test_circuit_is_predicted_as_it_is_simulated(build, condition, devices):
    circuit, output = build()
    here = devices[condition]
    units = {name: device.unit for name, device in here.items()}
    bias = solve_bias(circuit, here).require()
    assert not bias.ramped

    op = run(circuit, output, condition, units, ".op")
    for node in circuit.nodes:
        assert bias.voltage(node) == pytest.approx(op.voltage(node)[0], abs=0.5e-3), node
    assert bias.source_current("vdd") == pytest.approx(op.current("vdd")[0], rel=1e-3)

    ac = run(circuit, output, condition, units, SWEEP)
    net = bias.linearise(drives=["vin"])
    ratio = np.abs(transfer(net, "vin", output, ac.frequency) / ac.voltage(output))
    # beyond 300 MHz most signals are some 60 dB down and no amplifier here is asked for them
    used = ac.frequency < 3e8
    np.testing.assert_allclose(20 * np.log10(ratio[used]), 0.0, atol=0.1)

    noise = run(circuit, output, condition, units, NOISE)
    found = compute_noise(net, output, noise.frequency).density
    np.testing.assert_allclose(found[used], np.sqrt(noise.output)[used], rtol=5e-3)
