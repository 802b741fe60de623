"""Realisations: nodal analysis of the listed elements against the wanted response."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import signal

from gmid.errors import DataFault, UnknownName, UsageFault
from gmid.filters import (
    AmplifierModel,
    Element,
    FilterSpec,
    Passives,
    Realisation,
    Section,
    absorb_parasitics,
    cascade_response,
    find_response,
    measure_levels,
    realise,
    round_elements,
)
from gmid.filters.gm_c import find_cubic_divisor, find_pair_swing
from gmid.network import Network, compute_noise, find_poles, transfer

FOUR_DECADES = np.geomspace(1e4, 1e8, 241)
REAL = AmplifierModel(
    gm_total=2e-3, output_conductance=4e-6, output_capacitance=0.3e-12, input_capacitance=0.1e-12,
    excess_pole=600e6, noise_factor=3.0, noise_corner=5e4,
)  # fmt: skip


def wanted(response: str, kind: str, order: int) -> tuple[FilterSpec, tuple]:
    """Return a specification and the zeros, poles and gain that scipy.signal finds for it."""
    edge = (0.8e6, 1.3e6) if kind == "bandpass" else 1e6
    angular = 2 * np.pi * np.asarray(edge)
    options = {"btype": kind, "analog": True, "output": "zpk"}
    given: dict = {"response": response, "kind": kind, "order": order, "edge": edge}
    if response == "butterworth":
        return FilterSpec(**given), signal.butter(order, angular, **options)
    if response == "bessel":
        return FilterSpec(**given), signal.bessel(order, angular, norm="mag", **options)
    given["ripple_db"] = 0.5
    if response == "chebyshev":
        return FilterSpec(**given), signal.cheby1(order, 0.5, angular, **options)
    given["attenuation_db"] = 40.0
    if response == "elliptic":
        return FilterSpec(**given), signal.ellip(order, 0.5, 40.0, angular, **options)
    # scipy takes the stop edge of an inverse Chebyshev filter, where it finds its own order
    ratio = np.cosh(np.arccosh(np.sqrt((1e4 - 1) / (10**0.05 - 1))) / order)
    if kind == "bandpass":
        width, centre = np.ptp(angular) * ratio, np.prod(angular)
        stop = np.sqrt(centre + width**2 / 4) + np.array([-0.5, 0.5]) * width
    else:
        stop = angular * ratio if kind == "lowpass" else angular / ratio
    given["stop_edge"] = {"lowpass": 1e12, "highpass": 1.0, "bandpass": (1.0, 1e12)}[kind]
    return FilterSpec(**given), signal.cheby2(order, 40.0, stop, **options)


def assert_equal_to_scipy(spec: FilterSpec, zpk: tuple) -> None:
    made = realise(spec, capacitor=2e-12)
    found = transfer(made.network(), "vin", made.output, FOUR_DECADES)
    _, ideal = signal.freqs_zpk(*zpk, worN=2 * np.pi * FOUR_DECADES)
    assert np.abs(found - ideal).max() < 1e-9 * np.abs(ideal).max()
    assert np.all(np.abs(found - ideal) < 1e-9 * np.abs(ideal) + 1e-15)


@pytest.mark.parametrize("kind", ["lowpass", "highpass", "bandpass"])
@pytest.mark.parametrize(
    "response", ["butterworth", "chebyshev", "inverse-chebyshev", "elliptic", "bessel"]
)
def test_active_rc_equals_scipy(response, kind):
    for order in range(2 if response == "elliptic" else 1, 11):
        assert_equal_to_scipy(*wanted(response, kind, order))


@pytest.mark.parametrize("kind", ["lowpass", "bandpass"])
@pytest.mark.parametrize("response", ["butterworth", "chebyshev", "bessel"])
def test_gm_c_equals_scipy(response, kind):
    for order in range(1, 11):
        spec, zpk = wanted(response, kind, order)
        assert_equal_to_scipy(spec.with_values(style="gm-c"), zpk)


@pytest.mark.parametrize(
    ("response", "kind", "orders"),
    [("butterworth", "highpass", (1, 2)), ("bessel", "highpass", (1, 2)),
     ("chebyshev", "highpass", (1, 2)), ("inverse-chebyshev", "highpass", (1, 2)),
     ("inverse-chebyshev", "lowpass", (1, 2, 3)), ("elliptic", "lowpass", (2, 3)),
     ("elliptic", "highpass", (2,)), ("inverse-chebyshev", "bandpass", (1,))],
)  # fmt: skip
def test_gm_c_with_zeros_is_exact_or_refused(response, kind, orders):
    """One section may feed in through a capacitor, the first; all other filters are refused."""
    for order in range(2 if response == "elliptic" else 1, 11):
        spec, zpk = wanted(response, kind, order)
        spec = spec.with_values(style="gm-c")
        if order in orders:
            assert_equal_to_scipy(spec, zpk)
            continue
        with pytest.raises(DataFault, match=r"load the high-impedance node.*active-rc") as caught:
            realise(spec, capacitor=1e-12)
        assert caught.value.where == "filter.style"


def test_gm_c_refuses_more_gain_than_its_capacitor_gives():
    spec = FilterSpec(
        response="butterworth", kind="highpass", order=2, edge=1e6, style="gm-c", gain_db=3.0
    )
    with pytest.raises(DataFault, match="no more than 1") as caught:
        realise(spec, capacitor=1e-12)
    assert caught.value.where == "filter.gain"


def test_gm_c_refuses_a_swing_no_plain_pair_takes():
    spec = FilterSpec(response="bessel", order=3, edge=1e6, style="gm-c", swing=0.6)
    with pytest.raises(DataFault, match=r"0\.6 V.*default of gm-c.*active-rc") as caught:
        realise(spec, capacitor=1e-12)
    assert caught.value.where == "filter.swing"
    realise(spec.with_values(swing=0.2), capacitor=1e-12)
    realise(spec.with_values(style="active-rc"), capacitor=1e-12)
    with pytest.raises(DataFault, match="plain pair"):
        realise(spec.with_values(swing=0.2, distortion_db=-60.0), capacitor=1e-12)


def test_third_harmonic_of_a_plain_pair():
    """A square-law pair with overdrive vov has ``v^2/(32 vov^2)``, a weak one the cubic of tanh."""
    assert find_cubic_divisor(0.0) == 32.0
    vov = 0.4
    amplitude = find_pair_swing(-60.0, 2 / vov)
    assert amplitude == pytest.approx(vov * np.sqrt(0.001 * find_cubic_divisor(5.0)))
    swing = find_pair_swing(-40.0, 27.0)
    angle = np.linspace(0, 2 * np.pi, 4096, endpoint=False)
    current = np.tanh(0.5 * 27.0 * swing * np.sin(angle))
    spectrum = np.abs(np.fft.rfft(current))
    assert spectrum[3] / spectrum[1] == pytest.approx(0.01, rel=0.08)


def differential(made: Realisation, model: AmplifierModel, temperature: float) -> Network:
    """Build both sides of a filter from its list of elements, wires crossed where it says so."""
    net = Network()
    net.add_voltage_source("vin", "in.p", "in.n")
    net.add_resistor("mid.p", "in.p", "0", 1.0)
    net.add_resistor("mid.n", "in.n", "0", 1.0)
    sides = {"p": "n", "n": "p"}

    def ends(element: Element, side: str) -> tuple[str, str]:
        other = sides[side] if element.crossed else side
        first, second = element.nodes
        return f"{first}.{side}", "0" if second == "0" else f"{second}.{other}"

    for element in made.elements:
        for side in sides:
            name = f"{element.name}.{side}"
            if element.kind == "resistor":
                net.add_resistor(name, *ends(element, side), element.value, temperature=temperature)
            elif element.kind == "capacitor":
                net.add_capacitor(name, *ends(element, side), element.value)
    for place in made.amplifiers:
        gm, sign = np.asarray(model.gm_total), 1.0
        if place.element is not None:
            element = made.find(place.element)
            gm, sign = np.asarray(element.value), 1.0 if element.crossed else -1.0
        pole = 2 * np.pi * np.asarray(model.excess_pole)
        net.add_vccs(place.name, (f"{place.output}.p", f"{place.output}.n"),
                     (f"{place.input}.p", f"{place.input}.n"), sign * gm / 2,
                     pole=pole)  # fmt: skip
        white = 4 * 1.380649e-23 * (temperature + 273.15) * np.asarray(model.noise_factor) * gm
        for side in sides:
            name, out = f"{place.name}.{side}", f"{place.output}.{side}"
            net.add_conductor(f"{name}.go", out, "0", model.output_conductance)
            net.add_capacitor(f"{name}.co", out, "0", model.output_capacitance)
            net.add_capacitor(f"{name}.ci", f"{place.input}.{side}", "0", model.input_capacitance)
            flicker = white * np.asarray(model.noise_corner)
            net.add_noise(f"{name}.noise", out, "0", white=white, flicker=flicker)
    return net


@pytest.mark.parametrize("style", ["active-rc", "gm-c"])
@pytest.mark.parametrize("response", ["chebyshev", "elliptic"])
def test_half_circuit_is_the_differential_circuit(response, style):
    """Transfers and noise of both sides together, with real amplifiers."""
    spec = FilterSpec(
        response=response, order=3, edge=1e6, ripple_db=0.5, attenuation_db=30.0, style=style
    )
    made = realise(spec, capacitor=3e-12)
    model = REAL if style == "active-rc" else replace(REAL, gm_total=None)
    whole, f = differential(made, model, 50.0), np.geomspace(1e3, 1e9, 61)
    half = made.network(model, temperature=50.0)
    output = (f"{made.output}.p", f"{made.output}.n")
    assert transfer(half, "vin", made.output, f) == pytest.approx(
        transfer(whole, "vin", output, f), rel=1e-9
    )
    assert 2 * compute_noise(half, made.output, f).power == pytest.approx(
        compute_noise(whole, output, f).power, rel=1e-9
    )


def test_real_amplifiers_are_batched():
    made = realise(FilterSpec(response="bessel", order=3, edge=1e6), capacitor=2e-12)
    gm = np.array([[1e-4, 1e-3], [1e-2, 1e-1]])
    f = np.array([1e5, 1e6])
    net = made.network({"A1": AmplifierModel(gm_total=gm), "A3": REAL}, rscale=[0.9, 1.1])
    found = transfer(net, "vin", made.output, f)
    assert found.shape == (2, 2, 2)
    single = made.network({"A1": AmplifierModel(gm_total=1e-2), "A3": REAL}, rscale=1.1)
    assert transfer(
        made.network({"A1": AmplifierModel(gm_total=1e-2), "A3": REAL}, rscale=0.9),
        "vin", made.output, f,
    ) == pytest.approx(found[1, 0], rel=1e-12)  # fmt: skip
    assert not np.allclose(transfer(single, "vin", made.output, f), found[1, 0])


def test_better_amplifiers_come_nearer():
    made = realise(FilterSpec(response="elliptic", order=5, edge=1e6, ripple_db=0.5,
                              attenuation_db=40.0), capacitor=2e-12)  # fmt: skip
    f = np.linspace(1e4, 1e6, 50)
    ideal = transfer(made.network(), "vin", made.output, f)
    errors = [
        np.abs(transfer(made.network(AmplifierModel(gm_total=gm)), "vin", made.output, f) - ideal)
        for gm in (1e-1, 1.0, 10.0)
    ]
    assert errors[0].max() / errors[1].max() == pytest.approx(10.0, rel=0.05)
    assert errors[1].max() / errors[2].max() == pytest.approx(10.0, rel=0.005)


def test_amplifier_faults():
    made = realise(FilterSpec(response="bessel", order=2, edge=1e6), capacitor=2e-12)
    with pytest.raises(UsageFault, match="A1 needs a finite gm_total"):
        made.network(AmplifierModel())
    with pytest.raises(UsageFault, match="finite"):
        made.network(AmplifierModel(gm_total=[1e-3, np.inf]))
    with pytest.raises(UnknownName, match="no amplifier A9"):
        made.network({"A9": REAL})
    with pytest.raises(UnknownName, match="no element R1_in"):
        made.network(factors={"R1_in": 1.1})
    with pytest.raises(DataFault, match="capacitor is not known"):
        realise(FilterSpec(response="bessel", order=2, edge=1e6))


def test_common_mode_feedback_is_positive():
    """Without the crossing a two-integrator loop grows with ideal amplifiers."""
    made = realise(FilterSpec(response="butterworth", order=2, edge=1e6), capacitor=2e-12)
    strong, weak = (
        AmplifierModel(gm_total=gain * 1e-4, output_conductance=1e-4) for gain in (300.0, 0.5)
    )
    assert find_poles(made.network(strong)).real.max() < 0
    assert find_poles(made.network(strong, common_mode=True)).real.max() > 0
    assert find_poles(made.network(weak, common_mode=True)).real.max() < 0


@pytest.mark.parametrize("style", ["active-rc", "gm-c"])
def test_impedance_level_leaves_the_response(style):
    spec = FilterSpec(response="chebyshev", order=5, edge=1e6, ripple_db=0.5, style=style,
                      source_resistance=1e3, load_capacitance=0.2e-12)  # fmt: skip
    made = realise(spec, capacitor=1e-12)
    scaled = made.scaled(3.0)
    again = realise(spec, capacitor=3e-12)
    assert [e.value for e in scaled.elements] == pytest.approx([e.value for e in again.elements])
    f = np.geomspace(1e4, 1e7, 31)
    assert transfer(scaled.network(), "vin", "v5", f) == pytest.approx(
        transfer(made.network(), "vin", "v5", f), rel=1e-9
    )
    with pytest.raises(UsageFault):
        made.scaled(0.0)


def test_source_and_load_are_part_of_the_elements():
    spec = FilterSpec(response="chebyshev", order=3, edge=1e6, ripple_db=0.5,
                      source_resistance=10e3, load_capacitance=0.5e-12,
                      load_resistance=1e6)  # fmt: skip
    f = FOUR_DECADES
    ideal = find_response(spec)(f)
    made = realise(spec, capacitor=2e-12)
    assert made.find("R1_in_a").wanted - made.find("R1_in_a").value == pytest.approx(10e3)
    assert transfer(made.network(), "vin", made.output, f) == pytest.approx(ideal, rel=1e-9)
    gm_c = realise(spec.with_values(style="gm-c"), capacitor=2e-12)
    assert transfer(gm_c.network(), "vin", gm_c.output, f) == pytest.approx(ideal, rel=1e-9)
    for values, style, key in (
        ({"source_resistance": 1e6}, "active-rc", "filter.source_resistance"),
        ({"load_capacitance": 3e-12}, "gm-c", "filter.load_capacitance"),
        ({"load_resistance": 1e4}, "gm-c", "filter.load_resistance"),
    ):
        with pytest.raises(DataFault, match="is more than the") as caught:
            realise(spec.with_values(style=style, **values), capacitor=2e-12)
        assert caught.value.where == key


def test_corners_and_single_deviations():
    made = realise(FilterSpec(response="chebyshev", order=3, edge=1e6, ripple_db=0.5),
                   capacitor=2e-12)  # fmt: skip
    f = np.geomspace(1e5, 1e7, 41)
    nominal = made.network()
    both = made.network(rscale=1.25, cscale=0.8)
    assert transfer(both, "vin", "v3", f) == pytest.approx(transfer(nominal, "vin", "v3", f))
    slow = made.network(rscale=1.25)
    assert transfer(slow, "vin", "v3", f) == pytest.approx(transfer(nominal, "vin", "v3", 1.25 * f))
    every = dict.fromkeys([e.name for e in made.elements if e.kind == "capacitor"], 1.25)
    assert transfer(made.network(factors=every), "vin", "v3", f) == pytest.approx(
        transfer(slow, "vin", "v3", f)
    )
    one = made.with_values({"R1_in_a": 1.01 * made.find("R1_in_a").value})
    assert transfer(one.network(), "vin", "v3", f) == pytest.approx(
        transfer(made.network(factors={"R1_in_a": 1.01}), "vin", "v3", f)
    )


def test_resistor_capacitance_is_that_of_a_line():
    """A distributed RC line to first order: input sC/3, transfer -(1 - sRC/6)/R."""
    ohm, farad = 1e6, 20e-15
    spec = FilterSpec(response="butterworth", order=1, edge=1e6)
    made = realise(spec, capacitor=1 / (2 * np.pi * 1e6 * ohm),
                   passives=Passives(resistor_capacitance=farad / ohm))  # fmt: skip
    f = np.array([1e4, 1e5, 1e6])
    s = 2j * np.pi * f
    root = np.sqrt(s * ohm * farad)
    y21, y11 = root / np.sinh(root) / ohm, root / np.tanh(root) / ohm
    line = y21 / (y21 + s * made.find("C1_a").value)
    found = transfer(made.network(), "vin", made.output, f)
    assert found == pytest.approx(line, rel=2e-4)
    drawn = -transfer(made.network(), "vin", "i(vin)", f)
    assert drawn.imag == pytest.approx(y11.imag, rel=2e-3)
    assert abs(found[2]) != pytest.approx(np.sqrt(0.5), rel=2e-4)


def test_bottom_plates_load_the_amplifier_outputs():
    spec = FilterSpec(response="butterworth", order=2, edge=1e6)
    plain = realise(spec, capacitor=2e-12)
    plated = realise(spec, capacitor=2e-12, passives=Passives(bottom_plate=0.05))
    f = np.geomspace(1e4, 1e8, 21)
    same = AmplifierModel(gm_total=1e-4)
    more = AmplifierModel(gm_total=1e-4, output_capacitance=0.1e-12)
    assert transfer(plated.network(same), "vin", "v2", f) == pytest.approx(
        transfer(plain.network(more), "vin", "v2", f)
    )


def test_elements_are_rounded_to_units():
    spec = FilterSpec(response="elliptic", order=5, edge=400e3, ripple_db=0.5, attenuation_db=40.0)
    made = realise(spec, capacitor=4.03e-12)
    units = Passives(unit_capacitor=50e-15, unit_resistor=2e3)
    rounded = round_elements(made, units)
    for element in rounded.elements:
        unit = 50e-15 if element.kind == "capacitor" else 2e3
        count = element.value / unit
        assert count == pytest.approx(round(count), abs=1e-9)
    f = np.linspace(1e3, 400e3, 101)
    ideal = np.abs(find_response(spec)(f))
    change = np.abs(transfer(rounded.network(), "vin", rounded.output, f)) / ideal
    assert 1e-6 < np.abs(change - 1).max() < 0.005
    for element, before in zip(rounded.elements, made.elements, strict=True):
        assert element.value == pytest.approx(before.value, rel=0.2)
    small = round_elements(made, Passives(unit_resistor=1e6)).find("R1_in_a")
    assert 1e6 / small.value == pytest.approx(round(1e6 / small.value))


def test_rounded_gm_c_keeps_time_constants():
    spec = FilterSpec(response="chebyshev", order=4, edge=1e6, ripple_db=0.5, style="gm-c",
                      load_capacitance=0.1e-12)  # fmt: skip
    rounded = round_elements(realise(spec, capacitor=1.03e-12), Passives(unit_capacitor=100e-15))
    f = np.geomspace(1e4, 1e7, 31)
    assert transfer(rounded.network(), "vin", rounded.output, f) == pytest.approx(
        find_response(spec)(f), rel=1e-9
    )


def test_parasitics_of_transconductors_are_absorbed():
    spec = FilterSpec(response="chebyshev", order=3, edge=1e6, ripple_db=0.5, style="gm-c")
    made = realise(spec, capacitor=1e-12)
    model = AmplifierModel(input_capacitance=15e-15, output_capacitance=40e-15)
    f = np.geomspace(1e4, 1e8, 31)
    assert transfer(
        absorb_parasitics(made, model).network(model), "vin", made.output, f
    ) == pytest.approx(find_response(spec)(f), rel=1e-9)
    with pytest.raises(DataFault, match="larger capacitor"):
        absorb_parasitics(made, AmplifierModel(output_capacitance=0.6e-12))
    active = realise(spec.with_values(style="active-rc"), capacitor=1e-12)
    assert absorb_parasitics(active, model) is active


def test_negative_coefficients_swap_the_wires():
    section = Section(1e6, 2.0, k2=-0.3, k1=0.4, k0=-0.9)
    for style in ("active-rc", "gm-c"):
        spec = FilterSpec(response="sections", sections=(section,), style=style)
        made = realise(spec, capacitor=1e-12)
        found = transfer(made.network(), "vin", made.output, FOUR_DECADES)
        assert found == pytest.approx(cascade_response([section], FOUR_DECADES), rel=1e-9)


def test_rounding_shifts_the_levels_little():
    spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    rounded = round_elements(realise(spec, capacitor=4e-12), Passives(unit_resistor=5e3))
    assert list(measure_levels(rounded).values()) == pytest.approx([1.0] * 5, rel=0.1)


def test_rounding_errors_compensate_one_another():
    """Coarse units, 4 % a step: each to its nearest would change the passband by 0.5 dB."""
    spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    made = realise(spec, capacitor=3.1e-12)
    units = Passives(unit_capacitor=100e-15, unit_resistor=10e3)
    rounded = round_elements(made, units)
    assert [e.value for e in round_elements(made, units).elements] == [
        e.value for e in rounded.elements
    ]
    f = np.linspace(1e3, 400e3, 201)
    change = transfer(rounded.network(), "vin", "v5", f) / find_response(spec)(f)
    assert np.abs(20 * np.log10(np.abs(change))).max() < 0.1
