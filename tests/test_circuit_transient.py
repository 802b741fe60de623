"""Runs in time against closed forms."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.amplifier.example import example_devices
from gmid.circuit import Circuit, solve_bias
from gmid.circuit.transient import Transient


def run_ladder(stride: float) -> float:
    """Error of an RC low-pass of 1 us driven by a ramp of 1 V in 0.2 us, at 1 us [V]."""
    circuit = Circuit()
    circuit.add_voltage_source("vin", "in", "0", 0.0)
    circuit.add_resistor("r1", "in", "out", 1e3)
    circuit.add_capacitor("c1", "out", "0", 1e-9)
    run = Transient(solve_bias(circuit, {}), {"vin": 5e6})
    steps = round(1e-6 / stride)
    for k in range(steps):
        run.advance(stride, moves=k < steps // 5, begins=k == steps // 5)
    edge = 0.2
    exact = 1 - (np.exp(edge) - 1) / edge * np.exp(-1.0)
    return float(run.voltage("out") - exact)


def test_errors_fall_with_the_square_of_the_stride():
    errors = [abs(run_ladder(stride)) for stride in (2e-8, 1e-8, 5e-9)]
    assert errors[0] < 2e-3
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.25)
    assert errors[1] / errors[2] == pytest.approx(4.0, rel=0.25)


def test_strides_of_unequal_length_are_second_order_too():
    circuit = Circuit()
    circuit.add_current_source("i1", "0", "out", [1e-3, 2e-3])
    circuit.add_voltage_source("vin", "in", "0", 0.0)
    circuit.add_resistor("r1", "in", "out", 1e3)
    circuit.add_capacitor("c1", "out", "0", 1e-9)
    bias = solve_bias(circuit, {})
    run = Transient(bias, {"vin": 1e9})
    run.advance(1e-9, moves=True)
    stride, time = np.array([1e-9, 1.5e-9]), np.full(2, 1e-9)
    for k in range(60):
        run.advance(stride, begins=k == 0)
        time = time + stride
        stride = stride * 1.05
    expected = np.array([1.0, 2.0]) + 1 - np.exp(-(time - 0.5e-9) / 1e-6)
    np.testing.assert_allclose(run.voltage("out"), expected, atol=2e-3)


def test_a_transistor_discharges_a_capacitor_with_its_current():
    """A gate that rises at once: the slope is the new current over the capacitor."""
    circuit = Circuit()
    circuit.add_voltage_source("vg", "g", "0", 0.0)
    circuit.add_voltage_source("vdd", "vdd", "0", 1.6)
    circuit.add_resistor("r1", "vdd", "d", 1e9)
    circuit.add_capacitor("c1", "d", "0", 1e-9)
    circuit.add_transistor("m1", "nmos", polarity="n", drain="d", gate="g", source="0", bulk="0",
                           length=1e-6, count=[1, 8])  # fmt: skip
    device = example_devices()["nmos"]
    run = Transient(solve_bias(circuit, {"nmos": device}), {"vg": 0.5e9})
    run.advance(1e-9, moves=True)
    stride = 0.02e-9 / device.at(vgs=0.5, length=1e-6, vds=1.5, vsb=0.0).id / np.array([1, 8])
    run.advance(stride, begins=True)
    high = run.voltage("d")
    for _ in range(5):
        run.advance(stride)
    # five times 20 mV, by the current at some 1.5 V
    np.testing.assert_allclose(high - run.voltage("d"), 0.1, rtol=0.01)


def test_what_has_no_bias_point_is_not_a_number_and_disturbs_nothing():
    circuit = Circuit()
    circuit.add_voltage_source("vin", "in", "0", [0.0, 1.0])
    circuit.add_resistor("r1", "in", "out", 1e3)
    circuit.add_capacitor("c1", "out", "0", 1e-9)
    bias = solve_bias(circuit, {})
    bias.found.converged[1] = False
    run = Transient(bias, {"vin": 1e9})
    run.advance(1e-9, moves=True)
    run.advance(1e-6, begins=True)
    found = run.voltage("out")
    assert np.isfinite(found[0])
    assert np.isnan(found[1])
