"""Predictions against closed forms, symmetries and themselves in batches.

Closed forms: the half circuit of the current-mirror amplifier, nodes `mirror` and `turn`,
common practice; they are fed with the values of the true bias point.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gmid.amplifier import Level, Matching, TransistorPlan, Variant, predict
from gmid.amplifier.drafting import Draft, draft_plan
from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.amplifier.large import trace_curve
from gmid.amplifier.signal import COMMON, MEAN, differential_gain, measure_noise
from gmid.circuit import solve_bias
from gmid.device import Device
from gmid.errors import OutOfReach, UnknownName
from gmid.network import Transfer, break_loop, find_peak, measure_loop, transfer
from gmid.sweep.model import UnitTransistor


@pytest.fixture(scope="module")
def found():
    plan = replace(example_plan(), load_capacitance=4e-12)
    return predict(plan, example_devices(), example_supply(), voltage=1.8)


def read(found, place):
    """Values of one instance: gm, gds, gmb, id, noise at high frequency, capacitances."""
    point = found.bias.point(f"{place}_p")
    matrix = found.bias.capacitance(f"{place}_p")
    noise = next(s for s in found.network.noise_sources if s.owner == f"{place}_p")
    return {key: float(point[key]) for key in ("gm", "gds", "gmb", "id")} | {
        "white": float(noise.white), "cgg": float(matrix[0, 0]), "cdd": float(matrix[1, 1]),
        "cgd": -float(matrix[0, 1]), "cdg": -float(matrix[1, 0]),
    }  # fmt: skip


@pytest.fixture(scope="module")
def half(found):
    places = ("pair", "load", "direct", "copy", "turn", "opposite", "control")
    values = {place: read(found, place) for place in places}
    gl = values["load"]["gm"] + values["load"]["gds"] + values["pair"]["gds"]
    gt = values["turn"]["gm"] + values["turn"]["gds"] + values["copy"]["gds"]
    kd = values["direct"]["gm"] / gl
    ko = values["copy"]["gm"] / gl * values["opposite"]["gm"] / gt
    return values, kd, ko, gl, gt


def test_transconductance_and_gain(found, half):
    """gm_total = (Kd + Ko) gm_pair and A0 = gm_total/go, within 0.2 dB."""
    values, kd, ko, _, _ = half
    total = (kd + ko) * values["pair"]["gm"]
    assert float(found.signal.gm_total) == pytest.approx(total, rel=0.023)
    sense = 1 / found.plan.sense_resistance
    go = values["direct"]["gds"] + values["opposite"]["gds"] + values["control"]["gds"] + sense
    assert float(found.signal.output_conductance) == pytest.approx(go, rel=0.02)
    gain = total / (go + 1 / found.plan.load_resistance)
    assert float(found.signal.dc_gain_db) == pytest.approx(20 * np.log10(gain), abs=0.2)


def test_bandwidth(found, half):
    """The unity-gain frequency is gm_total/(2 pi C) less what the excess phase takes: 0.87 to
    1 of it above 60 degrees of margin."""
    assert float(found.signal.phase_margin) > 60
    own = sum(half[0][place]["cdd"] for place in ("direct", "opposite", "control"))
    own += found.plan.sense_capacitance
    assert float(found.signal.output_capacitance) == pytest.approx(own, rel=0.05)
    asymptote = float(found.signal.gm_total) / (2 * np.pi * (4e-12 + own))
    assert 0.85 < float(found.signal.gbw) / asymptote < 1.0


def test_excess_pole(found, half):
    """1/p_eff = 1/p1 + Ko/((Kd+Ko) p2), within 15 %: it is the delay, read at gbw."""
    values, kd, ko, gl, gt = half
    at_load = (values["pair"]["cdd"] + _diode(values["load"]) + values["copy"]["cgg"]
               + values["direct"]["cgg"])  # fmt: skip
    at_turn = values["copy"]["cdd"] + _diode(values["turn"]) + values["opposite"]["cgg"]
    delay = at_load / gl + ko / (kd + ko) * at_turn / gt
    assert float(found.signal.excess_pole) == pytest.approx(1 / (2 * np.pi * delay), rel=0.15)


def _diode(values):
    return values["cgg"] + values["cdd"] - values["cgd"] - values["cdg"]


def test_noise(found, half):
    """The sum of theory at a frequency without flicker noise and poles, within 2 %."""
    values, kd, ko, _, gt = half
    m = values["opposite"]["gm"] / gt
    white = {place: values[place]["white"] for place in values}
    sense = 1.380649e-23 * 4 * 300.15 / found.plan.sense_resistance
    load = 1.380649e-23 * 4 * 300.15 / found.plan.load_resistance
    power = (kd + ko) ** 2 * (white["pair"] + white["load"])
    power += m**2 * (white["copy"] + white["turn"]) + sense + load
    power += white["direct"] + white["opposite"] + white["control"]
    quiet = found.network.with_values({
        source.name: {"flicker": 0.0} for source in found.network.noise_sources
    })  # fmt: skip
    density = measure_noise(quiet, [1e3]).input_density[0]
    assert density == pytest.approx(np.sqrt(2 * power) / found.signal.gm_total, rel=0.02)


def test_control_takes_what_is_left(found):
    """I_control = I_direct - I_opposite, the load carrying almost nothing."""
    current = {name: float(found.instance_current(f"{name}_p"))
               for name in ("direct", "opposite", "control")}  # fmt: skip
    left = current["direct"] - current["opposite"]
    assert current["control"] == pytest.approx(left, rel=0.01)
    assert float(found.balance) == pytest.approx(current["control"] / current["direct"])


def test_slewing(found):
    """Each side slews with min(Kd Itail - Icontrol, Ko Itail + Icontrol)/C."""
    tail, control = (float(found.instance_current(name)) for name in ("tail", "control_p"))
    direct, opposite = (float(found.instance_current(name)) for name in ("direct_p", "opposite_p"))
    up, down = 2 * direct - control, 2 * opposite + control
    load = 4e-12 + float(found.signal.output_capacitance)
    assert tail == pytest.approx(2 * float(found.instance_current("pair_p")))
    assert float(found.slew_rate) == pytest.approx((up + down) / load, rel=0.1)


def test_everything_is_symmetric(found):
    for node, voltage in found.node_voltages.items():
        if node.endswith("_p"):
            assert float(voltage) == pytest.approx(float(found.node_voltages[f"{node[:-2]}_n"]))
    assert float(found.node_voltages["vop"]) == pytest.approx(float(found.node_voltages["von"]))


def test_noise_shares_are_equal_on_both_sides_and_sum_up(found):
    noise = found.noise([1e5])
    owners = noise.by_owner()
    assert float(owners["pair_p"][0]) == pytest.approx(float(owners["pair_n"][0]), rel=1e-6)
    assert float(sum(owners.values())[0]) == pytest.approx(float(noise.power[0]))
    assert float(owners["tail"][0]) < 1e-9 * float(noise.power[0])


def mirrored_devices():
    """The same two tables with their channels exchanged."""
    devices = example_devices()
    found = {}
    for name, source, polarity in (("nmos", "pmos", "n"), ("pmos", "nmos", "p")):
        sweep = devices[source].sweep
        unit = UnitTransistor(polarity, sweep.unit.width)
        found[name] = Device(replace(sweep, device=name, unit=unit))
    return found


@pytest.mark.parametrize("output", ["plain", "cascoded"])
@pytest.mark.parametrize("sense", ["resistors", "followers", "pairs"])
def test_a_p_input_is_the_mirror_image(output, sense):
    """With the tables exchanged, every voltage counts from the other rail; all else is equal."""
    lengths = dict.fromkeys(("pair", "mirror", "turn", "source", "other", "cascode"), 1e-6)
    names = {"n": "nmos", "p": "pmos"}
    wanted = Draft(names, Variant("n", output, sense), 8e-6, 2e-12,
                   length={**lengths, "follower": 0.5e-6})  # fmt: skip
    plan = draft_plan(wanted, example_devices(), example_supply())
    swapped = {
        place: replace(one, device={"nmos": "pmos", "pmos": "nmos"}[one.device])
        for place, one in plan.transistors.items()
    }
    mirror = replace(plan, transistors=swapped, input_pair="p")
    a = predict(plan, example_devices(), example_supply(), voltage=1.7)
    b = predict(mirror, mirrored_devices(), example_supply(), voltage=1.7)
    for node, voltage in a.node_voltages.items():
        if node not in ("vdd",):
            assert 1.7 - float(b.node_voltages[node]) == pytest.approx(float(voltage), abs=1e-6)
    for name in ("dc_gain", "gbw", "phase_margin", "output_capacitance", "input_capacitance"):
        assert float(getattr(a.signal, name)) == pytest.approx(
            float(getattr(b.signal, name)), rel=1e-5
        )
    assert float(a.common_mode.gbw) == pytest.approx(float(b.common_mode.gbw), rel=1e-5)
    np.testing.assert_allclose(a.noise().input_density, b.noise().input_density, rtol=1e-5)


def test_a_batch_is_each_of_its_items():
    """Candidates by supplies: every figure as from predictions one by one."""
    counts, lengths = np.array([[4], [6]]), np.array([[0.5e-6], [1e-6]])
    batch = example_plan().with_place("pair", count=counts, length=lengths)
    batch = batch.with_place("error_tail", count=np.array([[2], [3]]))
    many = predict(batch, example_devices(), example_supply())
    assert many.batch == (2, 3)
    figures = many.signal.gbw, many.common_mode.phase_margin, many.slew_rate, many.saturation
    for k in range(2):
        one = example_plan().with_place("pair", count=counts[k, 0], length=lengths[k, 0])
        one = one.with_place("error_tail", count=2 + k)
        for j, voltage in enumerate(example_supply().voltages):
            single = predict(one, example_devices(), example_supply(), voltage=voltage)
            alone = (single.signal.gbw, single.common_mode.phase_margin, single.slew_rate,
                     single.saturation)  # fmt: skip
            for whole, part in zip(figures, alone, strict=True):
                assert float(whole[k, j]) == pytest.approx(float(part), rel=1e-6)
    swing = many.output_swing(0.0)
    assert swing.by_gain.shape == (2, 3)
    assert many.gate_area.shape == (2, 1)


def test_a_multiple_scales_currents_and_keeps_voltages():
    one = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    plan = replace(example_plan(), multiple=4, load_resistance=1e6 / 4)
    four = predict(plan, example_devices(), example_supply(), voltage=1.8)
    for node, voltage in one.node_voltages.items():
        assert float(four.node_voltages[node]) == pytest.approx(float(voltage), abs=1e-6)
    assert float(four.supply_current) == pytest.approx(4 * float(one.supply_current), rel=1e-6)
    assert float(four.signal.gm_total) == pytest.approx(4 * float(one.signal.gm_total), rel=1e-6)
    ratio = float(four.signal.output_conductance / one.signal.output_conductance)
    assert ratio == pytest.approx(4.0, rel=1e-6)


def test_the_supply_current_is_all_that_flows():
    found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    names = ("direct_p", "direct_n", "copy_p", "copy_n", "load_p", "load_n", "error_tail",
             "bias_load")  # fmt: skip
    total = sum(float(found.instance_current(name)) for name in names) + 2e-6
    assert float(found.supply_current) == pytest.approx(total, rel=1e-5)
    assert float(found.power) == pytest.approx(1.8 * total, rel=1e-5)


def test_gate_area_counts_units_and_stacks():
    plan = example_plan().with_place("tail", stack=2)
    found = predict(plan, example_devices(), example_supply(), voltage=1.8)
    sides = {"tail": 1, "error_tail": 1, "bias_reference": 1, "bias_mirror": 1, "bias_load": 1}
    area = sum(
        2e-6 * one.length * one.count * one.stack * sides.get(place, 2)
        for place, one in plan.transistors.items()
    )
    assert float(found.gate_area) == pytest.approx(area)


def test_reference_current_may_be_another():
    low, high = predict(
        example_plan(), example_devices(), example_supply(), voltage=1.8,
        reference_current=np.array([1.8e-6, 2.2e-6]),
    ).supply_current  # fmt: skip
    assert high / low == pytest.approx(2.2 / 1.8, rel=0.02)


def test_a_device_that_is_not_there():
    plan = example_plan().with_place("pair", device="nmos_low")
    with pytest.raises(UnknownName, match="nmos_low"):
        predict(plan, example_devices(), example_supply())


def test_a_length_outside_the_table():
    with pytest.raises(OutOfReach, match="50 nm"):
        predict(example_plan().with_place("load", length=50e-9), example_devices(),
                example_supply())  # fmt: skip


def test_an_instance_that_is_not_there(found):
    with pytest.raises(UnknownName, match="pair_p"):
        found.instance_current("pair")


def test_offset_against_its_closed_form(found, half):
    """sigma^2 by place: the two devices of a place, their currents referred to the input."""
    values, kd, ko, _, gt = half
    rules = {"nmos": Matching(4e-9, 1e-8), "pmos": Matching(5e-9, 2e-8)}
    offset = found.offset(rules)
    total = (kd + ko) * values["pair"]["gm"]
    m = values["opposite"]["gm"] / gt
    gains = {"pair": kd + ko, "load": kd + ko, "direct": 1, "opposite": 1, "control": 1,
             "copy": m, "turn": m}  # fmt: skip
    for place, gain in gains.items():
        one = found.plan.transistors[place]
        rule = rules[one.device]
        area = 2e-6 * one.count * one.length
        sigma = np.hypot(values[place]["gm"] * rule.avt, values[place]["id"] * rule.abeta)
        expected = (gain * sigma / np.sqrt(area) / total) ** 2
        assert float(offset.variance[place]) == pytest.approx(expected, rel=0.06), place
    assert float(offset.variance["tail"]) < 1e-6 * float(offset.variance["pair"])


def test_offset_against_a_sampled_run(found):
    """2000 amplifiers with counts moved at random: a count is a current factor. Their spread is
    known to 1.6 % (one sigma), so 5 % holds."""
    rules = {"nmos": Matching(0.0, 2e-8), "pmos": Matching(0.0, 2e-8)}
    random = np.random.default_rng(7)
    values = {}
    for one in found.circuit.transistors:
        area = 2e-6 * float(one.count * one.length)
        spread = 2e-8 / np.sqrt(2 * area)
        values[one.name] = {"count": one.count * (1 + spread * random.standard_normal(2000))}
    bias = solve_bias(found.circuit.with_values(values), found.devices, start=found.bias).require()
    output = bias.voltage("vop") - bias.voltage("von")
    sampled = np.std(output) / float(found.signal.dc_gain)
    assert float(found.offset(rules).sigma) == pytest.approx(sampled, rel=0.05)


def test_rejection_against_a_sampled_run(found):
    """1000 amplifiers with counts moved at random; 10 % is four sigma of such a spread."""
    rules = {"nmos": Matching(0.0, 1e-8), "pmos": Matching(0.0, 1e-8)}
    random = np.random.default_rng(11)
    values = {}
    for one in found.circuit.transistors:
        spread = 1e-8 / np.sqrt(2 * 2e-6 * float(one.count * one.length))
        values[one.name] = {"count": one.count * (1 + spread * random.standard_normal(1000))}
    bias = solve_bias(found.circuit.with_values(values), found.devices, start=found.bias).require()
    network = bias.linearise(noise=False)
    rejection = found.rejection(rules)
    for source, predicted in (("vdd", rejection.supply), (COMMON, rejection.common_mode)):
        sampled = np.std(transfer(network, source, ("vop", "von"), 0.0).real)
        assert float(predicted) == pytest.approx(sampled, rel=0.1)
    assert float(rejection.dc_gain) == pytest.approx(float(found.signal.dc_gain))


def test_halves_are_the_whole(found):
    """Measured on the whole network with all of its sources."""
    whole = measure_loop(differential_gain(found.network), band=(1.0, 1e12))
    assert float(found.signal.gbw) == pytest.approx(float(whole.gbw), rel=1e-6)
    assert float(found.signal.phase_margin) == pytest.approx(float(whole.phase_margin), abs=1e-4)
    loop = measure_loop(break_loop(found.network, "vprobe"), band=(1.0, 1e12))
    assert float(found.common_mode.gbw) == pytest.approx(float(loop.gbw), rel=1e-6)
    peak = find_peak(Transfer(found.network, COMMON, MEAN), band=(1.0, 1e10))[1]
    assert float(found.common_mode.input_to_output_peak) == pytest.approx(float(peak), rel=1e-3)
    noise = measure_noise(found.network, [1e4, 1e6]).input_density
    np.testing.assert_allclose(found.noise([1e4, 1e6]).input_density, noise, rtol=1e-6)


def test_harmonics_of_a_curve(found):
    """Third harmonic from a dense static transfer and a Fourier transform."""
    end = 0.6 / float(found.signal.dc_gain)
    curve = trace_curve(found, np.linspace(0, end, 161))
    peak = np.interp(0.4, curve.output, curve.input)
    angle = 2 * np.pi * np.arange(400) / 400
    drive = peak * np.sin(angle)
    wave = np.sign(drive) * np.interp(np.abs(drive), curve.input, curve.output)
    lines = np.abs(np.fft.rfft(wave))
    assert float(found.third_harmonic(0.4)) == pytest.approx(lines[3] / lines[1], rel=0.03)


def test_swing_ends_where_the_gain_has_fallen(found):
    swing = found.output_swing(0.0)
    end = 3.0 / float(found.signal.dc_gain)
    curve = trace_curve(found, np.linspace(0, end, 301))
    k = int(np.argmax(curve.gain < curve.gain[0] * np.sqrt(0.5)))
    assert float(swing.by_gain) == pytest.approx(float(curve.output[k]), rel=0.02)
    j = int(np.argmax(curve.saturation < 0))
    assert float(swing.by_saturation) == pytest.approx(float(curve.output[j]), rel=0.02)
    assert float(swing.peak) == min(float(swing.by_gain), float(swing.by_saturation))


def test_the_input_range_ends_where_a_device_leaves_saturation(found):
    span = found.input_range(0.02)
    for end in (float(span.low), float(span.high)):
        if not 0.01 < end < 1.79:
            continue
        supply = replace(found.supply, input_common_mode=Level(0.0, end))
        there = predict(found.plan, found.devices, supply, voltage=1.8)
        edge = float(there.node_voltages["tail"]) > 0.99  # the table's last body bias
        assert edge or float(there.saturation) == pytest.approx(0.02, abs=0.01)
    assert float(span.low) < 0.9 < float(span.high)


def test_a_plan_prints_what_matters(found):
    assert repr(found) == "Prediction(a1 in tt/27, supply 1.8 V, batch ())"
    assert repr(TransistorPlan("nmos", 1e-6, 2)).startswith("TransistorPlan(device='nmos'")
