"""Bias points against closed forms of the literature.

Each case says where its formula is from.  The devices are an invented EKV transistor (see
`builders.ekv`), which obeys them exactly; what is left is the interpolation of its table.
"""

from __future__ import annotations

import numpy as np
import pytest

import builders
from circuit_devices import make_device
from gmid.circuit import Circuit, solve_bias

THERMAL_VOLTAGE = builders.UT

IDEAL = {"nmos": make_device(lam=0.0, length=(0.5e-6, 1e-6, 2e-6, 4e-6))}
"""Without channel-length modulation."""


def add(circuit, name, drain, gate, source, count, *, length=1e-6, stack=1):
    circuit.add_transistor(name, "nmos", polarity="n", drain=drain, gate=gate, source=source,
                           bulk="0", length=length, count=count, stack=stack)  # fmt: skip


@pytest.mark.parametrize("vgs", [0.35, 0.5, 0.8])
@pytest.mark.parametrize("vds", [0.1, 0.5])
def test_units_in_series_are_one_longer_transistor(vgs, vds):
    """Series association.

    C. Galup-Montoro, M. C. Schneider, I. J. B. Loss, "Series-parallel association of FET's for
    high gain and high frequency applications", IEEE J. Solid-State Circuits 29 (1994) 1094
    (from memory): n equal transistors in series, gates together, carry the current of one of n
    times the length. Tolerance 0.3 %: the units at the source sit at a few millivolts of vds,
    where the table is interpolated most coarsely.
    """
    c = Circuit()
    c.add_voltage_source("vg", "g", "0", vgs)
    for name, length, stack in (("one", 2e-6, 1), ("two", 1e-6, 2), ("four", 0.5e-6, 4)):
        c.add_voltage_source(f"v{name}", name, "0", vds)
        add(c, f"m{name}", name, "g", "0", 1, length=length, stack=stack)
    bias = solve_bias(c, IDEAL).require()
    expected = builders.ekv(2e-6, 0.0, vds, vgs, lam=0.0)[0]
    for name in ("mone", "mtwo", "mfour"):
        assert float(bias.id(name)) == pytest.approx(expected, rel=3e-3)


@pytest.mark.parametrize(("lower", "upper"), [(1, 1), (1, 4), (2, 16), (4, 1)])
def test_voltage_proportional_to_absolute_temperature(lower, upper):
    """The cell of two transistors in weak inversion.

    E. Vittoz, J. Fellrath, "CMOS analog integrated circuits based on weak inversion operation",
    IEEE J. Solid-State Circuits 12 (1977) 224 (from memory): with both gates at one voltage, the
    upper one saturated and one current through both, the node between them lies at
    (kT/q) ln(1 + S_upper/S_lower). Tolerance 0.5 %: the exponential law is off by about half
    the root of current over specific current (1.2 uA), here 0.2 %, and the table adds less.
    """
    c = Circuit()
    c.add_voltage_source("vg", "g", "0", 0.05)
    c.add_voltage_source("vd", "d", "0", 0.6)
    add(c, "mlow", "x", "g", "0", lower)
    add(c, "mhigh", "d", "g", "x", upper)
    bias = solve_bias(c, IDEAL).require()
    expected = THERMAL_VOLTAGE * np.log1p(upper / lower)
    assert float(bias.voltage("x")) == pytest.approx(expected, rel=5e-3)


def test_a_diode_obeys_the_inverse_of_the_current_law():
    """Gate voltage of a saturated device at a given current.

    C. C. Enz, F. Krummenacher, E. A. Vittoz, "An analytical MOS transistor model valid in all
    regions of operation", Analog Integr. Circuits Signal Process. 8 (1995) 83 (from memory):
    i = ln(1 + exp(v/2))^2, so v = 2 ln(exp(sqrt(i)) - 1). Tolerance 0.1 mV: the interpolation
    of ln(id), better than 0.3 %, times the 30 mV of a neper.
    """
    current = np.geomspace(1e-9, 3e-5, 12)
    c = Circuit()
    c.add_current_source("i1", "0", "g", current)
    add(c, "m1", "g", "g", "0", 1)
    bias = solve_bias(c, IDEAL).require()
    specific = 0.6e-6 * 2e-6 / 1e-6
    forward = 2 * THERMAL_VOLTAGE * np.log(np.expm1(np.sqrt(current / specific)))
    np.testing.assert_allclose(bias.voltage("g"), 0.42 + 1.3 * forward, atol=1e-4)
