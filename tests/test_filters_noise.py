"""Noise of realisations, and the impedance level it asks for."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import DataFault, UsageFault
from gmid.filters import (
    AmplifierModel,
    FilterSpec,
    Passives,
    Section,
    choose_capacitor,
    measure_noise,
    realise,
)
from gmid.filters.pairing import find_alpha

KT = 1.380649e-23 * 300.0
WARM = 26.85
ALL = (0.0, float("inf"))


def receive_filter(**given) -> FilterSpec:
    values = {
        "response": "chebyshev", "order": 5, "edge": 400e3, "ripple_db": 0.5, "swing": 0.6,
        "snr_db": 66.0, "noise_band": (1e3, 400e3),
    }  # fmt: skip
    return FilterSpec(**{**values, **given})


@pytest.mark.parametrize("style", ["active-rc", "gm-c"])
@pytest.mark.parametrize(("q", "k0"), [(0.7, 1.0), (3.0, 0.4), (10.0, -2.0)])
def test_two_integrator_lowpass(q, k0, style):
    """``kT[(1 + alpha Q)/CB + alpha Q (1 + K)/CA]`` of the half circuit, the whole band."""
    section = Section(1e6, q, k0=k0)
    spec = FilterSpec(response="sections", sections=(section,), style=style)
    alpha = find_alpha(section, [])
    made = realise(spec, capacitor=2e-12)
    half = KT / 2e-12 * ((1 + alpha * q) + alpha * q * (1 + abs(k0)))
    found = measure_noise(made, ALL, temperature=WARM)
    assert float(found.power) == pytest.approx(2 * half, rel=1e-6)


def test_amplifier_noise_does_not_shrink_with_the_filter_capacitor():
    """About ``nf kT/(beta C_stab)`` per side, for a fast integrator alone in its loop."""
    spec = FilterSpec(response="butterworth", order=1, edge=1e4)
    own = AmplifierModel(gm_total=1e-3, output_capacitance=1e-12, noise_factor=2.0)
    for capacitor in (5e-12, 50e-12):
        made = realise(spec, capacitor=capacitor)
        share = measure_noise(made, ALL, own, temperature=WARM).shares["A1"]
        # no capacitance at the virtual ground: beta is 1 and C_stab the load alone
        assert float(share) == pytest.approx(2 * 2.0 * KT / 1e-12, rel=0.01)


def test_shares_belong_to_elements_and_add_up():
    made = realise(receive_filter(), capacitor=4e-12,
                   passives=Passives(resistor_capacitance=20e-15 / 1e6))  # fmt: skip
    real = AmplifierModel(gm_total=1e-3, noise_corner=1e4)
    found = measure_noise(made, (1e3, 4e5), real, rscale=[0.8, 1.0], cscale=1.1)
    names = {e.name for e in made.elements if e.kind == "resistor"}
    assert set(found.shares) == names | {f"A{k}" for k in range(1, 6)}
    assert found.power.shape == (2,)
    assert found.power == pytest.approx(sum(found.shares.values()))
    ideal = realise(receive_filter(), capacitor=4e-12)
    lumped = measure_noise(ideal, (1e3, 4e5), real, rscale=[0.8, 1.0], cscale=1.1)
    assert found.power == pytest.approx(lumped.power, rel=2e-3)


def test_impossible_bands():
    made = realise(receive_filter(), capacitor=4e-12)
    with pytest.raises(UsageFault, match="empty"):
        measure_noise(made, (2e3, 1e3))
    with pytest.raises(UsageFault, match="0 Hz"):
        measure_noise(made, (0.0, 1e3), AmplifierModel(gm_total=1e-3, noise_corner=1e4))


def test_capacitor_for_the_wanted_ratio():
    level = choose_capacitor(receive_filter())
    assert level.because == "filter.snr"
    assert level.snr_db == pytest.approx(66.0, abs=1e-3)
    assert level.snr_db >= 66.0
    power = 0.6**2 / 2 / 10**6.6
    assert float(level.noise.power) == pytest.approx(power, rel=1e-4)
    better = choose_capacitor(receive_filter(snr_db=76.0))
    assert better.capacitor == pytest.approx(10 * level.capacitor, rel=1e-4)


def test_noise_of_amplifiers_and_the_worst_condition_count():
    spec = receive_filter()
    bare = choose_capacitor(spec)
    own = AmplifierModel(gm_total=4e-4, noise_factor=4.0, noise_corner=1e5)
    noisy = choose_capacitor(spec, amplifiers=own)
    assert noisy.capacitor > 1.03 * bare.capacitor
    along = choose_capacitor(
        spec, amplifiers=lambda made: own.scaled(made.capacitor / bare.capacitor)
    )
    assert bare.capacitor < along.capacitor < noisy.capacitor
    again = measure_noise(along.realisation, spec.noise_band,
                          own.scaled(along.capacitor / bare.capacitor))  # fmt: skip
    assert float(again.snr_db(0.6)) == pytest.approx(66.0, abs=1e-3)
    worst = choose_capacitor(
        spec, temperature=[27.0, 125.0], rscale=[[0.82], [1.18]], cscale=[[[0.88]], [[1.12]]]
    )
    assert worst.noise.power.shape == (2, 2, 2)
    assert float(worst.noise.snr_db(0.6).min()) == pytest.approx(66.0, abs=1e-3)
    # high R and high C together narrow the noise, low C raises it: the corners are not one
    assert np.ptp(worst.noise.power[..., 1]) > 0.1 * worst.noise.power.max()


def test_a_fixed_capacitor_is_honoured():
    level = choose_capacitor(receive_filter(capacitor=1e-12))
    assert level.capacitor == 1e-12
    assert level.because == "filter.capacitor"
    assert 60.0 < level.snr_db < 62.0
    bare = choose_capacitor(FilterSpec(response="bessel", order=2, edge=1e6, capacitor=1e-12))
    assert bare.noise is None
    assert bare.snr_db is None


def test_bounds_set_the_capacitor():
    level = choose_capacitor(receive_filter(smallest_capacitor=6e-12))
    assert (level.capacitor, level.because) == (pytest.approx(6e-12), "filter.smallest_capacitor")
    assert level.snr_db > 69.0
    level = choose_capacitor(receive_filter(largest_resistor=100e3))
    assert level.because == "filter.largest_resistor"
    largest = max(e.value for e in level.realisation.elements if e.kind == "resistor")
    assert largest == pytest.approx(100e3)
    gm_c = choose_capacitor(receive_filter(style="gm-c", swing=0.03, snr_db=30.0,
                                           load_capacitance=4e-12))  # fmt: skip
    assert gm_c.because == "filter.load_capacitance"
    assert gm_c.capacitor == pytest.approx(4e-12)


def test_feed_in_capacitors_count_as_capacitors():
    spec = FilterSpec(response="elliptic", order=3, edge=1e6, ripple_db=0.5, attenuation_db=40.0,
                      smallest_capacitor=100e-15)  # fmt: skip
    level = choose_capacitor(spec)
    values = [e.value for e in level.realisation.elements if e.kind == "capacitor"]
    assert min(values) == pytest.approx(100e-15)
    assert level.capacitor > 500e-15


OUT_OF_REACH = [
    ({"snr_db": 150.0}, "filter.snr", "largest capacitor on a chip"),
    ({"source_resistance": 1e6}, "filter.snr", "filter.source_resistance"),
    ({"source_resistance": 1e6, "largest_resistor": 2e5}, "filter.largest_resistor",
     "filter.source_resistance"),
    ({"capacitor": 1e-12, "largest_resistor": 1e5}, "filter.capacitor",
     "filter.largest_resistor"),
    ({"capacitor": 2e-9}, "filter.capacitor", "largest capacitor on a chip"),
    ({"snr_db": None}, "filter.capacitor", "nothing sets"),
]  # fmt: skip


@pytest.mark.parametrize(("given", "where", "words"), OUT_OF_REACH)
def test_no_capacitor_within_the_bounds(given, where, words):
    with pytest.raises(DataFault, match=words) as caught:
        choose_capacitor(receive_filter(**given))
    assert caught.value.where == where


def test_a_noisy_amplifier_may_leave_no_capacitor():
    loud = AmplifierModel(gm_total=1e-3, noise_factor=1e5)
    with pytest.raises(DataFault, match=r"out of reach.*it is") as caught:
        choose_capacitor(receive_filter(), amplifiers=loud)
    assert caught.value.where == "filter.snr"


def test_rounded_elements_still_meet_the_ratio():
    units = Passives(unit_capacitor=100e-15, unit_resistor=10e3)
    for snr in (60.0, 63.3, 66.0, 71.0):
        level = choose_capacitor(receive_filter(snr_db=snr), passives=units)
        assert level.snr_db >= snr
        assert level.snr_db < snr + 1.0
        count = level.capacitor / 100e-15
        assert count == pytest.approx(round(count))
        assert float(
            measure_noise(level.realisation, (1e3, 400e3)).snr_db(0.6)
        ) == pytest.approx(level.snr_db)  # fmt: skip
