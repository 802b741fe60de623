"""Crossings, margins, bandwidth and peaks, and loop gains at a probe."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import UsageFault
from gmid.network import (
    DoubleInjection,
    Network,
    Transfer,
    break_loop,
    find_bandwidth,
    find_crossing,
    find_peak,
    measure_dc_gain,
    measure_gain,
    measure_loop,
)

TWO_PI = 2 * np.pi


def stage(gm=1e-3, ro=1e6, cl=1e-12, pole=1e9) -> Network:
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_vccs("gm", ("out", "0"), ("in", "0"), gm, pole=pole)
    net.add_resistor("ro", "out", "0", ro)
    net.add_capacitor("cl", "out", "0", cl)
    return net


def two_pole_crossing(gain, p1, p2):
    """|T| = 1 of gain/((1+s/p1)(1+s/p2)), a quadratic in w^2."""
    a, b, c = 1 / (p1 * p2) ** 2, 1 / p1**2 + 1 / p2**2, 1 - gain**2
    return np.sqrt((-b + np.sqrt(b * b - 4 * a * c)) / (2 * a))


def test_two_pole_amplifier_in_closed_form():
    p2 = np.array([3e8, 1e9, 4e9])
    found = measure_loop(Transfer(stage(pole=p2), "vin", "out"))
    p1 = 1 / (1e6 * 1e-12)
    w = two_pole_crossing(1e3, p1, p2)
    margin = 180 - np.rad2deg(np.arctan(w / p1) + np.arctan(w / p2))
    np.testing.assert_allclose(found.dc_gain, -1e3, rtol=1e-12)
    np.testing.assert_allclose(found.gbw, w / TWO_PI, rtol=1e-11)
    np.testing.assert_allclose(found.phase_margin, margin, atol=1e-8)
    assert np.isinf(found.gain_margin).all()


@pytest.mark.parametrize("band", [(1.0, 1e12), (3.7, 0.9e10), (1e3, 1e15)])
def test_results_do_not_depend_on_the_grid(band):
    response = Transfer(stage(), "vin", "out")
    w = two_pole_crossing(1e3, 1e6, 1e9)
    assert float(find_crossing(response, band=band)) * TWO_PI == pytest.approx(w, rel=1e-11)


def test_three_poles_have_a_gain_margin():
    # k/(1+s)^3: lag of 180 degrees at sqrt(3), gain k/8 there
    def response(f):
        return 4.0 / (1 + 1j * f) ** 3

    found = measure_loop(response, band=(1e-3, 1e3))
    assert float(found.gain_margin) == pytest.approx(2.0, rel=1e-11)
    f = np.sqrt(4.0 ** (2 / 3) - 1)
    assert float(found.gbw) == pytest.approx(f, rel=1e-11)
    margin = 180 - 3 * np.rad2deg(np.arctan(f))
    assert float(found.phase_margin) == pytest.approx(margin, abs=1e-9)


@pytest.mark.parametrize("q", [0.5, 5.0, 200.0])
def test_phase_is_followed_through_a_sharp_resonance(q):
    # a resonance two decades below the crossing turns the phase by 180 degrees
    def response(f):
        x = 1j * f
        return 1e4 / (1 + x / q + x * x) * (1 + x / 20.0)

    found = measure_loop(response, band=(1e-4, 1e6))
    f = float(found.gbw)
    x = 1j * f
    assert abs(response(np.array([f]))[0]) == pytest.approx(1, rel=1e-10)
    lag = np.angle(1 + x / 20.0) - np.angle(1 + x / q + x * x)
    assert float(found.phase_margin) == pytest.approx(180 + np.rad2deg(lag), abs=1e-7)


def test_unstable_loop_has_a_negative_margin_beyond_wrapping():
    def response(f):
        return -1e5 / (1 + 1j * f) ** 5

    found = measure_loop(response, band=(1e-3, 1e4))
    f = np.sqrt(1e5**0.4 - 1)
    margin = 180 - 5 * np.rad2deg(np.arctan(f))
    assert margin < -200
    assert float(found.phase_margin) == pytest.approx(margin, abs=1e-8)


def test_integrator_without_a_dc_value():
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_vccs("gm", ("out", "0"), ("in", "0"), 1e-3)
    net.add_capacitor("cl", "out", "0", [1e-12, 2e-12])
    found = measure_loop(Transfer(net, "vin", "out"), sign=-1)
    np.testing.assert_allclose(found.gbw, 1e9 / TWO_PI / np.array([1, 2]), rtol=1e-12)
    np.testing.assert_allclose(found.phase_margin, 90.0, atol=1e-9)
    assert np.isnan(found.dc_gain).all()


def test_no_crossing_is_not_a_number():
    gm = np.array([1e-3, 1e-7, np.nan])
    response = Transfer(stage(gm=gm), "vin", "out")
    found = measure_loop(response)
    assert np.isfinite(found.gbw).tolist() == [True, False, False]
    assert np.isfinite(found.phase_margin).tolist() == [True, False, False]
    assert np.isnan(found.gain_margin).tolist() == [False, False, True]
    assert np.isfinite(find_bandwidth(response)).tolist() == [True, True, False]
    with pytest.raises(UsageFault, match="cannot search"):
        find_crossing(response, band=(10.0, 1.0))


def test_batch_of_measures_is_a_loop():
    gm, cl = np.array([1e-4, 1e-3]), np.array([[1e-12], [3e-12]])
    found = measure_loop(Transfer(stage(gm=gm, cl=cl), "vin", "out"))
    for i in range(2):
        for j in range(2):
            one = measure_loop(Transfer(stage(gm=gm[j], cl=cl[i, 0]), "vin", "out"))
            assert one.gbw == pytest.approx(found.gbw[i, j], rel=1e-12)
            assert one.phase_margin == pytest.approx(found.phase_margin[i, j], abs=1e-9)


def test_bandwidth_gain_and_dc_gain():
    response = Transfer(stage(pole=np.inf), "vin", "out")
    corner = 1 / (TWO_PI * 1e-6)
    assert float(find_bandwidth(response)) == pytest.approx(corner, rel=1e-12)
    assert float(measure_dc_gain(response)) == pytest.approx(-1e3, rel=1e-13)
    np.testing.assert_allclose(measure_gain(response, [0.0, corner]), [1e3, 1e3 / np.sqrt(2)])
    assert float(find_bandwidth(response, drop=4.0)) == pytest.approx(
        corner * np.sqrt(3), rel=1e-12
    )


def test_peak_of_a_low_pass_section():
    q = np.array([1.0, 4.545])
    f0 = 1e6

    def response(f):
        x = 1j * f / f0
        return 1 / (1 + x / q[:, None] + x * x)

    f, gain = find_peak(response, band=(1e4, 1e8))
    np.testing.assert_allclose(gain, q / np.sqrt(1 - 1 / (4 * q**2)), rtol=1e-12)
    np.testing.assert_allclose(f, f0 * np.sqrt(1 - 1 / (2 * q**2)), rtol=1e-5)


def loop(gate_resistance, gate_capacitance=1e-15) -> Network:
    net = Network()
    net.add_vccs("gm", ("drive", "0"), ("gate", "0"), 1e-3)
    net.add_resistor("ro", "drive", "0", 1e5)
    net.add_capacitor("co", "drive", "0", 1e-12)
    net.add_resistor("rg", "gate", "0", gate_resistance)
    net.add_capacitor("cg", "gate", "0", gate_capacitance)
    net.add_voltage_source("vprobe", "drive", "gate")
    return net


def test_loop_gain_at_a_gate_without_current():
    net = loop(np.inf, 0.0)
    f = np.geomspace(1e3, 1e10, 12)
    expected = 1e-3 / (1e-5 + 2j * np.pi * f * 1e-12)
    np.testing.assert_allclose(break_loop(net, "vprobe")(f), expected, rtol=1e-12)
    np.testing.assert_allclose(DoubleInjection(net, "vprobe")(f), expected, rtol=1e-9)
    found = measure_loop(break_loop(net, "vprobe"))
    assert float(found.gbw) == pytest.approx(np.sqrt(1e-6 - 1e-10) / (TWO_PI * 1e-12), rel=1e-12)
    assert float(found.dc_gain) == pytest.approx(100.0)


@pytest.mark.parametrize("rg", [1e3, 1e5, 1e7])
def test_double_injection_does_not_mind_impedances(rg):
    net = loop(rg, 2e-12)
    f = np.geomspace(1e3, 1e10, 12)
    expected = 1e-3 / (1e-5 + 1 / rg + 2j * np.pi * f * 3e-12)
    np.testing.assert_allclose(DoubleInjection(net, "vprobe")(f), expected, rtol=1e-10)
    single = DoubleInjection(net, "vprobe")(0.0)
    assert single.shape == ()
    found = measure_loop(DoubleInjection(net, "vprobe"))
    assert float(found.dc_gain) == pytest.approx(1e-3 / (1e-5 + 1 / rg))


def test_a_probe_must_stand_in_a_loop():
    net = stage()
    with pytest.raises(UsageFault, match="ends at ground"):
        break_loop(net, "vin")
    with pytest.raises(UsageFault, match="ro is a resistor"):
        DoubleInjection(net, "ro")
