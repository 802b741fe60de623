"""Responses, poles and zeros against closed forms and against scipy.signal."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gmid.errors import NoSolution
from gmid.network import Network, Transfer, find_poles, find_zeros, transfer, transfers

F = np.geomspace(1e3, 1e9, 25)


def ladder(stages: int, resistance=1e3, capacitance=1e-12) -> Network:
    net = Network()
    net.add_voltage_source("vin", "n0", "0")
    for k in range(stages):
        net.add_resistor(f"r{k}", f"n{k}", f"n{k + 1}", resistance)
        net.add_capacitor(f"c{k}", f"n{k + 1}", "0", capacitance)
    return net


@pytest.mark.parametrize("stages", [1, 2, 5, 12])
def test_uniform_ladder_has_its_closed_form(stages):
    # difference equation of the ladder: 2 cosh(theta) = 2 + sRC, open far end
    s = 2j * np.pi * F
    theta = np.arccosh(1 + s * 1e-9 / 2)
    expected = np.cosh(theta / 2) / np.cosh((stages + 0.5) * theta)
    found = transfer(ladder(stages), "vin", f"n{stages}", F)
    np.testing.assert_allclose(found, expected, rtol=1e-10)
    k = np.arange(1, stages + 1)
    poles = -4e9 * np.sin((2 * k - 1) * np.pi / (2 * (2 * stages + 1))) ** 2
    np.testing.assert_allclose(find_poles(ladder(stages)), poles, rtol=1e-12)
    assert find_zeros(ladder(stages), "vin", f"n{stages}").size == 0


def test_widely_spread_poles_keep_their_digits():
    # stages parted by buffers, time constants from 1 ps to 1 s
    times = 10.0 ** -np.arange(0, 13, 2)
    net = Network()
    net.add_voltage_source("vin", "n0", "0")
    for k, tau in enumerate(times):
        net.add_vcvs(f"e{k}", (f"b{k}", "0"), (f"n{k}", "0"), 1.0)
        net.add_resistor(f"r{k}", f"b{k}", f"n{k + 1}", 1e3)
        net.add_capacitor(f"c{k}", f"n{k + 1}", "0", tau / 1e3)
    np.testing.assert_allclose(find_poles(net), -1 / times, rtol=1e-9)


def random_active(seed: int, n: int = 6) -> tuple[Network, np.ndarray, np.ndarray, np.ndarray]:
    """A random RC network with transconductors, and its matrices written down by hand."""
    rng = np.random.default_rng(seed)
    net = Network()
    net.add_current_source("i", "0", "n0")
    g, c = np.zeros((n, n)), np.zeros((n, n))
    for k in range(n):
        value, charge = rng.uniform(0.5, 2, 2)
        g[k, k] += value
        c[k, k] += charge
        net.add_conductor(f"g{k}", f"n{k}", "0", value)
        net.add_capacitor(f"c{k}", f"n{k}", "0", charge)
    for k in range(2 * n):
        i, j = rng.choice(n, 2, replace=False)
        value, charge, gm = rng.uniform(0.1, 1, 3)
        unit = np.zeros(n)
        unit[i], unit[j] = 1, -1
        g += value * np.outer(unit, unit)
        c += charge * np.outer(unit, unit)
        g[i, j] += gm
        net.add_conductor(f"gx{k}", f"n{i}", f"n{j}", value)
        net.add_capacitor(f"cx{k}", f"n{i}", f"n{j}", charge)
        net.add_vccs(f"gm{k}", (f"n{i}", "0"), (f"n{j}", "0"), gm)
    right = np.zeros(n)
    right[0] = 1
    return net, g, c, right


@pytest.mark.parametrize("seed", range(5))
def test_against_scipy_signal(seed):
    from scipy import signal

    net, g, c, right = random_active(seed)
    n = len(right)
    inverse = np.linalg.inv(c)
    weights = np.eye(n)[n - 1 : n]
    system = signal.StateSpace(-inverse @ g, (inverse @ right)[:, None], weights, 0.0)
    w = np.geomspace(1e-2, 1e2, 20)
    with warnings.catch_warnings():
        # the leading numerator coefficient of the other side is zero, as it has to be
        warnings.simplefilter("ignore", signal.BadCoefficients)
        _, expected = signal.freqresp(system, w)
        zpk = system.to_zpk()
    found = transfer(net, "i", f"n{n - 1}", w / (2 * np.pi))
    np.testing.assert_allclose(found, expected, rtol=1e-9)

    def ordered(roots):
        return roots[np.lexsort((roots.imag.round(9), np.abs(roots).round(9)))]

    zeros = find_zeros(net, "i", f"n{n - 1}")
    np.testing.assert_allclose(ordered(find_poles(net)), ordered(zpk.poles), rtol=1e-8)
    near = zpk.zeros[np.abs(zpk.zeros) < 1e4].astype(complex)
    np.testing.assert_allclose(ordered(zeros), ordered(near), rtol=1e-5)
    scale = found[0] * np.prod(1j * w[0] - find_poles(net)) / np.prod(1j * w[0] - zeros)
    rational = [scale * np.prod(1j * x - zeros) / np.prod(1j * x - find_poles(net)) for x in w]
    np.testing.assert_allclose(found, rational, rtol=1e-8)


def test_poles_with_capacitors_in_a_loop_with_a_source_and_amplifiers():
    # capacitive divider with leak, driven by a source: index two, one pole, one zero at DC
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_capacitor("c0", "in", "0", 5e-12)
    net.add_capacitor("c1", "in", "out", 1e-12)
    net.add_capacitor("c2", "out", "0", 3e-12)
    net.add_resistor("r", "out", "0", 1e6)
    net.add_vcvs("e", ("copy", "0"), ("out", "0"), 1.0)
    net.add_capacitor("c3", "copy", "0", 7e-12)
    np.testing.assert_allclose(find_poles(net), [-1 / 4e-6], rtol=1e-12)
    np.testing.assert_allclose(find_zeros(net, "vin", "copy"), [0.0], atol=1e-6)


def test_poles_at_the_origin_and_on_the_axis():
    # two ideal integrators in a loop: +-j w0
    net = Network()
    net.add_current_source("i", "0", "a")
    for name, node, control, gm in (("1", "a", "b", 1e-3), ("2", "b", "a", -1e-3)):
        net.add_vccs(f"g{name}", (node, "0"), (control, "0"), gm)
        net.add_capacitor(f"c{name}", node, "0", 1e-9)
    np.testing.assert_allclose(find_poles(net), [-1e6j, 1e6j], rtol=1e-12, atol=1e-6)
    alone = Network()
    alone.add_capacitor("c", "a", "0", 1e-9)
    alone.add_capacitor("cb", "b", "0", 1e-9)
    alone.add_resistor("r", "b", "0", 1e3)
    np.testing.assert_allclose(find_poles(alone), [0.0, -1e6], atol=1e-9)


def test_batches_of_poles_may_differ_in_number():
    net = Network()
    net.add_resistor("r1", "a", "0", 1e3)
    net.add_resistor("r2", "b", "0", 1e3)
    net.add_capacitor("c1", "a", "0", 1e-9)
    net.add_capacitor("c2", "b", "0", [1e-12, 0.0, np.nan])
    poles = find_poles(net)
    np.testing.assert_allclose(poles[0], [-1e6, -1e9])
    np.testing.assert_allclose(poles[1, 0], -1e6)
    assert np.isnan(poles[1, 1])
    assert np.isnan(poles[2]).all()


def test_singular_pencils_are_refused():
    net = ladder(2)
    net.add_resistor("lost", "x", "y", 1e3)
    with pytest.raises(NoSolution, match="singular at every frequency"):
        find_poles(net)
    apart = ladder(1)
    apart.add_resistor("r", "x", "0", 1e3)
    with pytest.raises(NoSolution, match="the transfer is singular"):
        find_zeros(apart, "vin", "x")


def test_scan_agrees_with_direct_solution():
    net = ladder(6, resistance=np.geomspace(1e2, 1e4, 4))
    response = Transfer(net, "vin", "n6")
    dense = np.geomspace(1e4, 1e8, 60)
    exact = response(dense)
    np.testing.assert_allclose(response.scan(dense), exact, rtol=1e-6)
    relative = Transfer(net, "vin", "n6", reference="n3", factor=-1.0)
    np.testing.assert_allclose(relative.scan(dense), relative(dense), rtol=1e-6)
    np.testing.assert_allclose(
        relative(dense), -exact / transfer(net, "vin", "n3", dense), rtol=1e-12
    )


def test_scan_of_repeated_poles_and_without_dc_falls_back_to_direct_solution():
    net = Network()
    net.add_voltage_source("vin", "n0", "0")
    for k in range(5):
        net.add_vccs(f"g{k}", ("0", f"n{k + 1}"), (f"n{k}", "0"), 1e-3)
        net.add_resistor(f"r{k}", f"n{k + 1}", "0", 1e3)
        net.add_capacitor(f"c{k}", f"n{k + 1}", "0", 1e-9)
    dense = np.geomspace(1e3, 1e7, 60)
    expected = 1 / (1 + 2j * np.pi * dense * 1e-6) ** 5
    np.testing.assert_allclose(Transfer(net, "vin", "n5").scan(dense), expected, rtol=1e-6)
    integrator = Network()
    integrator.add_current_source("i", "0", "a")
    integrator.add_capacitor("c", "a", "0", 1e-9)
    found = Transfer(integrator, "i", "a").scan(dense)
    np.testing.assert_allclose(found, 1 / (2j * np.pi * dense * 1e-9), rtol=1e-13)


value = st.floats(0.1, 10.0)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.tuples(value, value, st.integers(0, 4), st.integers(1, 4)),
                min_size=3, max_size=12))  # fmt: skip
def test_passive_networks_are_reciprocal(branches):
    net = Network()
    for k in range(5):
        net.add_resistor(f"r{k}", f"n{k}", "0", 1.0 + k)
    for k, (r, c, i, step) in enumerate(branches):
        net.add_resistor(f"rx{k}", f"n{i}", f"n{(i + step) % 5}", r)
        net.add_capacitor(f"cx{k}", f"n{i}", f"n{(i + step) % 5}", c)
    net.add_current_source("ia", "0", "n0")
    net.add_current_source("ib", "n1", "n4")
    both = transfers(net, ["ia", "ib"], ["n0", ("n4", "n1")], [0.0, 0.1, 3.0])
    np.testing.assert_allclose(both[:, 0, 1], both[:, 1, 0], rtol=1e-9, atol=1e-14)
    poles = find_poles(net)
    assert (poles.real < 0).all()
    np.testing.assert_allclose(poles.imag, 0, atol=1e-6 * np.abs(poles).max(initial=1.0))


@settings(max_examples=30, deadline=None)
@given(st.lists(st.tuples(value, value, value), min_size=1, max_size=5), st.floats(1e-3, 10.0))
def test_a_batch_is_a_loop(items, frequency):
    r, c, gm = np.array(items).T

    def build(r, c, gm):
        net = Network()
        net.add_voltage_source("v", "in", "0")
        net.add_resistor("r", "in", "out", r)
        net.add_capacitor("c", "out", "0", c)
        net.add_vccs("gm", ("0", "out"), ("in", "0"), gm, pole=2.0)
        return transfer(net, "v", "out", frequency)

    np.testing.assert_array_equal(
        build(r, c, gm), [build(*item) for item in zip(r, c, gm, strict=True)]
    )
