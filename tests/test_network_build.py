"""Building a network: stamps, batches, half circuits, and what goes wrong."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import NoSolution, UnknownName, UsageFault
from gmid.network import Network, Pencil, find_poles, solve_pencil, transfer, transfers

F = np.geomspace(1e2, 1e9, 15)


def divider(resistance=1e3) -> Network:
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_resistor("r1", "in", "out", resistance)
    net.add_capacitor("c1", "out", "0", 1e-9)
    return net


def test_stamps_are_those_of_nodal_analysis():
    net = Network()
    net.add_conductor("g1", "a", "b", 2.0)
    net.add_capacitor("c1", "b", "0", 3.0)
    net.add_vccs("gm", ("b", "0"), ("a", "0"), 5.0)
    net.add_crossed("x", "a", "b", conductance=7.0, capacitance=11.0)
    pencil = net.assemble()
    assert pencil.unknowns == ("a", "b")
    np.testing.assert_array_equal(pencil.conductance, [[9.0, 5.0], [10.0, 9.0]])
    np.testing.assert_array_equal(pencil.capacitance, [[11.0, 11.0], [11.0, 14.0]])


def test_block_with_terminals_at_ground_and_at_one_node():
    matrix = np.arange(16.0).reshape(4, 4)
    net = Network()
    net.add_block("m1", ("a", "b", "0", "a"), conductance=matrix, capacitance=-matrix)
    pencil = net.assemble()
    expected = [[0 + 3 + 12 + 15, 1 + 13], [4 + 7, 5]]
    np.testing.assert_array_equal(pencil.conductance, expected)
    np.testing.assert_array_equal(pencil.capacitance, -np.array(expected))


def test_excess_pole_is_the_factor_it_says():
    pole = np.array([1e6, 1e8, np.inf])
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_vccs("gm", ("0", "out"), ("in", "0"), 1e-3, pole=pole)
    net.add_resistor("r", "out", "0", 1e3)
    found = transfer(net, "vin", "out", F)
    expected = 1 / (1 + 2j * np.pi * F / pole[:, None])
    np.testing.assert_allclose(found, expected, rtol=1e-13)


def test_amplifier_is_ideal_or_an_integrator_with_finite_gain():
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_resistor("r1", "in", "x", 1e3)
    net.add_resistor("r2", "x", "out", 2e3)
    net.add_amplifier("a", ("out", "0"), ("0", "x"))
    np.testing.assert_allclose(transfer(net, "vin", "out", F), -2.0, rtol=1e-13)
    real = net.with_values({"a": {"gain": 100.0, "bandwidth": 1e7}})
    a = 1 / (1 / 100.0 + 2j * np.pi * F / 1e7)
    np.testing.assert_allclose(transfer(real, "vin", "out", F), -2 / (1 + 3 / a), rtol=1e-12)


def test_vcvs_and_source_currents():
    net = Network()
    net.add_voltage_source("vin", "in", "0")
    net.add_resistor("rin", "in", "0", 50.0)
    net.add_vcvs("e", ("out", "0"), ("0", "in"), 4.0)
    net.add_resistor("rout", "out", "0", 100.0)
    found = transfers(net, ["vin"], ["out", "i(vin)", "i(e)"], 0.0)[:, 0]
    np.testing.assert_allclose(found, [-4.0, -1 / 50, 4 / 100], rtol=1e-14)


def test_current_source_leaves_plus_and_enters_minus():
    net = Network()
    net.add_current_source("i", "a", "b")
    net.add_resistor("ra", "a", "0", 2.0)
    net.add_resistor("rb", "b", "0", 3.0)
    np.testing.assert_allclose(transfers(net, ["i"], ["a", "b"], 1.0)[:, 0], [-2, 3])


def test_batch_equals_a_loop_over_its_items():
    r, c = np.array([1e3, 2e3, 5e3]), np.array([[1e-9], [2e-9]])
    net = divider(r).with_values({"c1": c})
    found = transfer(net, "vin", "out", F)
    assert net.batch == (2, 3)
    assert found.shape == (2, 3, F.size)
    for i in range(2):
        for j in range(3):
            one = divider(r[j]).with_values({"c1": c[i, 0]})
            np.testing.assert_array_equal(found[i, j], transfer(one, "vin", "out", F))


def test_frequencies_may_differ_between_batch_items():
    net = divider([1e3, 1e4])
    f = np.array([[1e5], [1e4]])
    found = transfer(net, "vin", "out", f)
    expected = 1 / (1 + 2j * np.pi * f * np.array([[1e3], [1e4]]) * 1e-9)
    np.testing.assert_allclose(found, expected, rtol=1e-13)


def test_an_item_that_is_no_number_leaves_the_others_alone():
    net = divider([1e3, np.nan, 1e4])
    found = transfer(net, "vin", "out", F)
    assert np.isnan(found[1]).all()
    np.testing.assert_array_equal(found[0], transfer(divider(1e3), "vin", "out", F))
    assert np.isnan(find_poles(net)[1]).all()
    np.testing.assert_allclose(find_poles(net)[[0, 2], 0], [-1e6, -1e5])


def test_chunks_do_not_show():
    rng = np.random.default_rng(3)
    r = rng.uniform(1e3, 2e3, 40)
    net = Network()
    net.add_voltage_source("vin", "n0", "0")
    for k in range(30):
        net.add_resistor(f"r{k}", f"n{k}", f"n{k + 1}", r)
        net.add_capacitor(f"c{k}", f"n{k + 1}", "0", 1e-12)
    f = np.geomspace(1e3, 1e7, 31)
    found = transfer(net, "vin", "n30", f)
    one = net.with_values({f"r{k}": r[17] for k in range(30)})
    np.testing.assert_allclose(found[17], transfer(one, "vin", "n30", f), rtol=1e-12)


def test_crossed_wires_equal_the_full_differential_network():
    rng = np.random.default_rng(11)
    elements = []
    for k in range(8):
        a, b = (f"n{j}" for j in rng.choice(4, 2, replace=False))
        elements.append((f"y{k}", a, b, rng.uniform(1e-5, 1e-4), rng.uniform(1e-13, 1e-12), k % 2))
    block = rng.normal(size=(4, 4)) * 1e-5
    half, full = Network(), Network()
    half.add_voltage_source("v", "n0", "0")
    full.add_voltage_source("vp", "n0p", "0")
    full.add_voltage_source("vn", "n0n", "0")
    for name, a, b, g, c, crossed in elements:
        if crossed:
            half.add_crossed(name, a, b, conductance=g, capacitance=c)
        else:
            half.add_conductor(name, a, b, g)
            half.add_capacitor(f"c{name}", a, b, c)
        for side, other in ("pn", "np"):
            end = b + (other if crossed else side)
            full.add_conductor(name + side, a + side, end, g)
            full.add_capacitor(f"c{name}{side}", a + side, end, c)
    # a transistor whose second terminal lies on the other side
    half.add_block("m", ("n1", "n2", "n3", "0"), conductance=block, signs=(1, -1, 1, 1))
    for side, other in ("pn", "np"):
        nodes = (f"n1{side}", f"n2{other}", f"n3{side}", "0")
        full.add_block(f"m{side}", nodes, conductance=block)
    for node in ("n1", "n2", "n3"):
        half.add_conductor(f"g{node}", node, "0", 1e-6)
        for side in "pn":
            full.add_conductor(f"g{node}{side}", node + side, "0", 1e-6)
    for node in ("n1", "n2", "n3"):
        one = transfer(half, "v", node, F)
        two = transfer(full, {"vp": 0.5, "vn": -0.5}, (f"{node}p", f"{node}n"), F)
        np.testing.assert_allclose(one, two, rtol=1e-12)


def test_values_can_be_replaced_and_the_old_network_stays():
    net = divider()
    before = transfer(net, "vin", "out", F)
    other = net.with_values({"r1": {"resistance": 2e3}, "c1": 0.5e-9})
    np.testing.assert_allclose(transfer(other, "vin", "out", F), before, rtol=1e-14)
    np.testing.assert_array_equal(transfer(net, "vin", "out", F), before)


@pytest.mark.parametrize(
    ("act", "error", "words"),
    [
        (lambda n: transfer(n, "vin", "outt", F), UnknownName, "no node outt. Did you mean out?"),
        (lambda n: transfer(n, "vim", "out", F), UnknownName, "no element vim. Did you mean vin?"),
        (lambda n: transfer(n, "r1", "out", F), UsageFault, "r1 is a resistor, not an independent"),
        (lambda n: n.add_resistor("r1", "a", "b", 1.0), UsageFault, "already has an element named"),
        (lambda n: n.add_resistor("r9", "a", "b", 0.0), UsageFault, "resistance of resistor r9"),
        (lambda n: n.add_amplifier("a", ("a", "0"), ("b", "0"), gain=0), UsageFault, "is zero"),
        (lambda n: n.add_block("m", ("a", "b")), UsageFault, "neither"),
        (
            lambda n: n.add_block("m", ("a", "b"), conductance=np.eye(3)),
            UsageFault, r"needs shape \(..., 2, 2\), found \(3, 3\)",
        ),
        (lambda n: n.add_block("m", "ab", conductance=np.eye(2), signs=(1,)), UsageFault, "signs"),
        (lambda n: n.with_values({"c11": 1.0}), UnknownName, "Did you mean c1"),
        (lambda n: n.with_values({"c1": {"resistance": 1.0}}), UsageFault, "no value resistance"),
        (lambda n: n.add_resistor("r", "a", "0", 1.0, temperature=-300), UsageFault, "zero"),
        (lambda n: transfer(divider(np.ones(3)), "vin", "out", np.ones((2, 4))), UsageFault, "bro"),
        (lambda n: Network().assemble(), UsageFault, "no node besides ground"),
        (lambda n: Pencil(np.eye(2), np.eye(2), ("a",)), UsageFault, "a pencil of 1 unknown"),
    ],
)  # fmt: skip
def test_faults_say_what_is_there(act, error, words):
    with pytest.raises(error, match=words):
        act(divider())


def test_batches_that_do_not_fit_name_the_element():
    net = divider(np.ones(3))
    net.add_resistor("r2", "out", "0", np.ones(2))
    with pytest.raises(UsageFault, match=r"values of r2 have leading axes \(2,\)"):
        net.assemble()


def test_declared_nodes_are_the_only_ones():
    net = Network(["in", "out"])
    with pytest.raises(UnknownName, match=r"r1 names node outt.*Did you mean out\?"):
        net.add_resistor("r1", "in", "outt", 1e3)


@pytest.mark.parametrize("f", [0.0, 1e3, [1e3, 1e6]])
def test_a_floating_pair_of_nodes_is_named(f):
    net = divider()
    net.add_resistor("r2", "lost", "found", 3.3e3)
    with pytest.raises(NoSolution, match=r"(lost, found|found, lost)"):
        transfer(net, "vin", "out", f)


def test_a_node_held_by_capacitors_alone_is_named_at_dc_only():
    net = divider()
    net.add_capacitor("c2", "out", "mid", 1e-12)
    net.add_capacitor("c3", "mid", "0", 1e-12)
    with pytest.raises(NoSolution, match="does not determine mid at 0 Hz"):
        transfer(net, "vin", "out", [0.0, 1e3])
    np.testing.assert_allclose(
        transfer(net, "vin", "mid", F), transfer(net, "vin", "out", F) / 2, rtol=1e-12
    )


def test_two_sources_in_a_loop_are_named():
    net = divider()
    net.add_voltage_source("vtwo", "in", "0")
    with pytest.raises(NoSolution, match=r"i\(v"):
        transfer(net, "vin", "out", 1.0)


def test_one_singular_item_of_a_batch_is_found():
    net = Network()
    net.add_current_source("i", "0", "a")
    net.add_conductor("g", "a", "0", [1.0, 0.0, 2.0])
    with pytest.raises(NoSolution, match="does not determine a at 5 Hz"):
        transfer(net, "i", "a", 5.0)


def test_stiff_values_are_no_reason_to_refuse():
    net = Network()
    net.add_current_source("i", "0", "a")
    net.add_resistor("r1", "a", "b", 1.0)
    net.add_resistor("r2", "b", "0", 1e12)
    assert transfer(net, "i", "a", 0.0).real == pytest.approx(1e12, rel=1e-3)


def test_solution_and_its_adjoint_agree():
    rng = np.random.default_rng(5)
    pencil = Pencil(rng.normal(size=(4, 6, 6)), rng.normal(size=(4, 6, 6)), tuple("abcdef"))
    b, w = rng.normal(size=(2, 6))
    s = np.array([0.1j, 1 + 2j])
    direct = solve_pencil(pencil, s, b[:, None])[..., 0] @ w
    adjoint = solve_pencil(pencil, s, w[:, None], transpose=True)[..., 0] @ b
    np.testing.assert_allclose(direct, adjoint, rtol=1e-11)


def test_repr_tells_what_is_inside():
    assert repr(divider()) == "Network(2 nodes, 1 voltage_source, 1 resistor, 1 capacitor)"
