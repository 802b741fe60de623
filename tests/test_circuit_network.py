"""The linear network of a bias point, against finite differences and first principles."""

from __future__ import annotations

import numpy as np
import pytest

from circuit_devices import CAPACITANCES, make_device
from gmid.circuit import Circuit, solve_bias
from gmid.network import compute_noise, transfer
from test_circuit_bias import DEVICES, stage

BOLTZMANN = 1.380649e-23
KELVIN = 300.15


def test_gain_is_the_slope_of_the_bias_points():
    step = 1e-4
    here = stage()
    bias = solve_bias(here, DEVICES).require()
    moved = solve_bias(here.with_values({"vin": [-step, step]}), DEVICES).require()
    slope = np.diff(moved.voltage("out"))[0] / (2 * step)
    gain = transfer(bias.linearise(), "vin", "out", 0.0).real
    assert gain == pytest.approx(slope, rel=5e-3)


def test_sources_that_do_not_drive_can_be_left_out():
    bias = solve_bias(stage(stack=2, count=[1.0, 2.0]), DEVICES).require()
    f = np.array([0.0, 1e5, 1e8])
    whole, small = bias.linearise(), bias.linearise(drives=["vin"])
    assert len(small.unknowns) < len(whole.unknowns) - 3
    np.testing.assert_allclose(
        transfer(small, "vin", "out", f), transfer(whole, "vin", "out", f), rtol=1e-9
    )


def test_items_are_picked():
    bias = solve_bias(stage(count=[1.0, 2.0, 3.0], supply=[[1.7], [1.8]]), DEVICES).require()
    whole = transfer(bias.linearise(), "vin", "out", 1e6)
    assert whole.shape == (2, 3)
    mask = np.array([[True, False, True], [False, True, False]])
    np.testing.assert_allclose(transfer(bias.linearise(mask), "vin", "out", 1e6), whole[mask])
    one = bias.linearise((1, 2))
    assert one.batch == ()
    assert transfer(one, "vin", "out", 1e6) == pytest.approx(whole[1, 2], rel=1e-12)


def test_capacitances_enter_with_their_signs():
    c = Circuit()
    for node, voltage in (("g", 0.6), ("d", 0.9), ("s", 0.0), ("b", 0.0)):
        c.add_voltage_source(f"v{node}", node, "0", voltage)
    c.add_transistor("m1", "nmos", polarity="n", drain="d", gate="g", source="s", bulk="b",
                     length=1e-6, count=3)  # fmt: skip
    bias = solve_bias(c, DEVICES).require()
    net = bias.linearise()
    omega = 2 * np.pi * 1e6
    for driven in "gds":
        for seen in "gds":
            # the current into the terminal leaves the source's minus node towards it
            current = -transfer(net, f"v{driven}", f"i(v{seen})", 1e6)
            sign = 1.0 if driven == seen else -1.0
            expected = 3e-15 * CAPACITANCES[f"c{seen}{driven}"] * sign
            assert current.imag / omega == pytest.approx(expected, rel=1e-6, abs=1e-20)
    matrix = bias.capacitance("m1")
    np.testing.assert_allclose(matrix.sum(axis=0), 0.0, atol=1e-25)
    np.testing.assert_allclose(matrix.sum(axis=1), 0.0, atol=1e-25)


def test_noise_of_a_diode_and_a_resistor():
    c = Circuit()
    c.add_voltage_source("vdd", "vdd", "0", 1.8)
    c.add_resistor("r1", "vdd", "g", 1e6)
    c.add_transistor("m1", "nmos", polarity="n", drain="g", gate="g", source="0", bulk="0",
                     length=1e-6, count=4)  # fmt: skip
    bias = solve_bias(c, {"nmos": make_device()}).require()
    f = np.array([1.0, 1e3])
    found = compute_noise(bias.linearise(drives=[]), "g", f).by_owner()
    load = float(bias.gm("m1") + bias.gds("m1")) + 1e-6
    assert found["r1"] == pytest.approx(4 * BOLTZMANN * KELVIN * 1e-6 / load**2, rel=1e-6)
    gm, gds = float(bias.gm("m1")), float(bias.gds("m1"))
    # as `circuit_devices` invents it: the flicker part of four units is 4 (gm/4)^2
    density = 1.6e-20 * (0.67 * gm + gds) + 1e-19 * gm**2 / 4 / f
    np.testing.assert_allclose(found["m1"], density / load**2, rtol=2e-3)


def test_noise_of_a_stack_belongs_to_its_instance():
    net = solve_bias(stage(stack=2), DEVICES).require().linearise()
    found = compute_noise(net, "out", [1e4]).by_owner()
    assert set(found) == {"mb", "mt", "m1", "m2", "m3", "m4", "rl"}
