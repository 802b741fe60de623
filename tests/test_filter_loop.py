"""Filter and amplifiers together: one circuit, its corners, its harmonics, its multiples."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.amplifier.filtering.circuit import build_filter_circuit, list_pieces
from gmid.amplifier.filtering.decks import write_filter_deck
from gmid.amplifier.filtering.distortion import measure_harmonic
from gmid.amplifier.filtering.positions import make_model, measure_transconductances, place_plans
from gmid.amplifier.filtering.realised import RealisedFilter, realise_filter
from gmid.amplifier.filtering.transconductors import choose_multiples, fit_elements
from gmid.amplifier.plan import AmplifierPlan, Level, Supply
from gmid.amplifier.predicting import predict
from gmid.circuit import solve_bias
from gmid.errors import DataFault, UnknownName
from gmid.filters import AmplifierModel, FilterSpec, Passives, Realisation, realise
from gmid.filters.noise import measure_noise
from gmid.filters.responses import find_response
from gmid.network import transfer

SPEC = FilterSpec(response="chebyshev", order=3, edge=100e3, ripple_db=0.5)
FREQUENCY = np.geomspace(1e3, 1e6, 61)
DECIBEL = 20.0


@pytest.fixture(scope="module")
def made() -> Realisation:
    return realise(SPEC, capacitor=4e-12)


def _place(made: Realisation, plan: AmplifierPlan) -> dict[str, AmplifierPlan]:
    return {place.name: plan for place in made.amplifiers}


def _solve(made: Realisation, plan: AmplifierPlan, voltage: float = 1.8) -> RealisedFilter:
    plans = _place(made, plan)
    return realise_filter(made, plans, example_devices(), example_supply(), voltage=voltage)


def test_the_response_is_that_of_the_models_where_models_are_good(made: Realisation):
    found = _solve(made, example_plan())
    supply, devices = example_supply(), example_devices()
    plan = replace(example_plan(), load_capacitance=0.2e-12)
    model = make_model([predict(plan, devices, supply, voltage=1.8)])
    plain = replace(model, **{
        name: float(np.ravel(getattr(model, name))[0]) for name in vars(model)
    })  # fmt: skip
    net = made.network(plain)
    expected = transfer(net, "vin", made.output, FREQUENCY)
    error = DECIBEL * np.log10(np.abs(found.respond(FREQUENCY) / expected))
    assert np.abs(error).max() < 0.05

    noise = found.noise((1e3, 1e5)).power
    modelled = measure_noise(made, (1e3, 1e5), plain, temperature=27.0).power
    assert noise == pytest.approx(modelled, rel=0.05)


def test_all_counts_times_three_are_a_third_of_the_impedance(made: Realisation):
    single = _solve(made, example_plan())
    triple = _solve(made.scaled(3.0), replace(example_plan(), multiple=3))
    assert triple.respond(FREQUENCY) == pytest.approx(single.respond(FREQUENCY), rel=1e-6)
    assert triple.supply_current == pytest.approx(3 * single.supply_current, rel=1e-6)
    band = (1e3, 1e5)
    assert triple.noise(band).power * 3 == pytest.approx(single.noise(band).power, rel=1e-3)


def test_corners_are_those_of_a_filter_built_with_other_elements(made: Realisation):
    values = {e.name: e.value * (1.2 if e.kind == "resistor" else 0.9) for e in made.elements}
    built = _solve(made.with_values(values), example_plan())
    corner = _solve(made, example_plan())
    seen = corner.respond(FREQUENCY, rscale=1.2, cscale=0.9)
    # the bias point does not know of the corner; it moves by microvolts
    assert seen == pytest.approx(built.respond(FREQUENCY), rel=1e-4)
    noise = corner.noise((1e3, 1e5), rscale=1.2, cscale=0.9)
    assert noise.power == pytest.approx(built.noise((1e3, 1e5)).power, rel=1e-3)


def test_a_batch_of_corners_stands_in_front_of_the_supplies(made: Realisation):
    found = realise_filter(made, _place(made, example_plan()), example_devices(), example_supply())
    r = np.array([0.8, 1.0, 1.2, 1.0])[:, None]
    seen = found.respond([1e4, 1e5], rscale=r, cscale=1 / r)
    assert seen.shape == (4, 3, 2)
    assert np.array_equal(seen[1], seen[3])
    assert seen[1] == pytest.approx(found.respond([1e4, 1e5]), rel=1e-9)


def test_bottom_plates_and_capacitances_of_resistors_are_those_of_the_half_circuit():
    passives = Passives(bottom_plate=0.05, resistor_capacitance=20e-21)
    made = realise(SPEC, capacitor=4e-12, passives=passives)
    total = sum(p.value for p in list_pieces(made) if p.kind == "capacitor" and p.nodes[1] == "0")
    half = sum(
        float(e.values["capacitance"])
        for e in made.network().elements
        if e.kind == "capacitor" and e.nodes[1] == "0"
    )
    assert total == pytest.approx(2 * half, rel=1e-9)


def test_the_common_mode_of_two_integrators_needs_a_common_mode_loop(made: Realisation):
    calm = _solve(made, example_plan())
    assert (calm.poles(common_mode=True).real < 0).all()
    slow = replace(example_plan(), error_capacitance=1e-16, error_resistance=1.0)
    assert (_solve(made, slow).poles(common_mode=True).real > 0).any()


@pytest.mark.parametrize(("order", "amplitude"), [(1, 1.0), (1, 1.2), (3, 1.5)])
def test_third_harmonic_at_low_frequency_is_that_of_the_static_curve(order: int, amplitude: float):
    spec = FilterSpec(response="butterworth", order=order, edge=150e3, load_resistance=1e6)
    made = realise(spec, capacitor=1e-12)
    devices, supply = example_devices(), example_supply()
    found = _solve(made, example_plan())
    predicted = measure_harmonic(found, devices, supply, frequency=10.0, amplitude=amplitude)

    # the whole circuit solved at points of a sine, without any mirror or linearisation
    angle = (np.arange(32) + 0.5) * 2 * np.pi / 32
    plans = _place(made, example_plan())
    circuit = build_filter_circuit(made, plans, supply, voltage=1.8).circuit
    level = 0.9 + amplitude / 2 * np.sin(angle)
    moved = circuit.with_values({"vin_p": level, "vin_n": 1.8 - level})
    bias = solve_bias(moved, devices, start=found.node_voltages).require()
    output = bias.voltage(f"{made.output}_p", f"{made.output}_n")
    one, three = (abs(np.sum(output * np.exp(-1j * k * angle))) for k in (1, 3))
    assert float(predicted.decibels) == pytest.approx(DECIBEL * np.log10(three / one), abs=0.5)


def test_an_input_common_mode_of_its_own_is_refused(made: Realisation):
    supply = Supply(1.8, 2e-6, input_common_mode=Level(0.0, 0.7))
    with pytest.raises(DataFault, match="outputs set the common mode") as caught:
        build_filter_circuit(made, _place(made, example_plan()), supply, voltage=1.8)
    assert caught.value.where == "supply.input_common_mode"


def test_every_position_needs_one_amplifier(made: Realisation):
    one = replace(example_plan(), positions=("A1", "A2"))
    with pytest.raises(DataFault, match="no amplifier stands at A3"):
        place_plans([one], made)
    with pytest.raises(DataFault, match="A2 of a2 already has"):
        place_plans([one, replace(one, name="a2", positions=("A2", "A3"))], made)
    with pytest.raises(UnknownName, match="A3 has no amplifier"):
        build_filter_circuit(made, {"A1": one, "A2": one}, example_supply(), voltage=1.8)


def test_the_deck_has_what_a_deck_has_to_have(made: Realisation):
    passives = Passives(bottom_plate=0.05, resistor_capacitance=20e-21)
    spec = SPEC.with_values(source_resistance=1e3, load_capacitance=0.5e-12, load_resistance=1e6)
    made = realise(spec, capacitor=4e-12, passives=passives)
    plan = replace(example_plan(), multiple=2)
    deck = write_filter_deck(made, _place(made, plan), example_supply())
    lines = deck.splitlines()
    assert lines[1:3] == [".include models.inc", ".include amplifier.cir"]
    assert [line.split("=")[0] for line in lines if line.startswith(".param")] == [
        ".param vsupply", ".param cload", ".param rload", ".param rscale", ".param cscale",
    ]  # fmt: skip
    assert sum(line.startswith((".ac", ".tran", ".op", ".dc", ".noise")) for line in lines) == 1
    assert not any(line.startswith(".options") for line in lines)
    calls = [line for line in lines if line.startswith("x")]
    assert [line.split()[0] for line in calls] == ["xA1", "xA2", "xA3"]
    assert calls[2].split()[3:5] == ["vop", "von"]
    assert "iref_a1 vdd iref_a1 4e-06" in lines
    assert len({line.split()[0].lower() for line in lines if line[0] in "RCrcxei"}) == sum(
        line[0] in "RCrcxei" for line in lines
    )


GM_C = FilterSpec(response="chebyshev", order=5, edge=1e6, ripple_db=0.3, style="gm-c")


def test_capacitors_put_the_poles_of_whole_multiples_back():
    made = realise(GM_C, capacitor=2e-12)
    multiples = choose_multiples(made)
    assert max(multiples.values()) <= 8
    fitted = fit_elements(made, multiples, 15e-6)
    response = find_response(GM_C)(FREQUENCY)
    real = transfer(fitted.network(), "vin", fitted.output, FREQUENCY)
    ratio = DECIBEL * np.log10(np.abs(real / response))
    assert np.ptp(ratio) < 1e-9
    for place in fitted.amplifiers:
        units = fitted.find(str(place.element)).value / 15e-6
        assert units == pytest.approx(multiples[place.name], rel=1e-12)


def test_capacitances_of_transconductors_are_taken_off_the_nodes():
    made = realise(GM_C, capacitor=2e-12)
    multiples = choose_multiples(made)
    own = AmplifierModel(output_capacitance=5e-15, input_capacitance=2e-15)
    models = {name: own.scaled(m) for name, m in multiples.items()}
    fitted = fit_elements(made, multiples, 15e-6, models=models)
    real = transfer(fitted.network(models), "vin", fitted.output, FREQUENCY)
    ratio = DECIBEL * np.log10(np.abs(real / find_response(GM_C)(FREQUENCY)))
    assert np.ptp(ratio) < 1e-9
    with pytest.raises(DataFault, match="more than the"):
        fit_elements(made, multiples, 15e-9, models=models)


def test_a_transconductor_is_measured_where_it_stands():
    made = realise(FilterSpec(response="butterworth", order=2, edge=1e6, style="gm-c"),
                   capacitor=20e-12)  # fmt: skip
    plans = {place.name: replace(example_plan(), multiple=1 + k)
             for k, place in enumerate(made.amplifiers)}  # fmt: skip
    found = realise_filter(made, plans, example_devices(), example_supply(), voltage=1.8)
    alone = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    expected = [float(alone.signal.gm_total) * plan.multiple for plan in plans.values()]
    assert measure_transconductances(found) == pytest.approx(np.array(expected), rel=0.01)
