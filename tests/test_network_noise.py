"""Noise: spot values, shares, integrals, half circuits."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import NoSolution, UnknownName, UsageFault
from gmid.network import Network, compute_noise, find_owner_share, integrate_noise
from gmid.network.quadrature import GAUSS_WEIGHTS, KRONROD_WEIGHTS, POINTS, integrate_log

K = 1.380649e-23
T = 26.85


def low_pass(resistance=1e3, capacitance=1e-12) -> Network:
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_resistor("r1", "in", "out", resistance, temperature=T)
    net.add_capacitor("c1", "out", "0", capacitance)
    return net


def test_boltzmann_constant_is_the_exact_one():
    from scipy import constants

    from gmid.network.stamps import BOLTZMANN

    assert constants.k == BOLTZMANN


def test_rules_of_quadrature_are_exact_for_polynomials():
    for degree in range(23):
        expected = (1 - (-1) ** (degree + 1)) / (degree + 1)
        assert KRONROD_WEIGHTS @ POINTS**degree == pytest.approx(expected, abs=1e-15)
    for degree in range(14):
        expected = (1 - (-1) ** (degree + 1)) / (degree + 1)
        assert GAUSS_WEIGHTS @ POINTS**degree == pytest.approx(expected, abs=1e-15)


def test_shares_and_reference_to_the_input():
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_vccs("gm", ("out", "0"), ("in", "0"), 2e-3)
    net.add_noise("m1.channel", "out", "0", white=3e-23, owner="m1")
    net.add_noise("m1.gate", "0", "out", flicker=4e-18, exponent=0.8, owner="m1")
    net.add_resistor("r", "out", "0", 5e3, temperature=T)
    f = np.array([1.0, 1e3, 1e6])
    found = compute_noise(net, "out", f, source="vin")
    thermal = 4 * K * 300 / 5e3
    flicker = 4e-18 / f**0.8
    expected = np.stack([np.full(3, 3e-23), flicker, np.full(3, thermal)], axis=-1) * 25e6
    np.testing.assert_allclose(found.shares, expected, rtol=1e-12)
    np.testing.assert_allclose(found.power, expected.sum(axis=-1), rtol=1e-12)
    np.testing.assert_allclose(found.input_density, found.density / 10, rtol=1e-12)
    assert set(found.by_owner()) == {"m1", "r"}
    share = (3e-23 + flicker) / (3e-23 + flicker + thermal)
    np.testing.assert_allclose(find_owner_share(found, "m1"), share, rtol=1e-12)
    with pytest.raises(UnknownName, match="Did you mean m1"):
        find_owner_share(found, "m11")


def test_flicker_integrates_to_a_logarithm():
    net = Network()
    net.add_resistor("r", "out", "0", 2.0)
    net.add_noise("n", "out", "0", flicker=3.0)
    found = integrate_noise(net, "out", (1.0, 1e5))
    assert found.power == pytest.approx(12 * np.log(1e5), rel=1e-12)
    steep = net.with_values({"n": {"exponent": 1.5}})
    expected = 12 * 2 * (1 - 1e5**-0.5)
    assert integrate_noise(steep, "out", (1.0, 1e5)).power == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("resistance", [1.0, 1e3, 1e9])
def test_all_noise_of_a_low_pass_is_kt_over_c(resistance):
    found = integrate_noise(low_pass(resistance), "out", (0.0, np.inf))
    assert found.power == pytest.approx(K * 300 / 1e-12, rel=1e-6)


def test_band_of_a_low_pass_in_closed_form():
    pole = 1 / (2 * np.pi * 1e-9)
    low, high = 1e5, 3e9
    expected = K * 300 / 1e-12 * (np.arctan(high / pole) - np.arctan(low / pole)) * 2 / np.pi
    found = integrate_noise(low_pass(), "out", (low, high))
    assert found.power == pytest.approx(expected, rel=1e-9)
    assert integrate_noise(low_pass(), "out", (0.0, high)).power == pytest.approx(
        K * 300 / 1e-12 * np.arctan(high / pole) * 2 / np.pi, rel=1e-8
    )


def test_a_sharp_resonance_is_not_missed():
    # two-integrator loop with a loss: kT/C at any Q, by the equipartition of a gyrator resonator
    q = np.array([1.0, 50.0, 2000.0])
    net = Network()
    net.add_vccs("g1", ("a", "0"), ("b", "0"), 1e-3)
    net.add_vccs("g2", ("b", "0"), ("a", "0"), -1e-3)
    net.add_capacitor("ca", "a", "0", 1e-12)
    net.add_capacitor("cb", "b", "0", 1e-12)
    net.add_conductor("gq", "a", "0", 1e-3 / q, temperature=T)
    found = integrate_noise(net, "a", (0.0, np.inf))
    np.testing.assert_allclose(found.power, K * 300 / 1e-12, rtol=1e-6)


def two_integrators(alpha, q, gain, ca=2e-12, cb=3e-12, w0=2e6 * np.pi) -> Network:
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_conductor("gi", "in", "x1", gain * w0 * ca / alpha, temperature=T)
    net.add_conductor("g21", "v2", "x1", w0 * ca / alpha, temperature=T)
    net.add_capacitor("ca", "x1", "v1", ca)
    net.add_amplifier("a1", ("v1", "0"), ("0", "x1"))
    net.add_crossed("g12", "v1", "x2", conductance=alpha * w0 * cb, temperature=T)
    net.add_conductor("gq", "v2", "x2", w0 * cb / q, temperature=T)
    net.add_capacitor("cb", "x2", "v2", cb)
    net.add_amplifier("a2", ("v2", "0"), ("0", "x2"))
    return net


@pytest.mark.parametrize(("alpha", "q", "gain"), [(1, 1, 1), (0.5, 4.5, 2), (2, 8, 0.3)])
def test_half_circuit_of_a_two_integrator_low_pass(alpha, q, gain):
    found = integrate_noise(two_integrators(alpha, q, gain), "v2", (0.0, np.inf))
    expected = K * 300 * ((1 + alpha * q) / 3e-12 + alpha * q * (1 + gain) / 2e-12)
    assert found.power == pytest.approx(expected, rel=1e-6)


def test_crossed_noise_is_that_of_the_full_differential_network():
    half, full = Network(), Network()
    half.add_crossed("x", "a", "b", conductance=1e-4, temperature=T)
    full.add_conductor("x1", "ap", "bn", 1e-4, temperature=T)
    full.add_conductor("x2", "an", "bp", 1e-4, temperature=T)
    for node, g, c in (("a", 2e-5, 1e-12), ("b", 3e-5, 3e-12)):
        half.add_conductor(f"g{node}", node, "0", g, temperature=T)
        half.add_capacitor(f"c{node}", node, "0", c)
        for side in "pn":
            full.add_conductor(f"g{node}{side}", node + side, "0", g, temperature=T)
            full.add_capacitor(f"c{node}{side}", node + side, "0", c)
    half.add_vccs("gm", ("b", "0"), ("a", "0"), 1e-4)
    half.add_noise("gm.n", "b", "a", white=1e-23, owner="gm", signs=(1, -1))
    for side, other in ("pn", "np"):
        full.add_vccs(f"gm{side}", (f"b{side}", "0"), (f"a{side}", "0"), 1e-4)
        full.add_noise(f"gm{side}.n", f"b{side}", f"a{other}", white=1e-23, owner="gm")
    f = np.geomspace(1e3, 1e9, 9)
    one = compute_noise(half, "b", f).power
    two = compute_noise(full, ("bp", "bn"), f).power
    np.testing.assert_allclose(2 * one, two, rtol=1e-12)


def test_batches_share_one_quadrature():
    c = np.array([[1e-12], [5e-12]])
    found = integrate_noise(low_pass([1e2, 1e5, np.nan], c), "out", (1.0, 1e13))
    assert found.power.shape == (2, 3)
    np.testing.assert_allclose(found.power[:, :2], K * 300 / c * np.ones(2), rtol=1e-3)
    assert np.isnan(found.power[:, 2]).all()


def test_what_cannot_be_integrated_is_said():
    net = low_pass()
    with pytest.raises(UsageFault, match="empty"):
        integrate_noise(net, "out", (10.0, 1.0))
    net.add_noise("n", "out", "0", flicker=1e-20)
    with pytest.raises(UsageFault, match="0 Hz"):
        integrate_noise(net, "out", (0.0, 1e6))
    with pytest.raises(UsageFault, match="0 Hz"):
        compute_noise(net, "out", [0.0, 1e6])
    bare = Network()
    bare.add_resistor("r", "out", "0", 1e3)
    with pytest.raises(UsageFault, match="no noise source"):
        compute_noise(bare, "out", [1.0])
    flat = low_pass()
    flat.add_resistor("r2", "free", "0", 1e3, temperature=T)
    with pytest.raises(NoSolution, match="does not converge"):
        integrate_noise(flat, "free", (0.0, np.inf))
    with pytest.raises(NoSolution, match="accuracy"):
        integrate_log(lambda f: 1 / np.abs(f - 2.0)[:, None], 1.0, 10.0, accuracy=1e-9)
    with pytest.raises(UsageFault, match="no input"):
        _ = compute_noise(low_pass(), "out", [1.0]).input_power
