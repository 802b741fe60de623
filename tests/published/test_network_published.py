"""Nodal analysis against values from outside the project."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest

from gmid.network import (
    Network,
    Transfer,
    compute_noise,
    find_poles,
    integrate_noise,
    measure_loop,
    transfer,
)


@dataclass(frozen=True)
class Case:
    """One published value: where it stands, what it says, how close we must come and why."""

    citation: str
    locator: str
    given: dict[str, float]
    value: float
    tolerance: float
    why: str

    def __str__(self) -> str:
        return f"{self.locator}: {self.value:g}"


DIGITS = "half a unit of the last digit given"

KTC = [
    Case("H. Nyquist, Phys. Rev. 32, 1928", "kT/C noise of 1 pF at 300 K [V]",
         {"kelvin": 300.0, "capacitance": 1e-12}, 64.358e-6, 0.5e-9, DIGITS),
    Case("H. Nyquist, Phys. Rev. 32, 1928", "kT/C noise of 1 pF at 290 K [V]",
         {"kelvin": 290.0, "capacitance": 1e-12}, 63.276e-6, 0.5e-9, DIGITS),
]  # fmt: skip

JOHNSON = [
    Case("H. Nyquist, Phys. Rev. 32, 1928", "1 kohm at 300 K [V/rtHz]",
         {"kelvin": 300.0, "resistance": 1e3}, 4.07035e-9, 0.5e-14, DIGITS),
    Case("H. Nyquist, Phys. Rev. 32, 1928", "50 ohm at 290 K [V/rtHz]",
         {"kelvin": 290.0, "resistance": 50.0}, 0.89486e-9, 0.5e-14, DIGITS),
]  # fmt: skip

MARGINS = [
    Case("H. W. Bode, Network analysis and feedback amplifier design, 1945",
         f"second pole at {ratio} times the loop bandwidth [deg]", {"ratio": ratio}, margin, 0.05,
         DIGITS)
    for ratio, margin in ((1.0, 51.8), (1.5, 60.0), (2.0, 65.5), (3.0, 72.4))
]  # fmt: skip

BUTTERWORTH = [
    Case("S. Butterworth, Wireless Engineer 7, 1930; closed form",
         f"noise bandwidth over the 3 dB frequency, order {order} [-]", {"order": order}, value,
         1e-6, "one unit of the last digit given")
    for order, value in ((1, 1.570796), (2, 1.110721), (3, 1.047198), (4, 1.026172), (5, 1.016641))
]  # fmt: skip

QUALITY = [
    Case("J. Tow 1968 and L. C. Thomas 1971 (from memory); digits by another nodal analysis",
         "Q' of three amplifiers, Q = 10, wt/w0 = 200 [-]", {"inverter": True}, 12.505, 4e-5,
         DIGITS),
    Case("J. Tow 1968 and L. C. Thomas 1971 (from memory), Q/(1 - 4 Q w0/wt)",
         "Q' of three amplifiers, first order [-]", {"inverter": True}, 12.5, 0.02,
         "first order in w0/wt; the terms left out are of the order of x/wt, some 1 %"),
    Case("J. Tow 1968 and L. C. Thomas 1971 (from memory), Q/(1 - 2 Q w0/wt)",
         "Q' without the inverter, first order [-]", {"inverter": False}, 11.111, 0.02,
         "as above"),
]  # fmt: skip

PHASE = Case("M. S. Ghausi, K. R. Laker, Modern filter design (from memory)",
             "phase error of an integrator of gain A0 = 1000 at its unity frequency [rad]",
             {"gain": 1000.0}, 1e-3, 1e-8, "arctan(x) = x to x^3/3")  # fmt: skip


@pytest.mark.parametrize("case", KTC, ids=str)
def test_noise_of_a_capacitor(case):
    net = Network()
    temperature = case.given["kelvin"] - 273.15
    net.add_resistor("r", "out", "0", 1e4, temperature=temperature)
    net.add_capacitor("c", "out", "0", case.given["capacitance"])
    found = integrate_noise(net, "out", (0.0, np.inf)).rms
    assert float(found) == pytest.approx(case.value, abs=case.tolerance)


@pytest.mark.parametrize("case", JOHNSON, ids=str)
def test_noise_of_a_resistor(case):
    net = Network()
    temperature = case.given["kelvin"] - 273.15
    net.add_resistor("r", "out", "0", case.given["resistance"], temperature=temperature)
    found = compute_noise(net, "out", [1e3]).density[0]
    assert found == pytest.approx(case.value, abs=case.tolerance)


@pytest.mark.parametrize("case", MARGINS, ids=str)
def test_margin_of_a_two_pole_loop(case):
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_vccs("gm", ("0", "out"), ("in", "0"), 1e-3, pole=case.given["ratio"] * 1e9)
    net.add_capacitor("c", "out", "0", 1e-12)
    found = measure_loop(Transfer(net, "vin", "out"), sign=1).phase_margin
    assert float(found) == pytest.approx(case.value, abs=case.tolerance)


@pytest.mark.parametrize("case", BUTTERWORTH, ids=str)
def test_noise_bandwidth(case):
    order, w = int(case.given["order"]), 2e6 * np.pi
    net = Network()
    net.add_noise("n", "0", "v0", white=1.0)
    net.add_conductor("g", "v0", "0", 1.0)
    stage = "v0"
    for k in range(order // 2):
        q = 1 / (2 * np.sin((2 * k + 1) * np.pi / (2 * order)))
        inner, out = f"i{k}", f"o{k}"
        net.add_capacitor(f"ca{k}", inner, "0", 1 / w)
        net.add_capacitor(f"cb{k}", out, "0", 1 / w)
        net.add_vccs(f"in{k}", ("0", inner), (stage, out), 1.0)
        net.add_vccs(f"fw{k}", ("0", out), (inner, "0"), 1.0)
        net.add_conductor(f"gq{k}", out, "0", 1 / q)
        stage = out
    if order % 2:
        net.add_vccs("last", ("0", "last"), (stage, "0"), 1.0)
        net.add_conductor("glast", "last", "0", 1.0)
        net.add_capacitor("clast", "last", "0", 1 / w)
        stage = "last"
    dc = abs(transfer_from_noise(net, stage)) ** 2
    found = integrate_noise(net, stage, (0.0, np.inf), accuracy=1e-8).power / dc / 1e6
    assert float(found) == pytest.approx(case.value, abs=case.tolerance)


def transfer_from_noise(net: Network, node: str) -> complex:
    net.add_current_source("probe", "0", "v0")
    return complex(transfer(net, "probe", node, 0.0))


def three_amplifiers(*, inverter: bool) -> Network:
    q, w0 = 10.0, 1.0
    net = Network()
    net.add_resistor("rin", "x1", "0", 1.0)
    net.add_resistor("rq", "v1", "x1", q)
    net.add_capacitor("c1", "v1", "x1", 1 / w0)
    net.add_resistor("r1", "v1", "x2", 1.0)
    net.add_capacitor("c2", "v2", "x2", 1 / w0)
    names = ["1", "2"]
    if inverter:
        net.add_resistor("ra", "v2", "x3", 1.0)
        net.add_resistor("rb", "v3", "x3", 1.0)
        net.add_resistor("r2", "v3", "x1", 1.0)
        names.append("3")
    else:
        net.add_crossed("r2", "v2", "x1", conductance=1.0)
    for k in names:
        net.add_amplifier(f"a{k}", (f"v{k}", "0"), ("0", f"x{k}"), bandwidth=200.0 * w0)
    return net


@pytest.mark.parametrize("case", QUALITY, ids=str)
def test_quality_of_a_two_integrator_loop(case):
    poles = find_poles(three_amplifiers(inverter=bool(case.given["inverter"])))
    pole = poles[poles.imag > 0][0]
    found = abs(pole) / (-2 * pole.real)
    assert found == pytest.approx(case.value, rel=case.tolerance)


def test_phase_error_of_an_integrator():
    gain = PHASE.given["gain"]
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_vccs("gm", ("0", "out"), ("in", "0"), 1e-3)
    net.add_resistor("ro", "out", "0", gain / 1e-3)
    net.add_capacitor("c", "out", "0", 1e-12)
    phase = np.angle(transfer(net, "vin", "out", 1e9 / (2 * np.pi)))
    assert float(phase + np.pi / 2) == pytest.approx(PHASE.value, abs=PHASE.tolerance)
