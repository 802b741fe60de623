"""Bias points: currents balance, symmetries hold, failures are told."""

from __future__ import annotations

import numpy as np
import pytest

from circuit_devices import forward_current, make_device
from gmid.circuit import Circuit, evaluate, solve_bias
from gmid.errors import NoSolution, OutOfReach, UnknownName, UsageFault

NMOS = make_device()
PMOS = make_device("pmos", "p", vt0=0.45, spec=0.2e-6)
DEVICES = {"nmos": NMOS, "pmos": PMOS}


def stage(*, count=1.0, supply=1.8, stack=1):
    """A pair with mirror load; its tail from a diode that a current feeds."""
    c = Circuit()
    c.add_voltage_source("vdd", "vdd", "0", supply)
    c.add_voltage_source("vip", "vip", "0", np.multiply(supply, 0.55))
    c.add_voltage_source("vin", "vin", "vip", 0.0)
    c.add_current_source("iref", "vdd", "bn", 1e-6)

    def add(name, device, drain, gate, source, units, **more):
        bulk = "0" if device == "nmos" else "vdd"
        units = np.multiply(units, count)
        c.add_transistor(name, device, polarity=device[0], drain=drain, gate=gate, source=source,
                         bulk=bulk, length=1e-6, count=units, **more)  # fmt: skip

    add("mb", "nmos", "bn", "bn", "0", 2, stack=stack)
    add("mt", "nmos", "tail", "bn", "0", 4, stack=stack)
    add("m1", "nmos", "x", "vip", "tail", 6)
    add("m2", "nmos", "out", "vin", "tail", 6)
    add("m3", "pmos", "x", "x", "vdd", 3)
    add("m4", "pmos", "out", "x", "vdd", 3)
    c.add_resistor("rl", "out", "0", 20e6)
    return c


def test_currents_balance_by_forward_queries_of_the_tables():
    bias = solve_bias(stage(), DEVICES).require()
    current = {
        t.name: forward_current(DEVICES[t.device], bias, t.name) for t in bias.circuit.transistors
    }
    load = float(bias.voltage("out")) / 20e6
    assert current["mb"] == pytest.approx(1e-6, rel=1e-7)
    assert current["m1"] + current["m2"] == pytest.approx(current["mt"], rel=1e-7)
    assert current["m3"] == pytest.approx(current["m1"], rel=1e-7)
    assert current["m4"] == pytest.approx(current["m2"] + load, rel=1e-7)
    total = current["m3"] + current["m4"] + 1e-6
    assert float(bias.source_current("vdd")) == pytest.approx(-total, rel=1e-7)
    assert float(bias.source_current("vin")) == pytest.approx(0.0, abs=1e-15)
    for name, value in current.items():
        assert float(bias.id(name)) == pytest.approx(value, rel=1e-9)


def test_counts_scale_exactly():
    one = solve_bias(stage(), DEVICES).require()
    four = solve_bias(stage().scaled([1, 4, 32]), DEVICES).require()
    for node, voltage in one.voltages.items():
        np.testing.assert_allclose(four.voltage(node), voltage, atol=1e-9)
    np.testing.assert_allclose(four.id("mt"), one.id("mt") * np.array([1, 4, 32]), rtol=1e-7)
    np.testing.assert_allclose(four.gm("m1"), one.gm("m1") * np.array([1, 4, 32]), rtol=1e-7)


def test_a_batch_is_solved_as_its_items_are():
    counts, supplies = np.array([[0.5], [1.0], [2.0]]), np.array([1.62, 1.8, 1.98])
    bias = solve_bias(stage(count=counts, supply=supplies), DEVICES).require()
    assert bias.converged.shape == (3, 3)
    for i in range(3):
        for j in range(3):
            alone = solve_bias(bias.circuit.item(i, j), DEVICES).require()
            for node, voltage in alone.voltages.items():
                assert bias.voltage(node)[i, j] == pytest.approx(float(voltage), abs=1e-8)


def test_p_channel_is_the_mirror_image_of_n_channel():
    twin = make_device("pmos", "p")

    def divider(polarity):
        low, high = ("0", "vdd") if polarity == "n" else ("vdd", "0")
        c = Circuit()
        c.add_voltage_source("vdd", "vdd", "0", 1.8)
        c.add_resistor("r1", high, "g", 400e3)
        c.add_transistor("m1", f"{polarity}mos", polarity=polarity, drain="g", gate="g",
                         source=low, bulk=low, length=1e-6, count=2)  # fmt: skip
        c.add_transistor("m2", f"{polarity}mos", polarity=polarity, drain=high, gate="g",
                         source="s", bulk=low, length=1e-6, count=3)  # fmt: skip
        c.add_resistor("r2", "s", low, 1e6)
        return c

    n = solve_bias(divider("n"), {"nmos": NMOS}).require()
    p = solve_bias(divider("p"), {"pmos": twin}).require()
    for node in ("g", "s"):
        assert float(p.voltage(node)) == pytest.approx(1.8 - float(n.voltage(node)), abs=1e-9)
    for read in ("id", "vgs", "vds", "vsb", "gm", "gds", "gmb"):
        assert getattr(p, read)("m2") == pytest.approx(getattr(n, read)("m2"), rel=1e-7)
    assert float(p.source_current("vdd")) == pytest.approx(float(n.source_current("vdd")), rel=1e-9)


def test_a_stack_is_what_its_units_are():
    bias = solve_bias(stage(stack=3), DEVICES).require()
    c = stage(stack=3).without(["mt"])
    chain = ["tail", "a", "b", "0"]
    for k in range(3):
        c.add_transistor(f"mu{k}", "nmos", polarity="n", drain=chain[k], gate="bn",
                         source=chain[k + 1], bulk="0", length=1e-6, count=4)  # fmt: skip
    units = solve_bias(c, DEVICES).require()
    assert float(units.voltage("a")) == pytest.approx(float(bias.voltage("mt_1")), abs=1e-9)
    assert float(units.voltage("out")) == pytest.approx(float(bias.voltage("out")), abs=1e-9)
    assert float(bias.id("mt")) == pytest.approx(float(units.id("mu1")), rel=1e-7)
    assert float(bias.vds("mt")) == pytest.approx(float(bias.voltage("tail")), abs=1e-12)
    assert float(bias.vgs("mt")) == pytest.approx(float(bias.voltage("bn")), abs=1e-12)


def test_conductances_of_a_stack_are_those_of_its_current():
    def forced(gate, drain):
        c = Circuit()
        c.add_voltage_source("vg", "g", "0", gate)
        c.add_voltage_source("vd", "d", "0", drain)
        c.add_transistor("m1", "nmos", polarity="n", drain="d", gate="g", source="0", bulk="0",
                         length=1e-6, count=2, stack=3)  # fmt: skip
        return solve_bias(c, DEVICES).require()

    middle, step = forced(0.6, 0.7), 1e-3
    gate = forced([0.6 - step, 0.6 + step], 0.7).id("m1")
    drain = forced(0.6, [0.7 - step, 0.7 + step]).id("m1")
    assert float(middle.gm("m1")) == pytest.approx((gate[1] - gate[0]) / (2 * step), rel=2e-3)
    assert float(middle.gds("m1")) == pytest.approx((drain[1] - drain[0]) / (2 * step), rel=2e-2)


def test_a_start_saves_steps_and_changes_nothing():
    first = solve_bias(stage(), DEVICES).require()
    again = solve_bias(stage(), DEVICES, start=first)
    assert int(again.steps) == 1
    near = solve_bias(stage(supply=[1.75, 1.85]), DEVICES, start=first.voltages).require()
    cold = solve_bias(stage(supply=[1.75, 1.85]), DEVICES).require()
    assert near.steps.max() < cold.steps.max()
    np.testing.assert_allclose(near.voltage("x"), cold.voltage("x"), atol=1e-9)


def test_floating_sources_and_their_currents():
    c = Circuit()
    c.add_voltage_source("v1", "a", "0", 2.0)
    c.add_voltage_source("v2", "b", "c", 0.5)
    c.add_voltage_source("v3", "d", "c", 0.25)
    c.add_resistor("r1", "a", "b", 1e3)
    c.add_resistor("r2", "c", "0", 1e3)
    c.add_resistor("r3", "d", "0", 1e3)
    bias = solve_bias(c, {}).require()
    # (2 - (x + 0.5)) = x + (x + 0.25) with x = v(c)
    x = 1.25 / 3
    assert float(bias.voltage("c")) == pytest.approx(x, abs=1e-12)
    assert float(bias.voltage("b", "d")) == pytest.approx(0.25, abs=1e-12)
    assert float(bias.source_current("v1")) == pytest.approx(-(1.5 - x) / 1e3, rel=1e-9)
    assert float(bias.source_current("v2")) == pytest.approx((1.5 - x) / 1e3, rel=1e-9)
    assert float(bias.source_current("v3")) == pytest.approx(-(x + 0.25) / 1e3, rel=1e-9)


@pytest.mark.parametrize(
    ("change", "fault", "words"),
    [
        (lambda c: c.add_voltage_source("v9", "vdd", "vip", 1.0), UsageFault, "closes a loop"),
        (lambda c: c.add_capacitor("c9", "loose", "out", 1.0), NoSolution, "voltage of loose"),
        (lambda c: c.add_transistor("m9", "nmox", polarity="n", drain="x", gate="x", source="0",
                                    bulk="0", length=1e-6, count=1), UnknownName, "m9.*nmos"),
        (lambda c: c.add_transistor("m9", "nmos", polarity="p", drain="x", gate="x", source="0",
                                    bulk="0", length=1e-6, count=1), UsageFault, "m9 is p-channel"),
        (lambda c: c.add_transistor("m9", "nmos", polarity="n", drain="x", gate="x", source="0",
                                    bulk="0", length=9e-6, count=1), OutOfReach, "length = 9 um"),
    ],
)  # fmt: skip
def test_circuits_that_cannot_be_solved(change, fault, words):
    c = stage()
    change(c)
    with pytest.raises(fault, match=words):
        solve_bias(c, DEVICES)


def test_devices_of_two_conditions_are_refused():
    with pytest.raises(UsageFault, match="different conditions: nmos ss/27, pmos tt/27"):
        solve_bias(stage(), {"nmos": make_device(corner="ss"), "pmos": PMOS})


def test_a_solution_outside_the_table_names_instance_axis_and_condition():
    bias = solve_bias(stage(supply=[1.8, 4.5]), DEVICES)
    assert bias.converged.all()
    assert bias.inside.tolist() == [True, False]
    with pytest.raises(OutOfReach, match=r"tt/27, vdd = 4.5 V.*item \(1,\): m\d: v\w+ = .* covers"):
        bias.require()


def test_what_has_no_solution_is_masked_in_a_batch_and_named_alone():
    def forced(current):
        c = Circuit()
        c.add_voltage_source("vg", "g", "0", 0.6)
        c.add_current_source("i1", "0", "d", current)
        c.add_transistor("m1", "nmos", polarity="n", drain="d", gate="g", source="0", bulk="0",
                         length=1e-6, count=1)  # fmt: skip
        return solve_bias(c, DEVICES)

    batch = forced([1e-6, 1e3, 2e-6])
    assert batch.converged.tolist() == [True, False, True]
    assert np.isnan(batch.voltage("d")).tolist() == [False, True, False]
    with pytest.raises(NoSolution, match=r"tt/27, vg = 600 mV, item \(1,\): .*node d .*of m1"):
        batch.require()


def test_currents_at_any_voltages():
    bias = solve_bias(stage(), DEVICES).require()
    flow = evaluate(bias.circuit, DEVICES, bias.voltages)
    assert float(flow.leaving["x"]) == pytest.approx(0.0, abs=1e-14)
    moved = evaluate(bias.circuit, DEVICES, bias.voltages | {"vip": [0.4, 0.99, 1.4]})
    assert moved.leaving["x"][0] < 0 < moved.leaving["x"][2]
    assert moved.inside.all()
    with pytest.raises(UsageFault, match="no voltage for vdd"):
        evaluate(bias.circuit, DEVICES, {"vip": 1.0})
    with pytest.raises(UnknownName, match="no node vop"):
        evaluate(bias.circuit, DEVICES, {"vop": 1.0})


def test_a_point_tells_all_of_an_instance():
    point = solve_bias(stage(stack=2), DEVICES).require().point("mt")
    assert (point["role"], point["device"], point["stack"]) == ("mt", "nmos", 2)
    assert point["width"] == pytest.approx(8e-6)
    assert float(point["gm_over_id"]) == pytest.approx(float(point["gm"] / point["id"]))
    assert "vdsat" not in point
