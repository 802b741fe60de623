"""Circuits of two sides: folded for their bias, halved for differential signals."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.circuit import Circuit, fold_circuit, solve_bias
from gmid.errors import UnknownName, UsageFault
from gmid.network import compute_noise, transfer
from test_circuit_bias import DEVICES

MIRROR = {f"{node}p": f"{node}n" for node in ("vi", "x", "y", "z", "vo")}


def amplifier(count=1.0, supply=1.8):
    """A stage of two sides that cross over, with stacks and elements between the sides."""
    c = Circuit()
    c.add_voltage_source("vdd", "vdd", "0", supply)
    c.add_voltage_source("vcm", "vcm", "0", np.multiply(supply, 0.5))
    c.add_current_source("iref", "vdd", "bn", 2e-6)

    def add(name, device, drain, gate, source, units, stack=1):
        bulk = "0" if device == "nmos" else "vdd"
        units = np.multiply(units, count)
        c.add_transistor(name, device, polarity=device[0], drain=drain, gate=gate, source=source,
                         bulk=bulk, length=1e-6, count=units, stack=stack)  # fmt: skip

    add("mb", "nmos", "bn", "bn", "0", 2, stack=2)
    add("mt", "nmos", "tail", "bn", "0", 4, stack=2)
    for side, other in ("pn", "np"):
        c.add_voltage_source(f"vi{side}", f"vi{side}", "vcm", 0.0)
        add(f"m1{side}", "nmos", f"x{side}", f"vi{side}", "tail", 4)
        add(f"m2{side}", "pmos", f"x{side}", f"x{side}", "vdd", 3)
        add(f"m3{side}", "pmos", f"y{other}", f"x{side}", "vdd", 3, stack=2)
        add(f"m4{side}", "nmos", f"y{side}", f"y{side}", "0", 2)
        add(f"m5{side}", "nmos", f"vo{side}", f"y{side}", "0", 2)
        add(f"m6{side}", "pmos", f"vo{side}", f"x{side}", "vdd", 2)
        c.add_resistor(f"r1{side}", f"vo{side}", "vcm", 300e3)
        c.add_capacitor(f"c1{side}", f"vo{side}", "0", 1e-13)
        c.add_capacitor(f"c2{side}", f"x{side}", f"vo{other}", 5e-15)
        c.add_resistor(f"r2{side}", f"z{side}", f"x{other}", 2e6)
        c.add_resistor(f"r3{side}", f"z{side}", "vcm", 2e6)
    c.add_resistor("r4", "vop", "von", 1e6)
    c.add_capacitor("c4", "von", "vop", 3e-14)
    return c


def test_the_folded_circuit_has_the_bias_of_the_whole():
    c = amplifier(count=[1.0, 2.0], supply=[[1.7], [1.8], [1.9]])
    whole = solve_bias(c, DEVICES).require()
    folded = solve_bias(c, DEVICES, mirror=MIRROR).require()
    for node in c.nodes:
        np.testing.assert_allclose(folded.voltage(node), whole.voltage(node), atol=1e-9)
    for name in ("vdd", "vcm", "vip", "vin"):
        expected = whole.source_current(name)
        np.testing.assert_allclose(folded.source_current(name), expected, rtol=1e-7, atol=1e-14)
    for name in ("m3p", "m3n", "mt", "m5n"):
        for read in ("id", "gm", "gds"):
            expected = getattr(whole, read)(name)
            np.testing.assert_allclose(getattr(folded, read)(name), expected, rtol=1e-7)
    assert int(solve_bias(c, DEVICES, mirror=MIRROR, start=whole).steps.max()) == 1


def test_the_half_circuit_has_the_differential_gain_and_noise_of_the_whole():
    bias = solve_bias(amplifier(count=[1.0, 2.0]), DEVICES, mirror=MIRROR).require()
    f = np.array([1.0, 1e5, 1e7, 1e9])
    whole, half = bias.linearise(), bias.linearise_half(drives=["vip"])
    assert (len(whole.unknowns), len(half.unknowns)) == (22, 7)
    expected = transfer(whole, {"vip": 0.5, "vin": -0.5}, ("vop", "von"), f)
    np.testing.assert_allclose(transfer(half, "vip", "vop", f), expected, rtol=1e-6)
    noise = compute_noise(whole, ("vop", "von"), f)
    found = compute_noise(half, "vop", f)
    np.testing.assert_allclose(2 * found.power, noise.power, rtol=1e-6)
    both = noise.by_owner()
    for owner, power in found.by_owner().items():
        twin = owner[:-1] + "n" if owner != "r4" else None
        total = both[owner] + (both[twin] if twin else 0.0)
        np.testing.assert_allclose(2 * power, total, rtol=1e-6, err_msg=owner)
    one = bias.linearise_half(1, drives=["vip"])
    np.testing.assert_allclose(transfer(one, "vip", "vop", f), expected[1], rtol=1e-6)


def test_a_source_across_the_sides_drives_the_kept_one():
    c = amplifier().without(["vip", "vin"])
    c.add_voltage_source("vid", "vip", "vin", 0.0)
    c.add_resistor("rip", "vip", "vcm", 1e6)
    c.add_resistor("rin", "vin", "vcm", 1e6)
    bias = solve_bias(c, DEVICES, mirror=MIRROR).require()
    expected = transfer(bias.linearise(), "vid", ("vop", "von"), 1e6)
    found = transfer(bias.linearise_half(drives=["vid"]), "vid", "vop", 1e6)
    assert found == pytest.approx(expected, rel=1e-9)


def test_the_folded_circuit_answers_common_signals():
    bias = solve_bias(amplifier(), DEVICES, mirror=MIRROR).require()
    whole = transfer(bias.linearise(), {"vip": 1.0, "vin": 1.0}, "vop", [1e4, 1e7])
    folded = solve_bias(bias.fold.circuit, DEVICES).require()
    np.testing.assert_allclose(
        transfer(folded.linearise(), "vip", "vop", [1e4, 1e7]), whole, rtol=1e-6
    )


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"m4n": {"count": 3.0}}, r"m4p \(yp yp 0 0\) has no equal"),
        ({"r1n": 1e6}, "r1p .* has no equal"),
        ({"vip": 0.01}, "vip .* has no equal"),
    ],
)
def test_sides_that_differ_are_refused(change, words):
    with pytest.raises(UsageFault, match=words):
        solve_bias(amplifier().with_values(change), DEVICES, mirror=MIRROR)


def test_what_a_half_circuit_cannot_do_is_told():
    c = amplifier()
    with pytest.raises(UsageFault, match="needs two sides"):
        solve_bias(c, DEVICES).linearise_half()
    with pytest.raises(UnknownName, match="no node vox"):
        fold_circuit(c, {"vop": "vox"})
    bias = solve_bias(c, DEVICES, mirror=MIRROR)
    with pytest.raises(UsageFault, match=r"vdd cannot drive the half circuit\. Drive vip"):
        bias.linearise_half(drives=["vdd"])
